"""Ctrl-C at work and in the middle of writing: what was there stays, nothing temporary is left, and the exit status says so."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from pyharness.controllers import load_controller
from pyharness.loop import Flight, fly
from pyharness.replay import write_log

_AT_WORK = """
import signal, sys
from pyharness.cli import main
signal.signal(signal.SIGINT, signal.default_int_handler)  # a shell may have started us with it ignored
sys.exit(main(sys.argv[1:]))
"""

_WRITING = (
    """
import os, time
import pyharness.cli.vectors
def stand_still(source, target):
    print("about to rename", source, flush=True)
    time.sleep(600)
os.replace = stand_still
pyharness.cli.vectors.make_vectors = lambda *given: {"unit/short.csv": "new"}  # the flights take minutes
"""
    + _AT_WORK
)

COMMANDS = {
    "vectors write": ("vectors", "write", "--out", "mine"),
    "replay --csv": ("replay", "log.csv", "--csv", "table.csv", "--controller", "exact"),
    "fly --csv": ("fly", "--cycles", "{cycles}", "--csv", "table.csv"),
}


@pytest.fixture(scope="module")
def inputs(demo_scaling):
    """A short flight; it also has the C built before the clock of any test runs."""
    return fly([Flight(demo_scaling, 20)], load_controller("c"))[0].inputs


@pytest.fixture
def folder(tmp_path, inputs):
    """A folder with a log, and with something old wherever a command writes."""
    write_log(tmp_path / "log.csv", inputs)
    (tmp_path / "mine" / "unit").mkdir(parents=True)
    for name in ("table.csv", "mine/unit/short.csv"):
        (tmp_path / name).write_text("old")
    return tmp_path


def content(folder: Path) -> dict[str, bytes]:
    """Every file below a folder."""
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def interrupted(program: str, argv: list[str], line: str, folder: Path) -> tuple[int, str]:
    """Run slackwater in the folder and interrupt it at the line of output that begins so; status and message."""
    environment = {
        **os.environ,
        "PYTHONUNBUFFERED": "1",
        "PYTHONPATH": os.pathsep.join(filter(None, sys.path)),
    }
    process = subprocess.Popen(
        [sys.executable, "-c", program, *argv],
        cwd=folder,
        env=environment,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    with process:
        try:
            assert any(out.startswith(line) for out in process.stdout), process.stderr.read()
            process.send_signal(signal.SIGINT)
            _, err = process.communicate(timeout=60)
        finally:
            process.kill()
    return process.returncode, err


@pytest.mark.parametrize("name", COMMANDS)
def test_interrupted_while_writing(folder, name):
    before = content(folder)
    argv = [word.format(cycles=3) for word in COMMANDS[name]]
    status, err = interrupted(_WRITING, argv, "about to rename", folder)
    assert status == 130 and "slackwater: interrupted" in err and "Traceback" not in err, err
    assert content(folder) == before


@pytest.mark.parametrize(("name", "line"), [("vectors write", "sources"), ("fly --csv", "mission")])
def test_interrupted_at_work(folder, name, line):
    """Long before anything is written: these take minutes."""
    before = content(folder)
    argv = [word.format(cycles=1_000_000) for word in COMMANDS[name]]
    status, err = interrupted(_AT_WORK, argv, line, folder)
    assert status == 130 and "slackwater: interrupted" in err and "Traceback" not in err, err
    assert content(folder) == before
