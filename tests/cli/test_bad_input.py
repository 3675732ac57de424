"""Mutated missions, vectors, logs, telemetry and command lines: a message with the place, never a traceback or half a file."""

from __future__ import annotations

import io
import re
import shutil
import tempfile
from pathlib import Path

import pytest
from hypothesis import HealthCheck, Phase, example, given, settings
from hypothesis import strategies as st

from pyharness.cli import main
from pyharness.controllers import load_controller
from pyharness.loop import Flight, fly
from pyharness.mission import demo_path
from pyharness.replay import write_log
from pyharness.vectors import VectorFile, to_text
from pyharness.vectors.files import sizes_of

MISSION = Path(demo_path()).read_bytes()

EXTREMES = (
    b"", b"0", b"-0", b"-1", b"1e400", b"-1e308", b"1e-320", b"nan", b"-inf", b"9" * 19, b"9" * 5000, b"0x10", b"1_0", b"true", b'""', b'"\\u0000"',
    b"[]", b"[1, 2]", b"{}", b"{a = {b = {c = 1}}}", b"2026-01-01T00:00:00Z", b"\x00", b"\xff\xfe", "∞".encode(), "٣".encode(), b"1.5", b"+1",
    b"[" * 3000, b"a.b.c = 1", b"[[coil]]", b"#", b",", b"\r", b'"""',
)  # fmt: skip


@st.composite
def mutations(draw: st.DrawFn, most: int = 4):
    """A function that damages bytes: in lines, in values, or anywhere."""
    steps = draw(
        st.lists(
            st.tuples(st.sampled_from(sorted(_DAMAGE)), st.integers(0, 2**30), st.sampled_from(EXTREMES)),
            min_size=1,
            max_size=most,
        )
    )

    def mutate(data: bytes) -> bytes:
        for kind, at, what in steps:
            data = _DAMAGE[kind](data, at, what)
        return data

    return mutate


def _with_line(change):
    """Damage of one line: change(lines, index, what)."""

    def damage(data: bytes, at: int, what: bytes) -> bytes:
        lines = data.split(b"\n")
        change(lines, at % len(lines), what)
        return b"\n".join(lines)

    return damage


def _replace_value(lines: list[bytes], i: int, what: bytes) -> None:
    """What stands behind "=" or ":", or one cell of a row."""
    cells = lines[i].split(b",")
    if len(cells) > 3:
        cells[len(lines) % len(cells)] = what
        lines[i] = b",".join(cells)
    else:
        lines[i] = re.sub(rb"(?<=[=:]).*", lambda _: b" " + what, lines[i], count=1)


def _swap(lines: list[bytes], i: int, what: bytes) -> None:
    lines[i], lines[i - 1] = lines[i - 1], lines[i]


_DAMAGE = {
    "cut": lambda data, at, what: data[: at % (len(data) + 1)],
    "flip": lambda data, at, what: (
        data[: (k := at % max(len(data), 1))]
        + bytes(b ^ 1 << at % 8 for b in data[k : k + 1])
        + data[k + 1 :]
    ),
    "insert": lambda data, at, what: data[: (k := at % (len(data) + 1))] + what + data[k:],
    "remove": lambda data, at, what: data[: (k := at % (len(data) + 1))] + data[k + 1 + at % 7 :],
    "drop line": _with_line(lambda lines, i, what: lines.pop(i)),
    "double line": _with_line(lambda lines, i, what: lines.insert(i, lines[i])),
    "replace line": _with_line(lambda lines, i, what: lines.__setitem__(i, what)),
    "swap lines": _with_line(_swap),
    "replace value": _with_line(_replace_value),
}


@pytest.fixture(scope="module")
def record(demo_scaling):
    """A short flight."""
    return fly([Flight(demo_scaling, 30)], load_controller("c"))[0]


@pytest.fixture(scope="module")
def samples(record, library, tmp_path_factory) -> dict[str, bytes]:
    """An undamaged file of each kind."""
    log = tmp_path_factory.mktemp("samples") / "log.csv"
    write_log(log, record.inputs, ["a comment"])
    scaling = record.flight.scaling
    vector = VectorFile(
        name="short", tier="unit", purpose="to be damaged", seed=0, overrides={"control": {"law": "rate"}}, command="none", config=scaling.config,
        sizes=sizes_of(scaling, library.interface), inputs=record.inputs[:10], outputs=record.outputs[:10],
    )  # fmt: skip
    return {
        "mission": MISSION,
        "log": log.read_bytes(),
        "frames": library.telemetry(record.outputs),
        "vector": to_text(vector).encode(),
    }


@pytest.fixture
def ended(capsys):
    """Run a command line in process: its status and message, after checks that hold for every one."""

    def run(*argv: object, told: str = "") -> int:
        try:
            status = main([str(word) for word in argv])
        except SystemExit as stop:
            status = stop.code
        out, err = capsys.readouterr()
        assert status in (0, 1, 2), err
        assert "Traceback" not in out + err
        if status == 2:
            assert ("slackwater: " in err or "error: " in err) and told in err, err
        return status

    return run


def assert_whole(target: Path, status: int, ending: bytes = b"\n") -> None:
    """The target is as it was, or new and complete; nothing temporary is left beside it."""
    content = target.read_bytes()
    assert content == b"old" if status == 2 else content.endswith(ending), content[-40:]
    assert [path for path in target.parent.iterdir() if path.name.startswith(".")] == []


QUIET = settings(
    max_examples=40,
    phases=[Phase.explicit, Phase.generate],
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
"""Examples are small as they are drawn: shrinking them would only run every command a thousand times more."""


@pytest.fixture
def scratch(tmp_path):
    """A new folder for each example, with an old file to write to."""

    def make() -> Path:
        folder = Path(tempfile.mkdtemp(dir=tmp_path))
        (folder / "target").write_bytes(b"old")
        return folder

    return make


@given(mutate=mutations())
@example(mutate=lambda data: b"a = " + b"[" * 10_000)
@example(mutate=lambda data: data.replace(b"= 0.24", b"= " + b"9" * 5000, 1))
@QUIET
def test_any_mission_file(ended, scratch, samples, mutate):
    folder = scratch()
    mission = folder / "my.toml"
    mission.write_bytes(mutate(samples["mission"]))
    status = ended("scale", mission, "--header", folder / "target", told=str(mission))
    assert_whole(folder / "target", status)
    assert ended("scale", mission, "--json") == status
    if status == 0 and len(mission.read_bytes()) % 4 == 0:  # a quarter of those that are legal is flown
        assert_whole(
            folder / "target",
            ended("fly", mission, "--cycles", "3", "--csv", folder / "target", told=str(mission)),
        )


@given(mutate=mutations(most=2))
@QUIET
def test_any_vector_file(ended, scratch, samples, mutate):
    folder = scratch()
    (folder / "unit").mkdir()
    path = folder / "unit" / "short.csv"
    path.write_bytes(mutate(samples["vector"]))
    before = path.read_bytes()
    ended("vectors", "check", folder, told=str(path))
    ended("vectors", "compare", folder, folder, told=str(path))
    assert path.read_bytes() == before


@given(mutate=mutations(most=2))
@QUIET
def test_any_log(ended, scratch, samples, mutate):
    folder = scratch()
    log = folder / "log.csv"
    log.write_bytes(mutate(samples["log"]))
    status = ended("replay", log, "--csv", folder / "target", told=str(log))
    assert_whole(folder / "target", status)
    assert len((folder / "target").read_bytes().splitlines()) in (1, *range(20, 50))


@given(mutate=mutations(most=2))
@QUIET
def test_any_telemetry(ended, scratch, samples, mutate):
    folder = scratch()
    frames = folder / "frames.bin"
    frames.write_bytes(mutate(samples["frames"]))
    status = ended("replay", "--telemetry", frames, "--csv", folder / "target", told=f"{frames}: ")
    assert_whole(folder / "target", status)


@pytest.mark.parametrize("kind", ["mission", "log", "frames", "vector"])
def test_the_undamaged_files_are_taken(ended, scratch, samples, kind):
    """Otherwise the tests above would only show that everything is refused."""
    folder = scratch()
    path = folder / kind
    path.write_bytes(samples[kind])
    if kind == "vector":
        (folder / "unit").mkdir()
        shutil.move(path, folder / "unit" / "short.csv")
    argv = {
        "mission": ("scale", path),
        "log": ("replay", path),
        "frames": ("replay", "--telemetry", path),
        "vector": ("vectors", "check", folder),
    }
    assert ended(*argv[kind]) == 0


OPTIONS = {
    "scale": ("--header", "--sources", "--json"),
    "fly": (
        "--cycles",
        "--duration",
        "--seed",
        "--rate",
        "--supply",
        "--csv",
        "--plot",
        "--format",
        "--controller",
        "--sources",
        "--along-field",
    ),
    "trace": ("--cycle", "--seed", "--controller", "--sources"),
    "replay": (
        "--mission",
        "--telemetry",
        "--csv",
        "--plot",
        "--controller",
        "--sources",
        "--backward",
        "--columns",
    ),
    "vectors check": ("--mission", "--controller", "--sources", "--long"),
}
BARE = ("--json", "--along-field", "--backward", "--columns", "--long")
NUMBERS = ("3", "0", "-1", "1e9", "nan", "-inf", "9" * 30, "٣", "", " ", "x")
PLACES = (
    "",
    ".",
    "..",
    "/proc/no/such",
    "my.toml",
    "log.csv",
    "frames.bin",
    "closed",
    "new/file",
    "new.png",
    "a" * 300,
    "\udcff",
    "--",
    "-",
)
NAMES = ("c", "exact", "truth", "C", "lib:", "lib:.", "lib:my.toml", "png", "pdf", "∞")


@st.composite
def command_lines(draw: st.DrawFn) -> list[str]:
    """A command with options of its own, most with a value, and perhaps a place that is no option's."""
    command = draw(st.sampled_from(sorted(OPTIONS)))
    words = command.split()
    for option in draw(st.lists(st.sampled_from(OPTIONS[command]), max_size=3)):
        words += [option] if option in BARE else [option, draw(st.sampled_from((*NUMBERS, *PLACES, *NAMES)))]
    words += draw(st.lists(st.sampled_from(PLACES), max_size=1))
    short = {"fly": ["--cycles", "3"], "trace": ["--cycle", "3"]}
    return words + short.get(command, [])


@given(words=command_lines())
@settings(QUIET, max_examples=150)
def test_any_command_line(ended, samples, scratch, monkeypatch, words):
    """Odd values, missing files, folders, files that may not be read: in a folder of its own, which keeps what is in it."""
    folder = scratch()
    monkeypatch.chdir(folder)
    for name, content in (
        ("my.toml", "mission"),
        ("log.csv", "log"),
        ("frames.bin", "frames"),
        ("closed", "mission"),
    ):
        Path(name).write_bytes(samples[content])
    (folder / "vectors" / "unit").mkdir(parents=True)
    (folder / "vectors" / "unit" / "short.csv").write_bytes(samples["vector"])
    Path("closed").chmod(0)
    ended(*words)
    assert [path for path in folder.rglob(".*")] == []


def test_a_folder_and_a_closed_file_in_place_of_each_input(ended, tmp_path):
    closed = tmp_path / "closed"
    closed.write_bytes(MISSION)
    closed.chmod(0)
    for path in (tmp_path, closed):
        for argv in (
            ("scale", path),
            ("fly", path, "--cycles", "3"),
            ("replay", path),
            ("replay", "--telemetry", path),
        ):
            if path is tmp_path or not _readable(closed):
                assert ended(*argv, told=str(path)) == 2


def _readable(path: Path) -> bool:
    """Whether this user may read what nobody may: the administrator can."""
    try:
        path.read_bytes()
    except PermissionError:
        return False
    return True


def test_a_terminal_that_cannot_show_a_sign(monkeypatch):
    """° and µ, and the names of files, are replaced on a terminal that does not have them."""
    terminal = io.TextIOWrapper(io.BytesIO(), encoding="ascii")
    monkeypatch.setattr("sys.stdout", terminal)
    assert main(["scale"]) == 0
    terminal.flush()
    assert b"\\xb0/s" in terminal.buffer.getvalue()
