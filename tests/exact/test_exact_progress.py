"""Progress windows by hand; divergence, pauses and retries; the bytes of the telemetry."""

import pytest
from exact.samples import SUPERVISOR, fly, make_config, make_inputs, make_state, with_changes

from pyharness.exact import telemetry
from pyharness.exact.constants import (
    MRD_COMMAND_INHIBIT,
    MRD_MODE_DAMPING,
    MRD_MODE_HOLD_OFF,
    MRD_MODE_INHIBIT,
    MRD_MODE_PAUSE,
    MRD_MODE_SAFE,
    MRD_MODE_SETTLED,
    MRD_S_DIVERGING,
    MRD_S_NO_PROGRESS,
)
from pyharness.exact.fields import OUTPUTS, zeros
from pyharness.exact.modes import Seen, Standing, advance
from pyharness.exact.progress import no_progress_yet, watch

DAMPING, PAUSE, SAFE = MRD_MODE_DAMPING, MRD_MODE_PAUSE, MRD_MODE_SAFE


def watched(estimates, begun=None, trips=0, **supervisor):
    """Progress after these estimates, None for none, and the cycles in which the damping diverged."""
    progress, diverged = {**no_progress_yet(), **(begun or {})}, []
    for cycle, turn in enumerate(estimates):
        part = {"turn": turn or 0, "across": 0, "across_valid": int(turn is not None)}
        progress, diverging = watch(progress, {**SUPERVISOR, **supervisor}, trips, part)
        diverged += [cycle] if diverging else []
    return progress, diverged


@pytest.mark.parametrize(("estimates", "window", "peaks"), [
    ((500, 90, 400, 300), 4, (0, 90, 0)),  # the least of four
    ((500, 490, 480), 3, (0, 0, 0)),  # three are none
    ((5, 6, 7, 8, 900, 800, 700, 600), 8, (0, 600, 0)),  # the larger of two
    ((900, 800, 700, 600, 5, 6, 7, 8), 8, (0, 600, 0)),
    ((500, None, 490, None, 480, None, 470, None), 8, (0, 470, 0)),  # cycles without an estimate are left out
    ((500, 490, 480, 470, 1, 1), 6, (0, 470, 0)),
    ((500, 490, 480, 470), 5, (470, 0, 0)),  # the window has not ended yet
    ((400, 400, 400, 400, 9, 9) * 2, 6, (0, 400, 400)),  # what a window left over is not taken into the next
    ((5, 5, 5, 5, 6, 6, 6, 6, 7, 7, 7, 7, 8, 8, 8, 8), 4, (0, 8, 7)),
    ((0, 0, 0, 0), 4, (0, 0, 0)),
])
def test_peaks_by_hand(estimates, window, peaks):
    progress, _ = watched(estimates, window_cycles=window)
    assert progress["peak"] == peaks
    assert progress["window"] == len(estimates) % window
    assert progress["in_four"] == (0 if progress["window"] == 0 else len(estimates) % 4)


@pytest.mark.parametrize(("trips", "peak", "earlier", "diverges"), [
    (0, 451, 500, False), (1, 451, 500, True), (65535, 451, 500, True),  # progress 230: 451 · 256 > 230 · 500
    (1, 449, 500, False), (1, 250, 250, False), (1, 251, 251, True), (1, 500, 0, False),  # guard_turn 250
])
def test_after_a_trip_no_progress_is_divergence(trips, peak, earlier, diverges):
    """Two windows of four turns; peak₂ is the peak of the window before both."""
    begun = {"peak": (0, peak, earlier)}
    _, diverged = watched((peak,) * 4, begun, trips, window_cycles=4, growth=1024, progress=230)
    assert diverged == ([3] if diverges else [])


@pytest.mark.parametrize(("before", "peak", "changes", "diverges"), [
    (300, 600, {}, False), (300, 601, {}, True),  # growth 512: twice
    (100, 250, {"growth": 257}, False), (100, 251, {"growth": 257}, True),  # guard_turn 250
    (0, 65535, {}, False), (1, 65535, {}, True), (1, 65535, {"guard_turn": 65535}, False),
    (1, 65535, {"guard_turn": 65534}, True), (1, 3, {"guard_turn": 0}, True),
    (65535, 65535, {"growth": 257}, False), (16383, 65535, {"growth": 1024}, True),
    (16384, 65535, {"growth": 1024}, False),
])
def test_divergence_on_either_side_of_its_limits(before, peak, changes, diverges):
    progress, diverged = watched([peak] * 4, {"peak": (0, before, 0)}, window_cycles=4, **changes)
    assert diverged == ([3] if diverges else []) and progress["peak"] == (0, peak, before)


@pytest.mark.parametrize(("earlier", "peak", "changes", "stalled"), [
    (400, 200, {}, 0), (400, 201, {}, 1),  # progress 128: half
    (200, 100, {"progress": 1}, 0), (200, 101, {"progress": 1}, 1),  # stall_turn 100
    (0, 65535, {}, 0), (500, 500, {"progress": 256}, 0), (500, 501, {"progress": 256, "guard_turn": 65535}, 1),
])
def test_no_progress_on_either_side_of_its_limits(earlier, peak, changes, stalled):
    begun = {"peak": (0, 65535, earlier), "stalled": 1 - stalled}
    progress, _ = watched([peak] * 4, begun, window_cycles=4, **changes)
    assert progress["stalled"] == stalled


def test_between_two_window_ends_nothing_is_judged():
    progress, diverged = watched([65535] * 7, {"peak": (0, 1, 1), "stalled": 1}, window_cycles=8)
    assert diverged == [] and progress["stalled"] == 1


# ---- whole steps: the field turns by 100 of 11357 counts a cycle, 288 rate counts across it ----

def flight(state, cycles=5, config=None, inputs=None):
    """State and outputs of cycles that each end with a window of five, of which the first has no derivative."""
    config = make_config({"supervisor.window_cycles": 5, "supervisor.growth": 257, **(config or {})})
    sequence = [make_inputs(k, {"path.mag_raw": (10_000 + 100 * k, -5_000, 2_000), **((inputs or {}).get(k, {}))})
                for k in range(cycles)]
    return fly(config, sequence, make_state(state))


def tell(outputs, number):
    return [out["status"] >> number & 1 for out in outputs]


GROWN = {"progress.peak": (0, 250, 0)}


def test_a_divergence_pauses_and_goes_through_hold_off_again():
    state, outputs = flight(GROWN, 12)
    modes = [out["mode"] for out in outputs]
    assert modes == [DAMPING] * 4 + [PAUSE] * 3 + [MRD_MODE_HOLD_OFF] * 2 + [DAMPING] * 3
    assert tell(outputs, MRD_S_DIVERGING) == [0] * 4 + [1] * 3 + [0] * 5
    assert [any(out["ticks"]) for out in outputs] == [False] + [True] * 3 + [False] * 5 + [True] * 3
    assert [out["counters"]["trips"] for out in outputs] == [0] * 4 + [1] * 8
    assert state["trips"] == 1 and state["progress"]["window"] == 2  # begun anew after the cycle that led here


@pytest.mark.parametrize(("trips", "retries", "mode"), [(0, 0, SAFE), (1, 2, PAUSE), (2, 2, SAFE), (0, 65535, PAUSE)])
def test_retries_run_out(trips, retries, mode):
    state, outputs = flight({**GROWN, "trips": trips, "counters.trips": 7}, config={"supervisor.retries": retries})
    assert outputs[-1]["mode"] == mode and outputs[-1]["ticks"] == (0, 0, 0)
    assert (state["trips"], state["counters"]["trips"], state["dwell"]) == (trips + 1, 8, 0)
    assert tell(outputs, MRD_S_DIVERGING)[-1] == 1 and state["progress"] == no_progress_yet()


def test_trips_stop():
    now = Standing(DAMPING, 5, 65535)
    seen = Seen(0, 1, 0, diverging=1)
    assert advance(now, 0, SUPERVISOR, make_inputs(), seen) == (SAFE, 0, 65535)


@pytest.mark.parametrize(("changes", "mode"), [
    ({"low_power": 1}, MRD_MODE_INHIBIT), ({"command": MRD_COMMAND_INHIBIT}, MRD_MODE_INHIBIT),
])
def test_what_turns_the_coils_off_comes_before_a_divergence(changes, mode):
    state, outputs = flight(GROWN, inputs={4: changes})
    assert (outputs[-1]["mode"], state["trips"], state["counters"]["trips"]) == (mode, 0, 0)
    assert not any(tell(outputs, MRD_S_DIVERGING))
    assert (state["progress"] == no_progress_yet()) == ("command" in changes)  # low power does not blind the guard


def test_settling_forgets_the_trips_and_the_peaks():
    now = Standing(DAMPING, SUPERVISOR["settle_dwell"] - 1, 2)
    assert advance(now, 0, SUPERVISOR, make_inputs(), Seen(100, 1, 0, 0)) == (MRD_MODE_SETTLED, 0, 0)
    assert advance(now, 0, SUPERVISOR, make_inputs(), Seen(101, 1, 0, 0)) == (DAMPING, 0, 2)


def test_no_progress_lasts_until_a_window_ends_otherwise_or_the_mode_changes():
    stalled = {"progress.peak": (0, 65535, 400)}
    _, outputs = flight(stalled, 12, {"supervisor.guard_turn": 65535})
    assert tell(outputs, MRD_S_NO_PROGRESS) == [0] * 4 + [1] * 5 + [0] * 3  # against 65535 in the window after
    state, outputs = flight(stalled, 7, {"supervisor.guard_turn": 65535}, {6: {"low_power": 1}})
    assert tell(outputs, MRD_S_NO_PROGRESS) == [0] * 4 + [1] * 3
    state, outputs = flight(stalled, 7, {"supervisor.guard_turn": 65535}, {6: {"command": MRD_COMMAND_INHIBIT}})
    assert tell(outputs, MRD_S_NO_PROGRESS) == [0] * 4 + [1] * 2 + [0]


@pytest.mark.parametrize("mode", [MRD_MODE_HOLD_OFF, MRD_MODE_SETTLED, SAFE, PAUSE])
def test_progress_is_watched_in_damping_only(mode):
    """In hold-off it waits, as in low power; in the others it is forgotten."""
    state, outputs = flight({**GROWN, "mode": mode}, 1)
    assert outputs[0]["counters"]["trips"] == 0
    if mode == MRD_MODE_HOLD_OFF:
        assert state["progress"]["window"] == 0 and state["progress"]["peak"] == GROWN["progress.peak"]
    else:
        assert state["progress"] == no_progress_yet()


# ---- telemetry ----

def test_telemetry_by_hand():
    out = with_changes(zeros(OUTPUTS), {
        "mode": PAUSE, "status": 0x80402010, "rate": 0x1234, "rate_valid": 1, "handover": 1, "cycle": 0xABCD,
        "digest": 0x89ABCDEF, "ticks": (1, -1, -16384), "trace.currents.fault": (1, 2, 3),
        "trace.law.active": 2, "trace.gate.trusted": 1,
        "counters": {name: 0x100 + i for i, name in enumerate((
            "trusted", "rejected", "blanked", "fell_back", "refused", "restarts", "corrupt", "mag_faults",
            "gyro_faults", "coil_faults", "time_faults", "trips"))},
    })
    # Byte 8: 3 + 1·4 + 2·16 + 3·64 = 231; byte 9: 2 + 4.
    body = bytes.fromhex(
        "02 0f 80402010 1234 e7 06 abcd 89abcdef 0001 ffff c000"
        "0100 0101 0102 0103 0104 0105 0106 0107 0108 0109 010a 010b")
    h = 2166136261
    for byte in body:
        h = (h ^ byte) * 16777619 % 2**32
        h = h ^ h // 2**15
    assert telemetry(out) == body + bytes([h // 2**24, h // 2**16 % 256, h // 2**8 % 256, h % 256])


@pytest.mark.parametrize(("name", "value", "byte", "bits"), [
    ("rate_valid", 1, 8, 0x01), ("handover", 1, 8, 0x02), ("trace.currents.fault", (3, 0, 0), 8, 0x0C),
    ("trace.currents.fault", (0, 3, 0), 8, 0x30), ("trace.currents.fault", (0, 0, 3), 8, 0xC0),
    ("trace.law.active", 2, 9, 0x02), ("trace.gate.trusted", 1, 9, 0x04), ("status", 1, 5, 0x01),
    ("status", 2**31, 2, 0x80), ("counters.trips", 1, 45, 0x01), ("counters.trusted", 256, 22, 0x01),
])
def test_each_bit_of_the_telemetry_has_its_place(name, value, byte, bits):
    idle = telemetry(zeros(OUTPUTS))
    frame = telemetry(with_changes(zeros(OUTPUTS), {name: value}))
    assert len(frame) == 50 and frame[46:] != idle[46:]
    assert [a ^ b for a, b in zip(idle[:46], frame)] == [bits if i == byte else 0 for i in range(46)]


def test_cycles_are_counted_and_wrap():
    state, outputs = flight({"cycle": 65534}, 3)
    assert [out["cycle"] for out in outputs] == [65534, 65535, 0] and state["cycle"] == 1
