"""Each event does to a flight what it says, in inputs, motion and readings.

Quiet flights stay in hold-off: nothing that happens to inputs changes the motion, so every cycle compares with the plain flight's.
Driven ones damp from cycle 1 on; their first pulse is that of cycle 2, and the current of it is read in cycle 3.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest

from pyharness.controllers import load_controller
from pyharness.events import (
    AddCounts,
    AddNoise,
    Command,
    DropGyro,
    FlipBit,
    ForceMode,
    HoldCounts,
    LoseStamps,
    LowPower,
    RepeatInputs,
    RestartController,
    ScaleCounts,
    SetAxis,
    SetClock,
    ShiftSample,
    SickCoil,
    StaysOn,
    SwapBytes,
    SwapCoils,
)
from pyharness.exact import constants as mrd
from pyharness.flight.records import columns, to_columns
from pyharness.loop import Flight, Record, fly
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale

FIRST, END, CYCLES = 20, 30, 40
SPAN = range(FIRST, END)
FULL_COUNTS = 2000
SENSE = {"counts_at_full": FULL_COUNTS, "noise_counts": 0.0}


@cache
def quiet(*events) -> Record:
    """A flight in hold-off."""
    (record,) = fly([Flight(scale(load_mission(demo_path())), CYCLES, events=events)], load_controller("c"))
    return record


@cache
def damping(*events, cycles: int = 12, sense: bool = True) -> Record:
    """A flight that damps from the start."""
    scaling = scale(load_mission(demo_path(), {"current_sense": SENSE} if sense else None))
    flight = Flight(scaling, cycles, separation_s=100, rate_deg_s=(-11.0, 10.0, 12.0), events=events)  # drives all coils
    (record,) = fly([flight], load_controller("c"))
    return record


def raw(record: Record, sensor: str = "mag") -> np.ndarray:
    return record.inputs["path"][f"{sensor}_raw"].astype(int)


def has(record: Record, name: str) -> list[int]:
    """The cycles that have a status bit."""
    return np.flatnonzero(record.bit(getattr(mrd, f"MRD_S_{name}"))).tolist()


def assert_only(record: Record, name: str, cycles) -> None:
    """The inputs are the plain flight's but for one field, and that in no other cycles."""
    plain, changed = to_columns(quiet().inputs), to_columns(record.inputs)
    places = [place for place, column in enumerate(columns(record.inputs.dtype)) if column.partition("[")[0] == f"path.{name}"]
    rows, found = np.nonzero(changed != plain)
    assert set(found) <= set(places) and set(rows) == set(cycles), (name, sorted(set(rows)))


# ---- counts ----


@pytest.mark.parametrize("sensor", ["mag", "gyro"])
def test_set_axis(sensor):
    record = quiet(SetAxis(FIRST, END, sensor=sensor, axis=1, count=-1234))
    assert_only(record, f"{sensor}_raw", SPAN)
    assert (raw(record, sensor)[FIRST:END, 1] == -1234).all()
    np.testing.assert_array_equal(raw(record, sensor)[:, ::2], raw(quiet(), sensor)[:, ::2])


def test_scale_counts_rounds_and_clips_to_16_bits():
    for factor in (1.5, -0.3, 400.0):
        record = quiet(ScaleCounts(FIRST, END, factor=factor))
        assert_only(record, "mag_raw", SPAN)
        want = np.clip(np.rint(raw(quiet())[FIRST:END] * factor), -32768, 32767)
        np.testing.assert_array_equal(raw(record)[FIRST:END], want)
    assert {-32768, 32767} <= set(want.ravel())


def test_add_counts_offsets_and_drifts():
    record = quiet(AddCounts(FIRST, END, sensor="gyro", offset=(100, -200, 0), drift=(0.4, 0.0, -7.0)))
    assert_only(record, "gyro_raw", SPAN)
    since = np.arange(END - FIRST)[:, None]
    np.testing.assert_array_equal((raw(record, "gyro") - raw(quiet(), "gyro"))[FIRST:END], (100, -200, 0) + np.rint(since * (0.4, 0.0, -7.0)))


def test_every_so_many_cycles():
    assert_only(quiet(AddCounts(FIRST, END, every=4, offset=(9, 9, 9))), "mag_raw", (20, 24, 28))


def test_noise_is_drawn_anew_each_cycle_within_its_most_and_repeats():
    event = AddNoise(FIRST, END, most=3)
    record = quiet(event)
    added = (raw(record) - raw(quiet()))[FIRST:END]
    assert set(added.ravel()) == {-3, -2, -1, 0, 1, 2, 3}
    assert len({tuple(row) for row in added}) > 8
    again = fly([Flight(scale(load_mission(demo_path())), 1), record.flight], load_controller("exact"))[1]
    np.testing.assert_array_equal(raw(again), raw(record))
    moved = (raw(quiet(AddNoise(FIRST - 1, END, most=3))) - raw(quiet()))[FIRST:END]
    assert (moved != added).any()


def test_swapped_bytes():
    record = quiet(SwapBytes(FIRST, END))
    assert_only(record, "mag_raw", SPAN)
    for got, was in zip(raw(record)[FIRST:END].ravel(), raw(quiet())[FIRST:END].ravel(), strict=True):
        assert int(got).to_bytes(2, "big", signed=True) == int(was).to_bytes(2, "little", signed=True)


@pytest.mark.parametrize("sensor", ["mag", "gyro"])
def test_held_counts_are_those_before_and_let_go(sensor):
    record = quiet(HoldCounts(FIRST, END, sensor=sensor))
    assert (raw(record, sensor)[FIRST:END] == raw(quiet(), sensor)[FIRST - 1]).all()
    np.testing.assert_array_equal(raw(record, sensor)[END:], raw(quiet(), sensor)[END:])
    same = record.outputs["trace"]["continuity"]["same" if sensor == "mag" else "gyro_same"]
    assert same[END - 1].min() == END - FIRST


# ---- host ----


@pytest.mark.parametrize(("us", "off_time"), [(1500, False), (5000, True), (-1500, False), (-5000, True)])
def test_a_shifted_sample_is_taken_and_stamped_off_its_time(us, off_time):
    record = quiet(ShiftSample(FIRST, END, us=us))
    path, plain = record.inputs["path"], quiet().inputs["path"]
    shift = path["sample_us"].astype(int) - plain["sample_us"]
    np.testing.assert_array_equal(shift, np.where(np.isin(np.arange(CYCLES), SPAN), us, 0))
    assert has(record, "SAMPLE_OFF_TIME") == (list(SPAN) if off_time else [])
    # The field of then: as far along as it turns in that time, 19 °/s of some 2,000 counts.
    along = (raw(record) - raw(quiet()))[FIRST:END] / us
    turn = np.gradient(raw(quiet()).astype(float), axis=0)[FIRST:END] / quiet().flight.scaling.timeline.period_us
    fit = (along * turn).sum() / (turn * turn).sum()
    assert fit == pytest.approx(1.0, abs=0.5 if abs(us) < 5000 else 0.15)
    np.testing.assert_array_equal(raw(record)[:FIRST], raw(quiet())[:FIRST])


def test_repeated_inputs():
    record = quiet(RepeatInputs(FIRST, END, every=3))
    plain = quiet().inputs
    for cycle in range(CYCLES):
        assert record.inputs[cycle] == plain[cycle - 1 if cycle in (20, 23, 26, 29) else cycle]


def test_repeated_inputs_in_a_row_stay_those_of_before():
    record = quiet(RepeatInputs(FIRST, END))
    assert (record.inputs[FIRST:END] == quiet().inputs[FIRST - 1]).all() and record.inputs[END] == quiet().inputs[END]


def test_a_clock_that_is_set_keeps_its_old_stamps():
    record = quiet(SetClock(FIRST, us=37_000_000), SetClock(END, us=-50_000_000))
    path, plain = record.inputs["path"], quiet().inputs["path"]
    set_by = np.select([np.arange(CYCLES) >= END, np.arange(CYCLES) >= FIRST], [-13_000_000, 37_000_000])
    for name in ("cycle_start_us", "sample_us"):
        np.testing.assert_array_equal(path[name], (plain[name].astype(np.int64) + set_by) % 2**32)
    np.testing.assert_array_equal(path["switch_off_us"], plain["switch_off_us"])
    np.testing.assert_array_equal(record.inputs["separation_s"], quiet().inputs["separation_s"])


@pytest.mark.parametrize(("column", "bit"), [("path.mag_raw[1]", 7), ("path.mag_raw[0]", 15), ("separation_s", 31), ("command", 0), ("low_power", 9)])
def test_a_flipped_bit_of_the_inputs_is_that_bit_for_a_cycle(column, bit):
    record = quiet(FlipBit(FIRST, "inputs", column, bit))
    changed = to_columns(record.inputs) ^ to_columns(quiet().inputs)
    place = columns(record.inputs.dtype).index(column)
    assert np.argwhere(changed).tolist() == [[FIRST, place]]
    assert changed[FIRST, place] & 0xFFFF_FFFF == (1 << bit if bit < 15 or "raw" not in column else 2**32 - 2**15)


def test_a_flipped_bit_of_the_state_restarts_it():
    record = quiet(FlipBit(FIRST, "state", "path.backward[2].tripped", 3))
    assert has(record, "STATE_RESTARTED") == [FIRST] and record.outputs["counters"]["restarts"].tolist() == [0] * FIRST + [1] * (CYCLES - FIRST)


def test_a_flipped_bit_of_the_configuration_stays():
    record = quiet(FlipBit(FIRST, "config", "supervisor.bench_key", 3))
    assert has(record, "CONFIG_CORRUPT") == list(range(FIRST, CYCLES))
    back = quiet(FlipBit(FIRST, "config", "supervisor.bench_key", 3), FlipBit(END, "config", "supervisor.bench_key", 3))
    assert has(back, "CONFIG_CORRUPT") == list(SPAN) and set(back.outputs["mode"][FIRST:]) == {mrd.MRD_MODE_SAFE}


def test_a_restart_begins_anew_with_the_coils_stamped():
    record = damping(RestartController(6))
    path = record.inputs["path"]
    assert record.outputs["cycle"].tolist() == [*range(6), *range(6)]
    assert has(record, "BLANKED") == [0, 6] and not has(record, "STATE_RESTARTED")
    assert (path["switch_off_us"][6] == path["cycle_start_us"][6]).all()
    still = np.flatnonzero(~(record.outputs["ticks"] != 0).any(axis=1)).tolist()
    assert still == [0, 1, 6, 7]  # until there is a derivative again


@pytest.mark.parametrize(("forced", "mode"), [(4, mrd.MRD_MODE_SAFE), (mrd.MRD_MODE_BENCH, mrd.MRD_MODE_BENCH)])
def test_a_forced_mode_comes_with_its_digest(forced, mode):
    record = quiet(ForceMode(FIRST, forced))
    assert set(record.outputs["mode"][:FIRST]) == {mrd.MRD_MODE_HOLD_OFF} and set(record.outputs["mode"][FIRST:]) == {mode}
    assert not has(record, "STATE_RESTARTED")


# ---- coils ----

PULSE, READ = 2, 3


def thrust(record: Record) -> np.ndarray:
    """What the pulses of cycle 2 did to the angular momentum by the next mid-sample, N m s, body axes."""
    undriven = damping(LowPower(0, 12))
    change = record.rate_rad_s[READ] - undriven.rate_rad_s[READ]
    return np.array(record.flight.scaling.mission.body.inertia_kg_m2) @ change


def all_coils(**health) -> tuple[SickCoil, ...]:
    return tuple(SickCoil(PULSE, READ, coil=coil, **health) for coil in range(3))


def readings(record: Record, kind: str = "driven") -> np.ndarray:
    return record.inputs["path"][f"current_{kind}"][READ].astype(int)


def test_a_healthy_pulse_shows_in_motion_and_readings():
    """The other tests compare with this one."""
    plain = damping()
    ticks = plain.outputs["ticks"][PULSE]
    assert (ticks != 0).all() and not plain.outputs["ticks"][:PULSE].any()
    np.testing.assert_array_equal(np.sign(readings(plain)), np.sign(ticks))
    assert np.abs(readings(plain)).max() == FULL_COUNTS and not readings(plain, "sampled").any()
    assert np.linalg.norm(thrust(plain)) > 1e-7


@pytest.mark.parametrize(("current", "leads"), [(0.0, 1.0), (-1.0, 1.0), (0.33, 1.0), (1.0, -1.0), (-1.0, -1.0)])
def test_a_sick_coil_acts_by_current_and_leads_and_is_read_by_its_current(current, leads):
    plain, sick = damping(), damping(*all_coils(current=current, leads=leads))
    np.testing.assert_array_equal(sick.applied_ticks[PULSE], plain.applied_ticks[PULSE])  # the command is the same
    np.testing.assert_allclose(readings(sick), current * readings(plain), atol=0.5)
    np.testing.assert_allclose(thrust(sick), current * leads * thrust(plain), atol=0.01 * np.linalg.norm(thrust(plain)))


def test_one_sick_coil_leaves_the_others_alone():
    plain, sick = damping(), damping(SickCoil(PULSE, READ, coil=1, current=0.0))
    assert readings(sick).tolist() == [readings(plain)[0], 0, readings(plain)[2]]


@pytest.mark.parametrize("held", [1.0, -0.5])
def test_a_coil_that_is_held_on_is_read_and_felt_by_the_magnetometer(held):
    plain, sick = damping(), damping(SickCoil(PULSE, 6, coil=2, held=held))
    sampled = sick.inputs["path"]["current_sampled"][:, 2]
    assert sampled.tolist() == [0] * READ + [round(held * FULL_COUNTS)] * 4 + [0] * 5  # seen at the samples that follow
    mission = plain.flight.scaling.mission
    stray_ut = np.array(mission.magnetometer.stray_ut_per_a_m2)[:, 2] * held * mission.coil[2].dipole_a_m2
    felt_ut = (raw(sick) - raw(plain))[READ] / mission.magnetometer.counts_per_ut
    np.testing.assert_allclose(felt_ut, stray_ut, atol=0.25)  # misalignment, and what it turned meanwhile
    assert has(sick, "COIL_CURRENT") == [3, 4, 5, 6]


def test_swapped_coils_hang_on_each_others_drivers():
    """With y and z open the x driver alone is on: its dipole, and so no torque, is along the coil that it drives."""
    open_yz = tuple(SickCoil(PULSE, READ, coil=coil, current=0.0) for coil in (1, 2))
    plain, swapped = thrust(damping(*open_yz)), thrust(damping(*open_yz, SwapCoils(PULSE, READ, coils=(0, 1))))
    for momentum, coil in ((plain, 0), (swapped, 1)):  # the body turns by up to 9° meanwhile
        along, other = np.abs(momentum[[coil, 1 - coil]]) / np.linalg.norm(momentum)
        assert along < 0.16 and other > 0.3
    assert readings(damping(SwapCoils(PULSE, READ))).tolist() == readings(damping()).tolist()


def test_a_coil_that_stays_on_is_stamped_at_the_end_only():
    record = damping(StaysOn(PULSE, 8, coil=1), cycles=14)
    stamps = record.inputs["path"]["switch_off_us"].astype(int)
    start = record.inputs["path"]["cycle_start_us"].astype(int)
    assert (stamps[READ, ::2] > start[PULSE]).all()
    (off,) = np.flatnonzero(np.diff(stamps[:10, 1])) + 1
    assert off in (8, 9) and stamps[off, 1] == start[off]
    assert has(record, "SWITCH_OFF_UNSTAMPED") == list(range(READ, off))
    sampled = record.inputs["path"]["current_sampled"][:, 1]
    assert (np.abs(sampled[READ:8]) == FULL_COUNTS).all() and not sampled[9:].any()
    assert not (record.outputs["ticks"][READ:8] != 0).any() and (record.outputs["ticks"][12:] != 0).any()


def test_a_coil_that_stayed_on_is_off_when_its_stamp_says_so():
    """No sample is trusted that the coil has spoilt: by the stamp alone, without a sense."""
    record, sensed = (damping(StaysOn(PULSE, 8, coil=1), cycles=14, sense=sense) for sense in (False, True))
    spoilt = np.flatnonzero(sensed.inputs["path"]["current_sampled"][:, 1])
    assert spoilt.size and not record.outputs["trace"]["gate"]["trusted"][spoilt].any()


# ---- all together ----

MIX = (
    AddNoise(5, 40, most=40), HoldCounts(8, 12), SetAxis(14, 16, axis=2, count=32000), SwapBytes(18, 19), AddCounts(20, 40, sensor="gyro", drift=(9.0, 0.0, -9.0)),
    ScaleCounts(22, 24, factor=1.2), RepeatInputs(26, 30, every=2), ShiftSample(31, 33, us=4000), SetClock(34, us=-5_000_000), SetClock(44, us=9_000_000),
    SickCoil(3, 30, coil=0, current=-1.0), SickCoil(30, 40, coil=2, leads=-1.0), SickCoil(46, 48, coil=2, held=0.5), SwapCoils(36, 42, coils=(1, 2)),
    StaysOn(50, 53, coil=0), LoseStamps(56, 58), DropGyro(6, 9), Command(60, 1), FlipBit(62, "state", "path.weak[1].level", 2),
    FlipBit(64, "inputs", "path.mag_raw[1]", 12), RestartController(67), ForceMode(70, 7), Command(71, mrd.MRD_COMMAND_RESUME),
    FlipBit(78, "config", "path.polarity[0]", 1),
)  # fmt: skip


@pytest.mark.parametrize("law", ["derivative", "rate"])
def test_c_and_exact_fly_the_same_flight_through_all_of_it(law):
    scaling = scale(load_mission(demo_path(), {"control": {"law": law}, "current_sense": SENSE}))
    flights = [Flight(scaling, 80, separation_s=100, events=MIX)]
    ((c,), (exact,)) = (fly(flights, load_controller(name)) for name in ("c", "exact"))
    np.testing.assert_array_equal(to_columns(c.inputs), to_columns(exact.inputs))
    np.testing.assert_array_equal(to_columns(c.outputs), to_columns(exact.outputs))
    assert c.rate_rad_s.tobytes() == exact.rate_rad_s.tobytes()
    shown = np.bitwise_or.reduce(c.outputs["status"])
    for name in ("COIL_CURRENT", "STATE_RESTARTED", "CONFIG_CORRUPT", "MAG_RANGE", "SWITCH_OFF_UNSTAMPED", "SAMPLE_OFF_TIME", "COMMAND_REFUSED"):
        assert shown >> getattr(mrd, f"MRD_S_{name}") & 1, name
