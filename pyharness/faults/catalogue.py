"""The faults that the controller is built against: how each is put into a flight, how soon it shows, what comes of it.

Names and texts are the C's (`MRD_F_` in mrd.h); everything else about a fault stands here. `mrd_fault_status` in the C and the
table in fsw_c/README.md are held against this list by tests.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from enum import Enum

from pyharness.events import (
    AddCounts,
    AddNoise,
    Command,
    DropGyro,
    DropSample,
    Event,
    FlipBit,
    ForceMode,
    HoldCounts,
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
from pyharness.loop import Flight
from pyharness.plant.orbit import orbital_period
from pyharness.scaling import Scaling


class Outcome(Enum):
    """What comes of a flight with a fault, in mission terms."""

    AS_WITHOUT = "settled as without the fault"
    LATER = "settled later"
    DAMPED = "damped, not handed over"
    HELD = "coils off while it lasts"
    SAFE = "safe"
    TOLD = "not stopped, told"
    UNSEEN = "not stopped, not seen in flight"


@dataclass(frozen=True)
class Setting:
    """Where a fault strikes: from cycle `first` up to, and without, `end`; a passing fault ends long before the flight does."""

    scaling: Scaling
    first: int
    end: int

    def cycles(self, seconds: float) -> int:
        """So many seconds in full cycles."""
        return math.ceil(seconds / self.scaling.period_s)

    @property
    def orbit(self) -> int:
        """One orbit in full cycles."""
        return self.cycles(orbital_period(self.scaling.mission.orbit))

    @property
    def path(self) -> dict:
        """The configuration of the path."""
        return self.scaling.config["path"]

    @property
    def supervisor(self) -> dict:
        """The configuration of the supervisor."""
        return self.scaling.config["supervisor"]

    def field_counts(self, ut: float) -> int:
        """A field in raw counts of the magnetometer."""
        return round(ut * self.scaling.mission.magnetometer.counts_per_ut)


Inject = Callable[[Setting], tuple[Event, ...]]
"""The events of a fault in a setting."""


@dataclass(frozen=True)
class Within:
    """After how many cycles at most a fault shows: in words, and worked out for a setting, None where it need not show."""

    text: str
    cycles: Callable[[Setting], int | None] = lambda setting: None


@dataclass(frozen=True)
class Fault:
    """One fault of the list."""

    name: str  # of MRD_F_
    shows: str  # names of MRD_S_, any of which tells; "" where none does
    inject: Inject
    within: Within
    does: str  # what the controller does
    recovers: str  # how it goes on when the fault is over
    counter: str  # of mrd_counters that tells; "" where none does
    passing: frozenset[Outcome] = frozenset()  # what may come of it where it passes; empty: it does not pass
    lasting: frozenset[Outcome] = frozenset()  # what may come of it where it stays; empty: it does not stay
    holds: bool = False  # no coil is driven in any cycle that tells of it
    start: Callable[[Flight], Flight] = lambda flight: flight  # how the flight itself departs
    orbits: float = 0.0  # least length of the flight after the onset

    @property
    def bits(self) -> list[int]:
        """Numbers of the status bits by which it shows."""
        return [getattr(mrd, f"MRD_S_{name}") for name in self.shows.split()]

    @property
    def mask(self) -> int:
        """The status bits by which it shows."""
        return sum(1 << bit for bit in self.bits)

    def flight(self, nominal: Flight, setting: Setting) -> Flight:
        """The flight that has this fault."""
        return self.start(replace(nominal, events=(*nominal.events, *self.inject(setting))))


AT_ONCE = Within("1", lambda s: 1)
NOT_BOUNDED = Within("not bounded")


def _with_sense(text: str, cycles: int) -> Within:
    """Bounded where the mission has a current sense."""
    return Within(f"{text} with a current sense, else not bounded", lambda s: cycles if s.path["current_fitted"] else None)


SIXTEEN_PULSES = _with_sense("16 long pulses", 400)
"""In a tumble every coil is driven far enough in some of the cycles."""
SETTLES = frozenset({Outcome.AS_WITHOUT, Outcome.LATER})
HELD = frozenset({Outcome.HELD})
FLIES_ON = frozenset({Outcome.AS_WITHOUT, Outcome.LATER, Outcome.DAMPED})
ANY_COIL = FLIES_ON | {Outcome.TOLD, Outcome.UNSEEN}
STRAYS = ANY_COIL | {Outcome.SAFE, Outcome.HELD}


# ---- how faults are put in ----


def _span(kind: type, **values: object) -> Inject:
    return lambda s: (kind(s.first, s.end, **values),)


def _jump(s: Setting) -> tuple[Event, ...]:
    most_ut = math.sqrt(s.path["jump_max_sq"]) * s.scaling.field_t * 1e6
    return (AddCounts(s.first, s.end, every=11, offset=(s.field_counts(2.2 * most_ut + 1.0), 0, 0)),)


def _implausible(s: Setting) -> tuple[Event, ...]:
    control = s.scaling.mission.control
    return (ScaleCounts(s.first, s.end, factor=1.05 * control.field_max_ut / control.field_min_ut),)


def _noise(s: Setting) -> tuple[Event, ...]:
    limit_ut = s.path["noise_limit"] * s.scaling.field_t * 1e6
    return (AddNoise(s.first, s.end, most=s.field_counts(4.0 * limit_ut)),)


DRIFT_DEG_S2 = 0.02


def _drift(s: Setting) -> tuple[Event, ...]:
    gyro = s.scaling.mission.gyro
    a_cycle = gyro.counts_per_deg_s * DRIFT_DEG_S2 * s.scaling.period_s if gyro else 0.0
    return (AddCounts(s.first, s.end, sensor="gyro", drift=(a_cycle, -a_cycle, a_cycle)),)


def _drift_shows(s: Setting) -> int:
    """Until the drift is four times what is beyond use, and a quarter orbit in which the field turns away from it."""
    return s.cycles(4.0 * s.scaling.mission.defence.gyro_error_deg_s / DRIFT_DEG_S2) + s.orbit // 4


def _off_time(sign: int) -> Inject:
    return lambda s: (ShiftSample(s.first, s.end, us=sign * (2 * s.path["tolerance_us"] + 100)),)


def _wrapping(flight: Flight) -> Flight:
    """The clock wraps in the middle of the detumble."""
    middle_us = round(0.25 * orbital_period(flight.scaling.mission.orbit) * 1e6)
    return replace(flight, start_us=2**32 - middle_us)


def too_fast_deg_s(scaling: Scaling) -> float:
    """A rate, °/s, at which a full pulse comes more than a quarter of a turn late, so that the law adds energy."""
    t = scaling.timeline
    lag_s = (t.period_us / 2 + t.delay_us + t.drive_window_us / 2) * 1e-6
    return 1.3 * 90.0 / lag_s


def _too_fast(flight: Flight) -> Flight:
    tip_off = flight.scaling.mission.body.tip_off_deg_s
    factor = too_fast_deg_s(flight.scaling) / math.hypot(*tip_off)
    return replace(flight, rate_deg_s=tuple(factor * rate for rate in tip_off))


def _fast_tip_off(flight: Flight) -> Flight:
    return replace(flight, rate_deg_s=tuple(3.0 * rate for rate in flight.scaling.mission.body.tip_off_deg_s))


# ---- the list ----


def _mag(name: str, shows: str, inject: Inject, within: Within, does: str = "rejects the samples, no pulse",
         recovers: str = "2 cycles after the first good sample", lasting: frozenset[Outcome] = HELD,
         counter: str = "mag_faults") -> Fault:  # fmt: skip
    return Fault(name, shows, inject, within, does, recovers, counter, passing=SETTLES, lasting=lasting, holds=True)


def _gyro(name: str, shows: str, inject: Inject, within: Within, recovers: str) -> Fault:
    does = "falls back: derivative law, rate across the field; settling waits for the gyro"
    return Fault(name, shows, inject, within, does, recovers, "gyro_faults", passing=SETTLES, lasting=FLIES_ON)


def _coil(name: str, shows: str, inject: Inject, within: Within, does: str, lasting: frozenset[Outcome], counter: str, recovers: str = "by SAFE or INHIBIT, then RESUME") -> Fault:
    return Fault(name, shows, inject, within, does, recovers, counter, lasting=lasting, orbits=3.2)


def _time(name: str, shows: str, inject: Inject, within: Within, does: str, recovers: str, holds: bool = False,
          counter: str = "time_faults") -> Fault:  # fmt: skip
    return Fault(name, shows, inject, within, does, recovers, counter, passing=SETTLES, holds=holds)


def _upset(name: str, shows: str, inject: Inject, within: Within, does: str, recovers: str, counter: str, passing: frozenset[Outcome],
           holds: bool = False) -> Fault:  # fmt: skip
    return Fault(name, shows, inject, within, does, recovers, counter, passing=passing, holds=holds)


FAULTS: tuple[Fault, ...] = (
    _mag("MAG_MISSING", "SAMPLE_MISSING", _span(DropSample), AT_ONCE, "rejects the cycle, no pulse", counter="rejected"),
    _mag("MAG_FROZEN", "MAG_FROZEN", _span(HoldCounts), Within("frozen_limit", lambda s: s.path["frozen_limit"]),
         "rejects the samples, no pulse; until it shows, the derivative is 0"),
    _mag("MAG_OUT_OF_RANGE", "MAG_RANGE", _span(SetAxis, axis=0, count=-32768), AT_ONCE),
    _mag("MAG_IMPLAUSIBLE", "FIELD_IMPLAUSIBLE MAG_RANGE", _implausible, AT_ONCE),
    _mag("MAG_JUMP", "MAG_JUMP FIELD_IMPLAUSIBLE MAG_NOISY MAG_RANGE", _jump, AT_ONCE, "rejects the sample; the next one begins a new derivative", "2 cycles after the jump", SETTLES),
    _mag("MAG_DEAD_AXIS", "MAG_DEAD_AXIS FIELD_IMPLAUSIBLE MAG_JUMP MAG_NOISY", _span(SetAxis, axis=2, count=0), Within("dead_limit + 1", lambda s: s.path["dead_limit"] + 1)),
    _mag("MAG_SATURATED", "MAG_RANGE", lambda s: (SetAxis(s.first, s.end, axis=1, count=s.path["mag"]["limit"]),), AT_ONCE),
    _mag("MAG_NOISY", "MAG_NOISY MAG_JUMP FIELD_IMPLAUSIBLE", _noise, Within("64", lambda s: 64), recovers="64 cycles after the last noisy sample"),
    _mag("MAG_BYTES_SWAPPED", "MAG_RANGE FIELD_IMPLAUSIBLE MAG_JUMP MAG_NOISY", _span(SwapBytes), Within("64", lambda s: 64), recovers="64 cycles after the last wrong sample"),
    _gyro("GYRO_MISSING", "GYRO_MISSING", _span(DropGyro), AT_ONCE, "with the next sample"),
    _gyro("GYRO_FROZEN", "GYRO_FROZEN GYRO_DISAGREES", _span(HoldCounts, sensor="gyro"), Within("gyro_frozen_limit", lambda s: s.path["gyro_frozen_limit"] or s.orbit),
          "with the first count that differs"),
    _gyro("GYRO_RAILED", "GYRO_RANGE", lambda s: (SetAxis(s.first, s.end, sensor="gyro", axis=1, count=s.path["gyro"]["limit"]),), AT_ONCE,
          "with the next sample in range"),
    _gyro("GYRO_DRIFT", "GYRO_DISAGREES GYRO_RANGE", _drift, Within("until four times what is beyond use, and a quarter orbit", _drift_shows),
          "after 64 samples that agree"),
    _coil("COIL_OPEN", "COIL_CURRENT NO_PROGRESS", _span(SickCoil, coil=0, current=0.0), SIXTEEN_PULSES, "goes on with the others; told by a current sense, else by no progress",
          ANY_COIL, "coil_faults"),
    _coil("COIL_SHORTED_ON", "COIL_CURRENT FIELD_IMPLAUSIBLE MAG_JUMP MAG_NOISY NO_PROGRESS DIVERGING", _span(SickCoil, coil=0, held=1.0), _with_sense("2", 2),
          "with a current sense rejects every sample, no pulse; else only what it does to field and tumble shows", STRAYS, "coil_faults",
          "when it goes off"),
    _coil("COIL_WEAK", "COIL_CURRENT NO_PROGRESS", _span(SickCoil, coil=1, current=0.33), SIXTEEN_PULSES, "goes on; told by a current sense, else by no progress", ANY_COIL, "coil_faults"),
    _coil("COIL_REVERSED", "NO_PROGRESS DIVERGING", _span(SickCoil, coil=1, leads=-1.0), NOT_BOUNDED, "goes on; no progress, or divergence; shown by the phasing test", STRAYS, "trips"),
    _coil("COIL_BACKWARD", "COIL_CURRENT NO_PROGRESS DIVERGING", _span(SickCoil, coil=1, current=-1.0), SIXTEEN_PULSES, "with a current sense takes the coil out of use; else as with reversed leads",
          STRAYS, "coil_faults"),
    _coil("COILS_SWAPPED", "NO_PROGRESS DIVERGING", _span(SwapCoils, coils=(0, 1)), NOT_BOUNDED, "goes on; no progress, or divergence; shown by the phasing test", STRAYS, "trips"),
    Fault("COIL_STAYS_ON", "SWITCH_OFF_UNSTAMPED COIL_CURRENT", _span(StaysOn, coil=1), Within("1 after its pulse"), "trusts no sample until the switch-off is stamped, no pulse",
          "2 cycles after the stamp", "coil_faults", passing=SETTLES, lasting=HELD, holds=True),
    _time("TIME_LATE", "SAMPLE_OFF_TIME", _off_time(1), AT_ONCE, "rejects the samples, no pulse", "2 cycles after the last", holds=True),
    _time("TIME_EARLY", "SAMPLE_OFF_TIME", _off_time(-1), AT_ONCE, "rejects the samples, no pulse", "2 cycles after the last", holds=True),
    _time("TIME_REPEATED", "SWITCH_OFF_UNSTAMPED INTERVAL_SHORT", _span(RepeatInputs, every=3), AT_ONCE, "no derivative from the repeated sample", "with the next cycle",
          counter="coil_faults"),
    _time("TIME_FORWARD", "INTERVAL_LONG", lambda s: (SetClock(s.first, us=37_000_000),), AT_ONCE, "no derivative across the jump", "1 cycle after the jump"),
    _time("TIME_BACKWARD", "BLANKED INTERVAL_LONG", lambda s: (SetClock(s.first, us=-37_000_000),), AT_ONCE,
          "trusts no sample while a switch-off seems to lie ahead, no pulse", "when the clock has caught up, or the coils are stamped anew",
          counter="blanked"),
    Fault("TIME_WRAP", "", lambda s: (), Within("does not show"), "takes every difference of stamps mod 2^32", "goes on", "",
          passing=frozenset({Outcome.AS_WITHOUT}), start=_wrapping),
    _upset("FLIP_STATE", "STATE_RESTARTED", lambda s: (FlipBit(s.first, "state", "path.field[0]", 9),), AT_ONCE,
           "restarts; SAFE, a commanded INHIBIT and PAUSE stay, hold-off is not begun again", "4 cycles after the flip", "restarts", SETTLES, True),
    _upset("FLIP_CONFIG", "CONFIG_CORRUPT", lambda s: (FlipBit(s.first, "config", "path.derivative_gain.mantissa[1]", 3),), AT_ONCE,
           "safe, for as long as it is corrupt and after", "by command RESUME, once it is right", "corrupt", frozenset({Outcome.SAFE}), True),
    _upset("FLIP_INPUT", "", lambda s: (FlipBit(s.first, "inputs", "path.mag_raw[1]", 7),), Within("need not show"),
           "takes it where it looks valid; no pulse beyond its limit", "after 3 cycles, and the memory of the low-pass; a dwell may begin anew", "",
           SETTLES),
    _upset("RESTART", "BLANKED", lambda s: (RestartController(s.first),), AT_ONCE, "begins anew; hold-off counts from separation, not from the restart",
           "4 cycles after the restart", "blanked", SETTLES, True),
    _upset("COMMAND_ILLEGAL", "COMMAND_REFUSED", lambda s: (Command(s.first, 1), Command(s.first + 1, 65535)), AT_ONCE, "refuses it", "goes on", "refused",
           frozenset({Outcome.AS_WITHOUT})),
    _upset("MODE_ILLEGAL", "", lambda s: (ForceMode(s.first, 4),), Within("the mode tells"), "safe", "by command RESUME", "", frozenset({Outcome.SAFE})),
    Fault("WRONG_SIGN", "DIVERGING", lambda s: tuple(SickCoil(s.first, s.end, coil=i, leads=-1.0) for i in range(3)),
          Within("2 window_cycles + 1", lambda s: 2 * s.supervisor["window_cycles"] + 1), "pause of an orbit at each growth; safe after the retries",
          "by command RESUME", "trips", lasting=frozenset({Outcome.SAFE}), orbits=-1.0),
    Fault("TOO_FAST", "NO_PROGRESS DIVERGING", lambda s: (), Within("3 window_cycles + 3", lambda s: 3 * s.supervisor["window_cycles"] + 3),
          "goes on; no progress, or divergence", "goes on", "", lasting=frozenset({Outcome.TOLD, Outcome.SAFE}), start=_too_fast, orbits=1.6),
    Fault("TIP_OFF", "MAG_JUMP", lambda s: (), Within("not bounded"), "after 16 jumps in a row takes the field to turn that fast, and damps",
          "once 64 samples have not jumped", "mag_faults", lasting=SETTLES | {Outcome.DAMPED, Outcome.TOLD}, start=_fast_tip_off, orbits=1.6),
)  # fmt: skip
"""In the order of MRD_F_."""

BY_NAME = {fault.name: fault for fault in FAULTS}
"""Every fault by its name."""
