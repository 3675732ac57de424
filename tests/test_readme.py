"""The README is run: its Python example, and its commands but for the two that install."""

from __future__ import annotations

import re
import shlex
import shutil
from pathlib import Path

import pytest

from pyharness.cli import main
from pyharness.cli.main import parser

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    """The fenced blocks of a language."""
    return re.findall(rf"```{language}\n(.*?)```", README, re.DOTALL)


def commands() -> list[list[str]]:
    """The slackwater commands in the shell blocks, as words."""
    lines = [line for block in blocks("sh") for line in block.splitlines() if line.startswith(".venv/bin/slackwater ")]
    return [shlex.split(line, comments=True)[1:] for line in lines]


def test_the_python_example():
    (example,) = blocks("python")
    assert len([line for line in example.splitlines() if line.strip()]) <= 12
    exec(compile(example, "README.md", "exec"), {})  # noqa: S102


@pytest.fixture(scope="module")
def checkout(tmp_path_factory):
    """A folder like a checkout, with the copied mission of the README."""
    folder = tmp_path_factory.mktemp("readme")
    shutil.copytree(ROOT / "vectors", folder / "vectors")
    assert "cp pyharness/missions/demo.toml my.toml" in README
    shutil.copy(ROOT / "pyharness" / "missions" / "demo.toml", folder / "my.toml")
    return folder


@pytest.mark.parametrize("words", commands(), ids=" ".join)
def test_every_command(checkout, monkeypatch, capsys, words):
    """Faults take minutes to fly: .ci/run does; here their options are read."""
    monkeypatch.chdir(checkout)
    if words[0] == "faults":
        assert parser().parse_args(words).mission == "my.toml"
        return
    assert main(words) == 0
    capsys.readouterr()


def test_the_first_run_shows_what_it_says(checkout, monkeypatch, capsys):
    """The quoted output is that of a real run: the integers' digests, rates, times and rows."""
    (quoted,) = [block for block in blocks("text") if block.startswith("sources ")]
    monkeypatch.chdir(checkout)
    assert main(["review"]) == 0
    real = capsys.readouterr().out
    for line in quoted.splitlines():
        if line.startswith("mission"):  # where the file lies depends on the folder
            assert line.split(", ", 1)[1] in real
        elif not line.startswith("sources"):
            assert line in real, line


def test_the_install_lines_are_the_ones_that_ci_runs():
    ci = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    installs = [line for block in blocks("sh") for line in block.splitlines() if line.startswith("python3 -m venv")]
    assert len(installs) == 2
    assert "grep '^python3 -m venv .*pytest$' README.md" in ci and "grep '^python3 -m venv .*review$' README.md" in ci


def test_the_cautions_are_shown():
    from pyharness.cli.main import EPILOG

    page = (ROOT / "pyharness" / "review" / "page.html.jinja").read_text(encoding="utf-8")
    for text in (README, page, EPILOG, (ROOT / "fsw_c" / "README.md").read_text(encoding="utf-8")):
        assert "not flight-qualified" in text and "polarity" in text
