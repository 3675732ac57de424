"""The demo, files that are no mission, overrides and digests."""

from __future__ import annotations

import hashlib
from dataclasses import fields
from datetime import UTC, datetime
from pathlib import Path

import pytest

from pyharness.mission import MissionError, demo_path, load_mission, mission_path, model
from pyharness.mission.schema import BY_PATH, KEYS, OPTIONAL_TABLES

BASE = Path(__file__).with_name("base.toml")


def test_the_demo_loads_and_says_that_it_is_invented():
    mission = load_mission(demo_path())
    assert "invented" in mission.name
    assert all(abs(rate) >= 10.0 for rate in mission.body.tip_off_deg_s)
    for coil in mission.coil:
        if coil.winding:
            assert coil.dipole_a_m2 == coil.winding.dipole_a_m2(mission.supply.nominal_v)


def test_plover_is_another_kind_of_mission():
    demo, plover = load_mission(demo_path()), load_mission(mission_path("plover"))
    assert mission_path("demo") == demo_path()
    assert "invented" in plover.name
    assert plover.gyro is None and demo.gyro is not None
    assert plover.current_sense is not None and demo.current_sense is None
    assert {coil.core for coil in plover.coil} == {"air"}
    assert max(coil.time_constant_ms for coil in plover.coil) < 1.0
    assert plover.tip_off_rad_s > 4.0 * demo.tip_off_rad_s
    assert plover.magnetometer.noise_nt > 3.0 * demo.magnetometer.noise_nt
    assert 8.0 * plover.magnetometer.counts_per_ut <= demo.magnetometer.counts_per_ut


def test_the_commented_tables_of_the_demo_are_legal_and_its_own_defaults(tmp_path):
    """Whoever takes the # away gets the same defences, and a current sense."""
    text = demo_path().read_text(encoding="utf-8")
    head, tail = text.split("# [defence]\n")
    path = tmp_path / "uncommented.toml"
    lines = [line.removeprefix("# ") if " = " in line or "[current" in line else line for line in tail.splitlines()]
    path.write_text(head + "[defence]\n" + "\n".join(lines), encoding="utf-8")
    given, default = load_mission(path), load_mission(demo_path())
    assert given.defence == default.defence
    assert given.current_sense == model.CurrentSense(1800, 4.0, 90, 50.0)


def test_a_mission_says_what_its_file_says():
    mission = load_mission(BASE)
    assert mission.name == "Dunlin (invented, for tests)"
    assert mission.source == str(BASE)
    assert mission.body.inertia_kg_m2 == (
        (0.0108, 0.0007, -0.0005),
        (0.0007, 0.0312, 0.0004),
        (-0.0005, 0.0004, 0.0330),
    )
    assert mission.orbit.epoch_utc == datetime(2027, 3, 14, 9, 30, tzinfo=UTC)
    assert mission.orbit.two_line_elements is None
    assert [coil.core for coil in mission.coil] == ["cored", "cored", "air"]
    assert [coil.polarity for coil in mission.coil] == [1, -1, 1]
    assert mission.magnetometer.stray_ut_per_a_m2[1] == (20.0, -90.0, 15.0)
    assert mission.cycle.pulse_tick_us == 100
    assert mission.control.K_n_m_s == 2.0e-4
    assert mission.control.k_am2_s_per_t is None and mission.control.gain is None


def test_defaults_are_filled_in():
    mission = load_mission(BASE)
    # A quarter of 5738.99 s, and 0.6 × 23.12 µT to 1.35 × 46.25 µT: see test_orbit for where these come from.
    assert mission.control.dwell_s == 1434.7
    assert (mission.control.field_min_ut, mission.control.field_max_ut) == (13.9, 62.4)
    assert [coil.blanking_ms for coil in mission.coil] == [60.0, 60.0, 60.0]
    assert mission.coil[2].remanence_fraction == 0.0
    assert mission.control.bench_key == 0x5AA5
    assert mission.control.wake_dwell_s == 10.0


def test_dipole_follows_from_the_winding():
    # Copper: 0.00393 / K at 20 °C (IEC 60028, from memory). 58 Ω at 20 °C are 58 × 1.05895 = 61.4191 Ω at
    # 35 °C; 7.4 V drive 0.1204837 A through them, around 240 × 0.0072 m² = 1.728 m².
    coil = load_mission(BASE).coil[2]
    assert coil.dipole_a_m2 == pytest.approx(0.2081958, abs=5e-8)
    assert coil.winding.dipole_a_m2(2 * 7.4) == pytest.approx(2 * 0.2081958, abs=1e-7)


def test_a_pair_doubles_what_is_derived_and_not_what_is_given():
    pair = {"coil": {axis: {"mirrored_pair": True} for axis in "xyz"}}
    single, double = load_mission(BASE), load_mission(BASE, pair)
    assert double.coil[2].dipole_a_m2 == 2.0 * single.coil[2].dipole_a_m2
    assert double.coil[0].dipole_a_m2 == single.coil[0].dipole_a_m2


def test_gyro_may_be_left_out():
    without = {"gyro": None, "control": {"settle_by": None}}
    mission = load_mission(BASE, without)
    assert mission.gyro is None
    assert mission.control.settle_by == "field"
    with_gyro = load_mission(BASE, {"control": {"settle_by": None}})
    assert with_gyro.control.settle_by == "gyro"


def test_schema_and_model_have_the_same_keys():
    tables = {
        "body": model.Body, "orbit": model.Orbit, "supply": model.Supply, "magnetometer": model.Magnetometer,
        "gyro": model.Gyro, "cycle": model.Cycle, "control": model.Control,
        "defence": model.Defence, "current_sense": model.CurrentSense,
    }  # fmt: skip
    for table, cls in tables.items():
        named = {path.split(".")[1] for path in BY_PATH if path.startswith(f"{table}.")}
        assert named == {f.name for f in fields(cls)}, table
    coil = {key.name for key in KEYS if key.path.startswith("coil.*.")}
    assert coil == {f.name for cls in (model.Coil, model.Winding) for f in fields(cls)} - {"winding"}
    assert OPTIONAL_TABLES < tables.keys()


def test_overrides_merge_replace_and_delete():
    mission = load_mission(
        BASE,
        {
            "body": {"tip_off_deg_s": [1, 2, 3]},
            "control": {"K_n_m_s": None, "gain": "auto"},
            "gyro": {"noise_deg_s": 0},
        },
    )
    assert mission.body.tip_off_deg_s == (1.0, 2.0, 3.0)
    assert mission.control.gain == "auto" and mission.control.K_n_m_s is None
    assert mission.gyro.noise_deg_s == 0.0
    assert mission.gyro.range_deg_s == 120.0, "the rest of the table stays"


def test_a_whole_file_as_overrides_is_the_same_mission(tmp_path, base_tree):
    empty = tmp_path / "empty.toml"
    empty.write_bytes(b"")
    from_tree, from_file = load_mission(empty, base_tree), load_mission(BASE)
    for part in ("body", "orbit", "supply", "coil", "magnetometer", "gyro", "cycle", "control", "defence",
                 "current_sense"):
        assert getattr(from_tree, part) == getattr(from_file, part)


def test_overrides_are_checked_and_left_alone(problems):
    overrides = {"cycle": {"period_ms": 19}, "control": {"wake_deg_s": None}}
    assert problems(overrides) == [
        "cycle.period_ms: 19 ms, must be in [20, 10000]",
        "control.wake_deg_s: missing, must be a number in [0.01, 180] °/s",
    ]
    assert overrides == {"cycle": {"period_ms": 19}, "control": {"wake_deg_s": None}}


def test_digest_is_that_of_file_and_overrides():
    raw = BASE.read_bytes()
    assert load_mission(BASE).digest == hashlib.sha256(raw).hexdigest()[:12]
    assert load_mission(BASE, {}).digest == load_mission(BASE).digest
    some = {"cycle": {"sample_ms": 18.0, "blanking_ms": 50.0}, "body": {"drag_force_n": None}}
    canonical = b'{"body":{"drag_force_n":null},"cycle":{"blanking_ms":50.0,"sample_ms":18.0}}'
    assert load_mission(BASE, some).digest == hashlib.sha256(raw + canonical).hexdigest()[:12]


@pytest.mark.parametrize(
    ("content", "fragments"),
    [
        (b"name = 'x'\n[cycle\nperiod_ms = 3", ["TOML", "line 2, column", '"[cycle"']),
        (b"name = 'x'\nname = 'y'\n", ["TOML", "overwrite"]),
        (b"name = 'x'\nnote = '\xff'", ["UTF-8", "0xff", "line 2"]),
        (b"a = " + b"[" * 100_000, ["nested too deeply"]),
        (b"a = " + b"9" * 10_000, ["TOML"]),
    ],
    ids=["syntax", "twice", "encoding", "nesting", "digits"],
)
def test_a_file_that_is_not_toml(tmp_path, content, fragments):
    path = tmp_path / "broken.toml"
    path.write_bytes(content)
    with pytest.raises(MissionError) as caught:
        load_mission(path)
    (problem,) = str(caught.value).splitlines()
    assert problem.startswith(f"{path}: is not ")
    for fragment in fragments:
        assert fragment in problem


def test_an_integer_too_long_to_print(tmp_path):
    path = tmp_path / "long.toml"
    path.write_bytes(b"name = 0x" + b"f" * 10_000)
    with pytest.raises(MissionError, match="name: an integer of 40000 bits .an integer., must be a text"):
        load_mission(path)


@pytest.mark.parametrize(
    ("name", "fragment"), [("absent.toml", "No such file"), ("", "directory"), ("a\0b", "null")]
)
def test_a_file_that_cannot_be_read(tmp_path, name, fragment):
    with pytest.raises(MissionError, match=f"cannot be read: .*{fragment}"):
        load_mission(f"{tmp_path}/{name}")


def test_an_empty_file_misses_every_required_key(tmp_path):
    path = tmp_path / "empty.toml"
    path.write_bytes(b"")
    with pytest.raises(MissionError) as caught:
        load_mission(path)
    named = [problem.split(":")[0] for problem in caught.value.problems if ": missing, must be " in problem]
    required = [path for path, key in BY_PATH.items() if key.required and path.split(".")[0] not in OPTIONAL_TABLES]
    assert set(required) < set(named)
    assert "  cycle.period_ms: missing, must be a number in [20, 10000] ms" in str(caught.value).splitlines()


def test_all_problems_in_one_go(problems):
    planted = {
        "coil": {"x": {"dipole_a_m2": 0}},
        "body": {"tip_off_deg_s": [12.0, "fast", 13.0]},
        "cycle": {"period_ms": None},
        "control": {"setled_deg_s": 0.3, "wake_deg_s": 0.2},
        "magnetometer": {"range_ut": 50},
    }
    assert problems(planted) == [
        'body.tip_off_deg_s[1]: "fast" (a text), must be a number in [-360, 360] °/s',
        "coil.x.dipole_a_m2: 0 A m², must be in (0, 50]",
        "cycle.period_ms: missing, must be a number in [20, 10000] ms",
        "control.setled_deg_s: unknown key, the nearest known key here is settled_deg_s",
        "magnetometer.range_ut 50 µT, must exceed 64.55 µT: control.field_max_ut 62.4 µT with "
        "magnetometer.bias_ut [1.4, -0.9, 2.1] µT and magnetometer.bias_error_ut [0.06, -0.04, 0.05] µT",
        "control.wake_deg_s 0.2 °/s, must be above control.settled_deg_s 0.4 °/s",
    ]


def test_the_error_says_file_count_and_one_problem_a_line():
    error = MissionError("some.toml", ["a: 1 m, must be in [2, 3]", "b: missing"])
    assert str(error) == "some.toml: 2 problems\n  a: 1 m, must be in [2, 3]\n  b: missing"
    assert (error.source, error.problems) == ("some.toml", ["a: 1 m, must be in [2, 3]", "b: missing"])
