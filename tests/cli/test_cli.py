"""The command as its users meet it: output, exit status, messages, and no half-written files."""

from __future__ import annotations

import json
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pyharness.cli import main
from pyharness.flight import find_sources
from pyharness.mission import demo_path

VECTORS = Path(__file__).parents[2] / "vectors"


@pytest.fixture
def mission(tmp_path) -> Path:
    """A copy of the demo mission to change."""
    return Path(shutil.copy(demo_path(), tmp_path / "my.toml"))


def run(capsys, *argv: object) -> tuple[int, str, str]:
    status = main([str(a) for a in argv])
    out, err = capsys.readouterr()
    return status, out, err


def test_scale_shows_integers_and_sizes(capsys):
    status, out, _ = run(capsys, "scale")
    assert status == 0
    assert "sources   " in out and find_sources().digest in out
    assert "path.window_ticks" in out and "400 ms" in out


def test_scale_json_is_the_configuration(capsys, demo_scaling):
    _, out, _ = run(capsys, "scale", "--json")
    assert json.loads(out) == json.loads(json.dumps(demo_scaling.config))


def test_scale_header_compiles_to_the_same_integers(capsys, tmp_path, library, demo_scaling):
    """The header is taken by a C compiler, and mrd_init accepts what it holds."""
    header = tmp_path / "mission_config.h"
    assert run(capsys, "scale", "--header", header)[0] == 0
    program = tmp_path / "main.c"
    program.write_text(
        '#include <stdio.h>\n#include "mission_config.h"\n'
        'int main(void) { printf("%u %lu\\n", (unsigned)mrd_init(&mission_config), (unsigned long)mission_config.digest); return 0; }\n'
    )
    sources = find_sources()
    flags = ["-std=c99", "-Wall", "-Wextra", "-Wconversion", "-Wpedantic", "-Werror"]
    units = [str(path) for path in sources.c_files]
    subprocess.run(["cc", *flags, f"-I{sources.include}", str(program), *units, "-o", str(tmp_path / "main")], check=True)
    done = subprocess.run([str(tmp_path / "main")], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["0", str(demo_scaling.config["digest"])]


def test_scale_header_survives_a_hostile_name(capsys, mission, tmp_path):
    mission.write_text(mission.read_text().replace('name = "Tern (invented demo)"', 'name = "*/ int x; /*"'))
    header = tmp_path / "h.h"
    assert run(capsys, "scale", mission, "--header", header)[0] == 0
    subprocess.run(["cc", "-fsyntax-only", f"-I{find_sources().include}", str(header)], check=True)


def test_scale_keys_lists_every_key(capsys):
    from pyharness.mission.schema import KEYS

    _, out, _ = run(capsys, "scale", "--keys")
    assert all(f"{key.path}\n" in out for key in KEYS)


def test_every_problem_of_a_mission_is_told_at_once(capsys, mission):
    text = mission.read_text().replace("dipole_a_m2 = 0.24 ", "dipole_a_m2 = 0.0 ", 1).replace("low_pass_s", "lwo_pass_s")
    mission.write_text(text)
    status, out, err = run(capsys, "scale", mission)
    assert (status, out) == (2, "")
    assert err == (
        f"slackwater: {mission}: 2 problems\n"
        "  coil.x.dipole_a_m2: 0 A m², must be in (0, 50]\n"
        "  control.lwo_pass_s: unknown key, the nearest known key here is low_pass_s\n"
    )


def test_fly_tells_how_it_went_and_writes_table_and_figures(capsys, tmp_path):
    table, figures = tmp_path / "flight.csv", tmp_path / "figures"
    status, out, _ = run(capsys, "fly", "--duration", "30", "--csv", table, "--plot", figures)
    assert status == 0
    assert "True ‖ω‖ at the end" in out
    rows = table.read_text().splitlines()
    assert len(rows) == 61 and rows[0].startswith("time_s,true_rate_deg_s_x")
    cells = rows[1].split(",")
    np.testing.assert_allclose([float(c) for c in cells[1:4]], (11.0, -10.0, 12.0), rtol=1e-6)
    assert {path.suffix for path in figures.iterdir()} == {".png"}
    assert all(path.read_bytes().startswith(b"\x89PNG") for path in figures.iterdir())


@pytest.mark.parametrize("controller", ["c", "exact", "truth"])
def test_fly_takes_any_controller(capsys, controller):
    status, out, _ = run(capsys, "fly", "--cycles", "20", "--controller", controller)
    assert status == 0 and f"controller {controller}" in out


def test_trace_shows_every_stage(capsys):
    status, out, _ = run(capsys, "trace", "--cycle", "100")
    assert status == 0
    for stage in ("calibration", "plausibility", "gate", "derivative", "low-pass", "law", "saturation", "pulses", "estimate", "modes"):
        assert f"\n{stage} " in out
    assert "dipole x, mA m²" in out and "mode      damping" in out


def test_vectors_check_passes_through_every_controller(capsys, tmp_path):
    (tmp_path / "unit").mkdir()
    shutil.copy(VECTORS / "unit" / "pulses.csv", tmp_path / "unit")
    for controller in ("c", "exact", "truth"):
        status, out, _ = run(capsys, "vectors", "check", tmp_path, "--controller", controller)
        assert status == 0 and f"1 files, 180 rows through {controller}, 0 failed" in out


def test_no_vectors_is_a_failure(capsys, tmp_path):
    status, _, err = run(capsys, "vectors", "check", tmp_path)
    assert status == 1 and "no vectors here" in err
    status, _, err = run(capsys, "review", "--vectors", tmp_path, "--out", tmp_path / "page.html")
    assert status == 1 and "no vectors here" in err and not (tmp_path / "page.html").exists()


@pytest.mark.parametrize(
    ("unit", "old", "new", "stage"),
    [
        ("calibration.c", "value != out[i]", "value == out[i]", "calibration"),
        ("derivative.c", "change * (int32_t)factor, 14)", "change * (int32_t)factor, 13)", "derivative"),
        ("low_pass.c", "+ MRD_BIT(14)) >> 8", "+ MRD_BIT(13)) >> 8", "low-pass"),
        ("law.c", "-(int32_t)trace->low_pass", "(int32_t)trace->low_pass", "law"),
        ("saturation.c", "+ 32768u) >> 16", "+ 32767u) >> 16", "saturation"),
        ("pulses.c", "config->window_ticks), 15)", "config->window_ticks), 14)", "pulses"),
        ("gate.c", "*age_us >= blanking_us", "*age_us > blanking_us", "gate"),
        ("estimate.c", "(uint32_t)change << 15", "(uint32_t)change << 14", "estimate"),
        ("modes.c", "ticks >= 1u", "ticks >= 2u", "commanded pulses"),
    ],
)
def test_a_change_in_a_stage_fails_the_check_and_names_it(capsys, tmp_path, unit, old, new, stage):
    """One constant or sign changed in one C file: `vectors check` fails, and the first difference is in that stage."""
    copy = tmp_path / "fsw_c"
    shutil.copytree(find_sources().root, copy)
    path = copy / "src" / unit
    assert old in path.read_text()
    path.write_text(path.read_text().replace(old, new))
    status, out, _ = run(capsys, "vectors", "check", VECTORS, "--sources", copy)
    assert status == 1
    failed = [line for line in out.splitlines() if line.startswith("FAIL")]
    assert failed and any(f", stage {stage}: " in line for line in failed), failed


def test_vectors_compare(capsys, tmp_path):
    other = tmp_path / "other"
    shutil.copytree(VECTORS, other)
    assert run(capsys, "vectors", "compare", VECTORS, other)[:2][0] == 0
    path = other / "unit" / "pulses.csv"
    lines = path.read_text().splitlines()
    names = next(line for line in lines if not line.startswith("#")).split(",")
    cells = lines[-1].split(",")
    cells[names.index("outputs.trace.pulses.ticks[2]")] = "7"
    path.write_text("\n".join([*lines[:-1], ",".join(cells), ""]))
    digest = other / "digests" / "detumble.json"
    content = json.loads(digest.read_text())
    content["checkpoints"][3] = "0" * 16
    digest.write_text(json.dumps(content))
    (other / "digests" / "detumble-along-field.json").unlink()
    status, out, _ = run(capsys, "vectors", "compare", VECTORS, other)
    assert status == 1 and "unit/pulses: pulses: 1 of 180 rows, first 179" in out
    assert "digests/detumble.json: integers differ first between cycles 1800 and 2399" in out
    assert f"digests/detumble-along-field.json: only in {VECTORS}" in out


@pytest.mark.parametrize(
    ("argv", "message"),
    [
        (("fly", "--cycles", "0"), "length: 0 cycles, must be in [1, 1000000]"),
        (("fly", "--seed", "-1", "--cycles", "5"), "--seed: -1, must be 0 or more"),
        (("fly", "--controller", "b", "--cycles", "5"), "no controller 'b', must be c, exact, truth or lib:PATH"),
        (("fly", "--sources", "/nowhere", "--cycles", "5"), "/nowhere: no controller sources here"),
        (("fly", "--rate", "nan", "0", "0", "--cycles", "5"), "--rate: nan °/s, each must be in [-360, 360] °/s"),
        (("scale", "/no/such.toml"), "/no/such.toml: cannot be read: No such file or directory"),
        (("trace", "--cycle", "-1"), "--cycle: -1, must be in [0, 999999]"),
        (("fly", "--cycles", "5", "--csv", "/no/flight.csv"), "--csv /no/flight.csv: there is no folder /no"),
        (("review", "--out", "/proc/page.html"), "--out /proc/page.html: cannot be written: "),
        (("fly", "--cycles", "5", "--rate", "1e9", "0", "0"), "--rate: 1e+09 °/s, each must be in [-360, 360] °/s"),
        (("fly", "--cycles", "5", "--supply", "9"), "--supply: 9 V, must be in [6.6, 8.4] V, the mission's range"),
        (("trace", "--cycle", "99999999"), "--cycle: 99999999, must be in [0, 999999]"),
    ],
)
def test_bad_input_is_told_without_a_traceback(capsys, argv, message):
    status, _, err = run(capsys, *argv)
    assert status == 2
    assert message in err and "Traceback" not in err


def test_a_missing_compiler_is_one_clear_line(capsys, monkeypatch):
    monkeypatch.setenv("CC", "no-such-compiler")
    status, _, err = run(capsys, "fly", "--cycles", "5")
    assert status == 2
    assert err.count("\n") == 1 and err.startswith("slackwater: no C compiler: 'no-such-compiler' was not found. Install one")


@given(words=st.lists(st.sampled_from(["scale", "fly", "trace", "vectors", "check", "--cycles", "--cycle", "3", "-1", "x", "--json", "--seed",
                                       "1e9", "", "--controller", "exact", "∞", "--rate"]), max_size=5))  # fmt: skip
@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_command_line_ends_in_a_status(capsys, monkeypatch, tmp_path, words):
    """Argument errors leave through argparse with 2; everything else returns a status. Never a traceback."""
    monkeypatch.chdir(tmp_path)
    if "fly" in words and "--cycles" not in words:
        words = [*words, "--cycles", "3"]
    try:
        status = main(words)
    except SystemExit as stop:
        status = stop.code
    assert status in (0, 1, 2)
    capsys.readouterr()


def test_an_interrupted_write_leaves_the_old_file(tmp_path, monkeypatch):
    from pyharness.whole_files import replacing, write_whole

    path = tmp_path / "page.html"
    write_whole(path, "old")
    with pytest.raises(KeyboardInterrupt), replacing(path) as temporary:
        temporary.write_text("half")
        raise KeyboardInterrupt
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_an_interruption_is_told(capsys, monkeypatch):
    import pyharness.cli.fly as command

    def interrupted(*args, **kwargs):
        raise KeyboardInterrupt

    monkeypatch.setattr(command, "fly", interrupted)
    status, _, err = run(capsys, "fly", "--cycles", "5")
    assert status == 130 and "interrupted" in err
