"""Where controller and plant meet."""

from __future__ import annotations

import numpy as np
import pytest

from pyharness.controllers import Controller, ControllerError, load_controller
from pyharness.events import Command, DropGyro, DropSample, Jitter, Kick, LateSwitchOff, LowPower
from pyharness.exact import constants as mrd
from pyharness.flight.records import to_columns
from pyharness.loop import Flight, fly
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale

CYCLES = 240


@pytest.fixture(scope="module")
def c() -> Controller:
    return load_controller("c")


def one(scaling, controller, cycles=CYCLES, **keys):
    (record,) = fly([Flight(scaling, cycles, **({"separation_s": 100} | keys))], controller)
    return record


def same(a, b) -> bool:
    """Two records agree in every integer and every bit of the true motion."""
    return (
        bool((to_columns(a.inputs) == to_columns(b.inputs)).all())
        and bool((to_columns(a.outputs) == to_columns(b.outputs)).all())
        and a.rate_rad_s.tobytes() == b.rate_rad_s.tobytes()
        and a.field_t.tobytes() == b.field_t.tobytes()
    )


def test_a_flight_does_not_depend_on_the_others(demo_scaling, c):
    """Alone, or in a batch with longer and shorter flights of other missions."""
    other = scale(load_mission(demo_path(), {"orbit": {"inclination_deg": 20.0}, "control": {"law": "rate"}}))
    alone = one(demo_scaling, c, seed=5)
    batch = fly([Flight(other, 60, seed=1), Flight(demo_scaling, CYCLES, seed=5, separation_s=100), Flight(other, 300, seed=2)], c)
    assert [len(record.inputs) for record in batch] == [60, CYCLES, 300]
    assert same(batch[1], alone)


def test_c_and_exact_fly_the_same_flight(demo_scaling, c):
    assert same(one(demo_scaling, c, 120), one(demo_scaling, load_controller("exact"), 120))


def test_a_library_built_elsewhere_flies_the_same_flight(demo_scaling, c):
    elsewhere = load_controller(f"lib:{c.library.path}")
    assert elsewhere.name == f"lib:{c.library.path}"
    assert same(one(demo_scaling, c, 60), one(demo_scaling, elsewhere, 60))


def test_seeds_matter_and_repeat(demo_scaling, c):
    assert same(one(demo_scaling, c, 60, seed=3), one(demo_scaling, c, 60, seed=3))
    assert not same(one(demo_scaling, c, 60, seed=3), one(demo_scaling, c, 60, seed=4))


def test_unknown_controllers_are_told():
    with pytest.raises(ControllerError, match="no controller 'b', must be c, exact, truth or lib:PATH"):
        load_controller("b")
    with pytest.raises(ControllerError, match="there is no file /nowhere.so"):
        load_controller("lib:/nowhere.so")


def test_the_tumble_slows_down(demo_scaling, c):
    record = one(demo_scaling, c, 1200)
    assert record.true_rate_deg_s[-1] < 0.8 * record.true_rate_deg_s[0]


def test_a_reversed_coil_is_seen_in_the_energy(demo_scaling, c):
    """The test above can fail: with every polarity wrong the same controller speeds the tumble up."""
    wrong = {"polarity": tuple(-p for p in demo_scaling.config["path"]["polarity"])}
    config = {**demo_scaling.config, "path": {**demo_scaling.config["path"], **wrong}}
    from dataclasses import replace

    from pyharness import exact

    config["digest"] = exact.config_digest(config)
    record = one(replace(demo_scaling, config=config), c, 1200)
    assert record.true_rate_deg_s[-1] > 1.1 * record.true_rate_deg_s[0]


def test_along_field_starts_along_the_field(demo_scaling, c):
    record = one(demo_scaling, c, 1, along_field=True)
    rate, field = record.rate_rad_s[0], record.field_t[0]
    assert np.dot(rate, field) == pytest.approx(np.linalg.norm(rate) * np.linalg.norm(field), rel=1e-9)
    assert record.true_rate_deg_s[0] == pytest.approx(np.degrees(demo_scaling.mission.tip_off_rad_s))


def test_no_coil_is_on_in_a_sample_and_stamps_are_true(demo_scaling, c):
    """Promise 5: every stamp is the end of the pulse before, and leaves the blanking time before the sample."""
    record = one(demo_scaling, c)
    path = record.inputs["path"]
    config = demo_scaling.config["path"]
    start = path["sample_us"].astype(np.int64) - config["half_sample_us"]
    window = path["cycle_start_us"].astype(np.int64) + config["phase_us"] + config["delay_us"]
    driven = record.applied_ticks != 0
    stamp = window[:, None] + np.abs(record.applied_ticks) * config["tick_us"]
    assert driven.any()
    np.testing.assert_array_equal(path["switch_off_us"][1:][driven[:-1]], stamp[:-1][driven[:-1]])
    assert (start[1:, None] - stamp[:-1] >= np.array(config["blanking_us"])).all()


def test_events_reach_the_controller(demo_scaling, c):
    plain = one(demo_scaling, c, 71)
    full = int(np.abs(plain.outputs["ticks"][70]).argmax())  # a coil that is on for the whole drive window
    assert abs(plain.outputs["ticks"][70, full]) == demo_scaling.timeline.window_ticks
    events = (DropSample(50, 52), DropGyro(60, 62), LateSwitchOff(70, 71, coil=full, ticks=300), LowPower(90, 95),
              Command(110, mrd.MRD_COMMAND_SAFE), Jitter(76, 88, us=1500), Kick(105, (1.0, 2.0, 3.0)))  # fmt: skip
    record = one(demo_scaling, c, events=events)
    missing, gyro, blanked = (record.bit(getattr(mrd, f"MRD_S_{n}")) for n in ("SAMPLE_MISSING", "GYRO_MISSING", "BLANKED"))
    assert np.flatnonzero(missing).tolist() == [50, 51]
    assert np.flatnonzero(gyro).tolist() == [60, 61]
    assert np.flatnonzero(blanked).tolist() == [0, 71]  # in the first cycle nothing is known of the coils
    modes = record.outputs["mode"]
    assert set(modes[90:95]) == {mrd.MRD_MODE_INHIBIT} and set(modes[110:]) == {mrd.MRD_MODE_SAFE}
    np.testing.assert_allclose(np.degrees(record.rate_rad_s[105]), (1.0, 2.0, 3.0))
    factors = record.outputs["trace"]["derivative"]["factor"]
    assert (factors[76:88] != 16384).any() and (factors[2:50] == 16384).all()


def test_jitter_moves_the_field_that_is_sampled(c):
    """The derivative over the measured interval is that of a sample on time; taken over the period it would not be."""
    scaling = scale(load_mission(demo_path(), {"magnetometer": {"noise_nt": 0.0, "counts_per_ut": 160.0}}))
    rate = (11.0, -9.0, 12.0)
    plain = one(scaling, c, 120, rate_deg_s=rate, separation_s=0)
    moved = one(scaling, c, 120, rate_deg_s=rate, separation_s=0, events=(Jitter(4, 120, us=2000),))
    kept, off_time = (record.outputs["trace"]["derivative"] for record in (plain, moved))
    on = off_time["valid"] != 0
    measured = off_time["interval_us"][:, None] / scaling.timeline.period_us
    apart = (off_time["derivative"] - kept["derivative"])[on]
    uncorrected = (off_time["derivative"] * measured - kept["derivative"])[on]
    assert on.sum() > 100
    assert apart.std() < 0.6 * uncorrected.std()


def test_a_run_of_two_parts_equals_the_whole(demo_scaling, c):
    """State copied between: the controller's snapshot is all that it carries."""
    record = one(demo_scaling, c, 80)
    c.configure([demo_scaling])
    first = c.run(record.inputs[:33])
    kept = c.snapshot()
    c.reset()
    c.restore(kept)
    second = c.run(record.inputs[33:])
    np.testing.assert_array_equal(to_columns(np.concatenate([first, second])), to_columns(record.outputs))


def test_a_lower_supply_damps_less(demo_scaling, c):
    """The full dipole goes with the voltage: while saturated, so does the loss of energy."""
    low, high = (one(demo_scaling, c, 300, supply_v=volts) for volts in (6.6, 8.4))
    lost = [record.true_rate_deg_s[0] ** 2 - record.true_rate_deg_s[-1] ** 2 for record in (low, high)]
    assert 0.6 < lost[0] / lost[1] < 0.95
