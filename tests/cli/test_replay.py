"""slackwater replay: a flown flight, logged and replayed, answers as it flew; tables, figures and telemetry."""

from __future__ import annotations

import numpy as np
import pytest

from pyharness.cli import main
from pyharness.controllers import load_controller
from pyharness.flight.records import columns, to_columns
from pyharness.loop import Flight, fly
from pyharness.replay import read_log, replay, write_log

CYCLES = 150


@pytest.fixture(scope="module")
def record(demo_scaling):
    """A flight whose clock wraps, past the end of hold-off."""
    flight = Flight(demo_scaling, CYCLES, start_us=2**32 - 20_000_000)
    return fly([flight], load_controller("c"))[0]


@pytest.fixture
def log(tmp_path, record):
    """The log of that flight."""
    path = tmp_path / "log.csv"
    write_log(path, record.inputs)
    return path


@pytest.fixture
def telemetry(tmp_path, record, library):
    """Its frames, but for a gap of four."""
    path = tmp_path / "frames.bin"
    path.write_bytes(library.telemetry(np.delete(record.outputs, slice(100, 104))))
    return path


def run(capsys, *argv: object) -> tuple[int, str, str]:
    status = main(["replay", *map(str, argv)])
    out, err = capsys.readouterr()
    return status, out, err


@pytest.mark.parametrize("name", ["c", "exact"])
def test_a_flown_flight_answers_the_same_from_its_log(record, log, demo_scaling, monkeypatch, name):
    monkeypatch.setattr("pyharness.replay.replayed._CHUNK", 40)
    controller = load_controller(name)
    told = []
    replayed = replay(read_log(log, controller.interface), demo_scaling, controller, told.append)
    assert (to_columns(replayed.outputs) == to_columns(record.outputs)).all()
    assert replayed.damping.any() and sum(told) == CYCLES
    np.testing.assert_allclose(replayed.time_s, record.time_s, atol=1e-9)


def test_it_tells_what_the_controller_answered(capsys, record, log, demo_scaling):
    status, out, err = run(capsys, log)
    assert (status, err) == (0, "")
    assert f"config 0x{demo_scaling.config['digest']:08x}" in out
    assert (
        f"{CYCLES} rows, {(CYCLES - 1) * demo_scaling.period_s:g} s from first to last, controller c" in out
    )
    counters = record.outputs["counters"][-1]
    assert f"{counters['trusted']} trusted, {counters['rejected']} rejected" in out
    assert "hold-off from row 0, damping from row" in out and "row 0 (line 2)" in out and "clock " not in out


def test_odd_clocks_are_told_by_row(capsys, tmp_path, record):
    write_log(tmp_path / "log.csv", np.delete(record.inputs, slice(17, 20)))
    _, out, _ = run(capsys, tmp_path / "log.csv")
    assert (
        "clock     row 17 (line 19): 3 cycles missing: begins 2000000 µs after the row before, the period is 500000 µs\n"
        in out
    )


def test_a_status_bit_is_told_with_its_first_row(capsys, tmp_path, record, library):
    inputs = record.inputs.copy()
    inputs["path"]["mag_valid"][[30, 31, 90]] = 0
    write_log(tmp_path / "log.csv", inputs)
    _, out, _ = run(capsys, tmp_path / "log.csv")
    text = library.interface.header.texts["MRD_S_SAMPLE_MISSING"]
    (line,) = [line for line in out.splitlines() if line.startswith(text)]
    assert line.removeprefix(text).split() == ["3", "row", "30", "(line", "32)"]


def test_the_table_has_every_integer_and_its_physical_value(capsys, tmp_path, record, log, demo_scaling):
    table = tmp_path / "trace.csv"
    assert run(capsys, log, "--csv", table)[0] == 0
    header, *rows = [line.split(",") for line in table.read_text(encoding="utf-8").splitlines()]
    names = columns(record.outputs.dtype)
    assert header[: len(names) + 2] == ["row", "time_s", *names] and len(rows) == CYCLES
    assert (np.array([row[2 : len(names) + 2] for row in rows], np.int64) == to_columns(record.outputs)).all()
    at = header.index("trace.calibration.field[1] [nT]")
    assert float(rows[70][at]) == pytest.approx(
        record.outputs["trace"]["calibration"]["field"][70, 1] * demo_scaling.field_t * 1e9
    )
    assert float(rows[70][1]) == pytest.approx(35)


@pytest.mark.parametrize(("name", "start"), [("a.png", b"\x89PNG"), ("a.SVG", b"<?xml")])
def test_the_figure(capsys, tmp_path, log, name, start):
    first = tmp_path / name
    again = tmp_path / f"again-{name}"
    for path in (first, again):
        assert run(capsys, log, "--plot", path)[0] == 0
    assert first.read_bytes().startswith(start) and first.read_bytes() == again.read_bytes()


def test_a_log_of_a_single_rejected_row_is_drawn_too(capsys, tmp_path, record):
    inputs = record.inputs[:1].copy()
    inputs["path"]["mag_valid"] = inputs["path"]["gyro_valid"] = 0
    write_log(tmp_path / "log.csv", inputs)
    status, out, _ = run(capsys, tmp_path / "log.csv", "--plot", tmp_path / "a.svg")
    assert status == 0 and "0 trusted, 1 rejected" in out and "Rate estimate at the end  none" in out


def test_the_columns_are_listed(capsys):
    status, out, _ = run(capsys, "--columns")
    assert status == 0 and "path.mag_raw[0] to [2]" in out


def test_telemetry_alone_is_told(capsys, tmp_path, record, telemetry):
    table = tmp_path / "frames.csv"
    status, out, _ = run(capsys, "--telemetry", telemetry, "--csv", table)
    assert status == 0 and f"{CYCLES - 4} frames, 4 lost, 0 resets" in out
    entered = int(np.argmax(record.outputs["mode"] == record.outputs["mode"][-1]))
    lines = {line.split()[0]: line for line in out.splitlines() if line.strip()}
    assert "was hold-off" in lines[str(entered)] and "damping" in lines[str(entered)]
    assert "4 lost before it" in lines["100"] and lines["100"].split()[1] == "104"
    rate = np.degrees(record.outputs["rate"][-1] * record.flight.scaling.rate_rad_s)
    assert f"{rate:.3f} °/s" in lines[str(CYCLES - 5)]
    assert lines["trusted"].split()[-1] == str(record.outputs["counters"]["trusted"][-1])
    header, *rows = [line.split(",") for line in table.read_text(encoding="utf-8").splitlines()]
    assert len(rows) == CYCLES - 4 and [row[header.index("cycle")] for row in rows[98:102]] == [
        "98",
        "99",
        "104",
        "105",
    ]


def test_telemetry_of_another_mission_keeps_its_rates_in_counts(capsys, tmp_path, record, library):
    outputs = record.outputs[:5].copy()
    outputs["digest"][3] ^= 1
    (tmp_path / "frames.bin").write_bytes(library.telemetry(outputs))
    status, out, _ = run(capsys, "--telemetry", tmp_path / "frames.bin")
    assert status == 0 and f"config    0x{outputs['digest'][3]:08x} in frame 3: not this mission's" in out
    assert f"{outputs['rate'][-1]} counts" in out


def test_telemetry_is_held_against_the_replay(capsys, tmp_path, record, log, telemetry, library):
    status, out, _ = run(capsys, log, "--telemetry", telemetry)
    assert status == 0 and f"{CYCLES - 4} frames, all as replayed" in out
    outputs = record.outputs.copy()
    outputs["ticks"][70, 1] += 1
    telemetry.write_bytes(library.telemetry(outputs))
    status, out, _ = run(capsys, log, "--telemetry", telemetry)
    assert (
        status == 1
        and f"frame 70, cycle 70: ticks[1] is {outputs['ticks'][70, 1]}, the replay has {record.outputs['ticks'][70, 1]}"
        in out
    )


@pytest.mark.parametrize(
    ("argv", "told"),
    [
        ((), "nothing to replay: name a LOG, or --telemetry FILE"),
        (("--telemetry", "{frames}", "--plot", "a.png"), "--plot a.png: needs a LOG"),
        (("{log}", "--plot", "a.pdf"), "--plot a.pdf: must end in .png or .svg"),
        (("{log}", "--csv", "{log}"), "--csv {log}: is also what is read; it would be replaced"),
        (("{log}", "--csv", "/no/a.csv"), "--csv /no/a.csv: there is no folder /no"),
        (("{frames}",), "{frames}: line 1: not UTF-8"),
        (("{log}", "--telemetry", "{log}"), "{log}: 20 problems, reading stopped there"),
        (("--telemetry", "/"), "/: cannot be read: Is a directory"),
        (("/no/log.csv",), "/no/log.csv: cannot be read: No such file or directory"),
    ],
)
def test_what_cannot_be_used_is_told(capsys, log, telemetry, argv, told):
    places = {"log": log, "frames": telemetry}
    status, _, err = run(capsys, *(word.format(**places) for word in argv))
    assert status == 2 and err.startswith(f"slackwater: {told.format(**places)}")
