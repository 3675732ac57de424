"""Logs: what is written is read back, and whatever is missing, illegal or out of order is named by row and line."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from pyharness.flight import Library
from pyharness.flight.records import columns
from pyharness.replay import FIELDS, RecordingError, read_log, write_log
from pyharness.vectors.unit import quiet_cycles

ROOT = Path(__file__).parents[2]
REQUIRED = (
    "path.cycle_start_us,path.sample_us,path.switch_off_us[0],path.switch_off_us[1],path.switch_off_us[2],"
    "path.mag_raw[0],path.mag_raw[1],path.mag_raw[2],path.mag_valid"
)


@pytest.fixture
def log(tmp_path, library):
    """Write a log of these lines and read it: log(*lines, backward=False)."""

    def read(*lines: str, **options):
        path = tmp_path / "log.csv"
        path.write_text("\n".join(lines), encoding="utf-8")
        return read_log(path, library.interface, **options)

    return read


def row(start: int, rest: str = "70000,0,0,0,1500,-1200,1800,1") -> str:
    return f"{start},{rest}"


def problems(call, *args, **options) -> list[str]:
    with pytest.raises(RecordingError) as caught:
        call(*args, **options)
    return caught.value.problems


def test_what_is_written_is_read_back(tmp_path, library, demo_scaling):
    inputs = quiet_cycles(20, demo_scaling.config["path"], library.interface.inputs)
    inputs["command_ticks"] = np.arange(-10, 10)
    inputs["path"]["cycle_start_us"] += 2**32 - 5_000_000 - 3 * 500_000  # the clock wraps after three rows
    write_log(tmp_path / "log.csv", inputs, ["flown by a test", "seed 1"])
    log = read_log(tmp_path / "log.csv", library.interface)
    assert (log.inputs == inputs).all()
    assert log.inputs["path"]["cycle_start_us"][4] < log.inputs["path"]["cycle_start_us"][0]
    assert log.place(3) == "row 3 (line 7)" and (tmp_path / "log.csv").read_text().splitlines()[6].startswith(
        "0,"
    )


def test_columns_that_are_left_out_have_their_defaults(log):
    read = log(REQUIRED, row(0), row(500_000))
    path = read.inputs["path"]
    assert path["mag_raw"].tolist() == [[1500, -1200, 1800]] * 2 and path["mag_valid"].tolist() == [1, 1]
    assert path["cycle_start_us"].tolist() == [0, 500_000]
    assert read.inputs["separation_s"].tolist() == [2**32 - 1] * 2
    for name in ("gyro_valid", "current_valid"):
        assert not path[name].any()
    for name in ("low_power", "command", "command_key"):
        assert not read.inputs[name].any()


def test_comments_marks_and_line_ends_of_other_tools_are_taken(tmp_path, library):
    path = tmp_path / "log.csv"
    path.write_bytes(
        b"\xef\xbb\xbf# bench\r\n"
        + REQUIRED.replace(",", ", ").encode()
        + b"\r\n# rows\r\n"
        + row(0).encode()
        + b"\r\n\r\n"
    )
    log = read_log(path, library.interface)
    assert len(log.inputs) == 1 and log.place(0) == "row 0 (line 4)"


def test_every_column_has_its_place_in_the_table(library):
    names = [name.partition("[")[0] for name in columns(library.interface.inputs)]
    assert [field.name for field in FIELDS] == list(dict.fromkeys(names))
    assert {field.name: field.count for field in FIELDS} == {name: names.count(name) for name in names}
    assert [field.name for field in FIELDS if field.group == "required"] == list(
        dict.fromkeys(c.partition("[")[0] for c in REQUIRED.split(","))
    )


def test_the_readme_has_the_table():
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    rows = re.findall(
        r"^\| `((?:path\.)?\w+)(?:\[0\]` to `\[2\])?` \| (.*?) \| (.*?) \| (.*?) \|$", readme, re.MULTILINE
    )
    assert rows == [(field.name, field.unit, field.presence, field.meaning) for field in FIELDS]


@pytest.mark.parametrize(
    ("header", "told"),
    [
        (REQUIRED.replace("mag_valid", "mag_vaild"), [
            'line 1: column 9: "path.mag_vaild" is no column of a log, the nearest known name is path.mag_valid',
            "line 1: missing: path.mag_valid (required)"]),
        (REQUIRED + ",path.sample_us", ["line 1: column 10: path.sample_us is there already, as column 2"]),
        (REQUIRED.replace("path.sample_us,", "") + ",path.sample_us", ["line 1: column 9: path.sample_us must stand before path.mag_valid"]),
        (REQUIRED.replace("path.mag_raw[1],", ""), ["line 1: missing: path.mag_raw[1] (required)"]),
        (REQUIRED + ",path.gyro_valid", [
            "line 1: missing: path.gyro_raw[0], path.gyro_raw[1] and path.gyro_raw[2] (the columns of the gyro are given together, or not at all)"]),
        ("0,70000,0,0,0,1,2,3,1", [
            "line 1: no column names: this line must begin with path.cycle_start_us; `slackwater replay --columns` lists them"]),
    ],
)  # fmt: skip
def test_wrong_column_names_are_named_with_what_is_expected(log, header, told):
    assert problems(log, header, row(0)) == told


@pytest.mark.parametrize(
    ("line", "told"),
    [
        ("500000,70000,0,0,0,1500,-1200,1800", "8 cells, must be 9: ends before path.mag_valid"),
        ("500000,70000,0,0,0,1500,-1200,1800,1,1", "10 cells, must be 9"),
        ("", "1 cell, must be 9: ends before path.sample_us"),
        (
            "500000,70000,0,0,0,1500,,1800,1",
            "path.mag_raw[1]: missing, must be an integer in [-32768, 32767]",
        ),
        (
            "500000,70000,0,0,0,1500,1.5,1800,1",
            'path.mag_raw[1]: "1.5", must be an integer in [-32768, 32767]',
        ),
        (
            "500000,70000,0,0,0,1500,1_0,1800,1",
            'path.mag_raw[1]: "1_0", must be an integer in [-32768, 32767]',
        ),
        ("500000,70000,0,0,0,1500,٣,1800,1", 'path.mag_raw[1]: "٣", must be an integer in [-32768, 32767]'),
        (
            "500000,70000,0,0,0,1500,-32769,1800,1",
            'path.mag_raw[1]: "-32769", must be an integer in [-32768, 32767]',
        ),
        (
            "500000,4294967296,0,0,0,1500,1,1800,1",
            'path.sample_us: "4294967296", must be an integer in [0, 4294967295]',
        ),
        ("500000,70000,0,0,0,1500,1,1800,-1", 'path.mag_valid: "-1", must be an integer in [0, 65535]'),
        ("-1,70000,0,0,0,1500,1,1800,1", 'path.cycle_start_us: "-1", must be an integer in [0, 4294967295]'),
        (
            "499999,70000,0,0,0,1500,1,1800,1",
            "path.cycle_start_us: 499999, must not be earlier than 500000, in the row before",
        ),
        (
            "9" * 5000 + ",0,0,0,0,1,1,1,1",
            f'path.cycle_start_us: "{"9" * 60}…", must be an integer in [0, 4294967295]',
        ),
    ],
)
def test_a_wrong_row_is_named(log, line, told):
    assert problems(log, REQUIRED, row(500_000), "# a comment", line, row(1_000_000)) == [
        f"row 1 (line 4): {told}"
    ]


def test_values_at_the_ends_of_their_ranges_are_taken(log):
    read = log(REQUIRED, "4294967295,0,4294967295,0,0,-32768,32767,0,65535", "0,4294967295,0,0,0,0,0,0,0")
    assert read.inputs["path"]["mag_raw"][0].tolist() == [-32768, 32767, 0]


def test_all_problems_are_told_up_to_twenty(log):
    told = problems(log, REQUIRED, row(0, "x,0,0,0,1,2,y,1"), row(1), row(0), row(2, "0,0,0,0,1,2,3,"))
    assert [line.partition(":")[0] for line in told] == [
        "row 0 (line 2)",
        "row 0 (line 2)",
        "row 2 (line 4)",
        "row 3 (line 5)",
    ]
    with pytest.raises(RecordingError, match="20 problems, reading stopped there") as caught:
        log(REQUIRED, *["1"] * 50)
    assert str(caught.value).count("\n") == 20


def test_a_repeated_cycle_and_on_request_a_clock_that_was_set_back_are_taken(log):
    assert len(log(REQUIRED, row(500_000), row(500_000)).inputs) == 2
    lines = REQUIRED, row(500_000), row(0), row(2**31 - 1)
    assert problems(log, *lines) == [
        "row 1 (line 3): path.cycle_start_us: 0, must not be earlier than 500000, in the row before"
    ]
    assert len(log(*lines, backward=True).inputs) == 3
    assert problems(log, REQUIRED, row(0), row(2**31)) != []


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"", "the file is empty: no column names, no rows"),
        (b"\n \n", "the file is empty: no column names, no rows"),
        (b"# nothing\n", "the file is empty: no column names, no rows"),
        (REQUIRED.encode(), "no rows after the column names"),
        (REQUIRED.encode() + b"\n1,2,\xff", f"line 2: not UTF-8: byte 0xff at offset {len(REQUIRED) + 5}"),
    ],
)
def test_a_file_that_is_no_log(tmp_path, library, content, told):
    (tmp_path / "log.csv").write_bytes(content)
    assert problems(read_log, tmp_path / "log.csv", library.interface) == [told]


def test_a_log_that_is_too_long(tmp_path, library: Library, monkeypatch):
    monkeypatch.setattr("pyharness.replay.log.MOST_ROWS", 2)
    (tmp_path / "log.csv").write_text("\n".join([REQUIRED, row(0), row(1), row(2)]))
    assert problems(read_log, tmp_path / "log.csv", library.interface) == ["3 rows, must be 2 or less"]
