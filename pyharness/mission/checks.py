"""Checks across keys: what each key alone cannot say. One function a check, each naming all keys involved.

A check runs as soon as all its keys have a legal value, whatever is wrong elsewhere in the file, so that one
run lists everything.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from pyharness.mission.defence import (
    COMPARED_RAD,
    FAST,
    FEWEST_CYCLES,
    MOST_CYCLES,
    MOVED_COUNTS,
    PULSE_TIME_CONSTANTS,
    fewest_still_cycles,
    most_gyro_error_deg_s,
    pulse_share,
    rate_noise_deg_s,
    sample_noise_ut,
    turned_ut,
)
from pyharness.mission.model import AXES, Matrix
from pyharness.mission.reading import Reading
from pyharness.mission.schema import BY_PATH, ORBITAL_PERIOD
from pyharness.mission.wording import quantity, rounded

INT16_MAX = 32767
FEWEST_TICKS, MOST_TICKS = 16, 16384
SLOWEST_TIP_OFF_DEG_S = 0.01
SLACK = 1e-6
"""Tolerance on sums of decimal fractions, in ms or relative: far above rounding, far below what matters."""


@dataclass(frozen=True)
class Named:
    """A value with its path, written with its unit."""

    path: str
    value: object

    @property
    def unit(self) -> str:
        return "s" if self.path == ORBITAL_PERIOD else BY_PATH[self.path].unit

    def __str__(self) -> str:
        if isinstance(self.value, tuple):
            return f"{self.path} [{', '.join(f'{entry:g}' for entry in self.value)}] {self.unit}"
        if self.path == ORBITAL_PERIOD:
            return f"{self.path} {rounded(self.value, self.unit)}"
        return f"{self.path} {quantity(self.value, self.unit)}"


Check = Callable[..., Iterator[str]]
_CHECKS: list[tuple[tuple[str, ...], Check]] = []


def _check(*paths: str) -> Callable[[Check], Check]:
    """Register a check; it is called with a `Named` for each path, once for each axis if one has a `*`."""

    def register(check: Check) -> Check:
        _CHECKS.append((paths, check))
        return check

    return register


def cross_check(reading: Reading) -> list[str]:
    """The problems that all checks find in a completed reading."""
    problems = []
    for paths, check in _CHECKS:
        axes = AXES if any("*" in path for path in paths) else ("",)
        for axis in axes:
            concrete = [path.replace("*", axis) for path in paths]
            if reading.has(*concrete):
                problems += check(*(Named(path, reading.values[path]) for path in concrete))
    return problems


# Body -------------------------------------------------------------------------------------------------------


def inertia_matrix(values: dict[str, object]) -> Matrix:
    """The inertia tensor from its six entries, kg m²."""
    xx, yy, zz, xy, xz, yz = (values[f"body.inertia_kg_m2.{e}"] for e in ("xx", "yy", "zz", "xy", "xz", "yz"))
    return ((xx, xy, xz), (xy, yy, yz), (xz, yz, zz))


@_check(*(f"body.inertia_kg_m2.{entry}" for entry in ("xx", "yy", "zz", "xy", "xz", "yz")))
def _inertia_is_that_of_a_body(*entries: Named) -> Iterator[str]:
    """Principal moments positive, and none above the sum of the others: that would take negative masses."""
    unit = entries[0].unit
    moments = np.linalg.eigvalsh(inertia_matrix({entry.path: entry.value for entry in entries}))
    least, middle, greatest = (float(moment) for moment in moments)
    told = f"principal moments {least:.6g}, {middle:.6g} and {greatest:.6g} {unit}"
    legal = BY_PATH["body.inertia_kg_m2.xx"].limits
    given = ", ".join(f"{entry.path.rpartition('.')[2]} {entry.value:g}" for entry in entries)
    if least < legal.low * (1.0 - SLACK) or greatest > legal.high * (1.0 + SLACK):
        yield f"body.inertia_kg_m2: {told}, must each be in {legal} (from {given} {unit})"
    elif greatest > (least + middle) * (1.0 + SLACK):
        yield (
            f"body.inertia_kg_m2: {told} violate the triangle inequality, the greatest must be at most the "
            f"sum of the others, {least + middle:.6g} {unit} (from {given} {unit})"
        )


@_check("body.tip_off_deg_s")
def _tip_off_is_a_tumble(tip_off: Named) -> Iterator[str]:
    """The counts of the rate are scaled by it."""
    if math.hypot(*tip_off.value) < SLOWEST_TIP_OFF_DEG_S:
        yield f"{tip_off}, must have a norm of at least {SLOWEST_TIP_OFF_DEG_S:g} {tip_off.unit}"


# Supply -----------------------------------------------------------------------------------------------------


@_check("supply.min_v", "supply.nominal_v", "supply.max_v")
def _supply_is_ordered(least: Named, nominal: Named, greatest: Named) -> Iterator[str]:
    if not least.value <= nominal.value <= greatest.value:
        yield f"{least}, {nominal}, {greatest}: must not decrease in this order"


# Cycle ------------------------------------------------------------------------------------------------------

_WINDOWS = ("cycle.blanking_ms", "cycle.sample_ms", "cycle.compute_delay_ms", "cycle.drive_window_ms")


def _idle_ms(windows: tuple[Named, ...], period: Named) -> float:
    """What the windows leave of the cycle, ms; negative if they do not fit."""
    idle = period.value - sum(window.value for window in windows)
    return 0.0 if abs(idle) < SLACK else idle


@_check(*_WINDOWS, "cycle.period_ms")
def _windows_fit(*keys: Named) -> Iterator[str]:
    *windows, period = keys
    if _idle_ms(tuple(windows), period) < 0.0:
        total = rounded(sum(window.value for window in windows), "ms")
        yield f"{' + '.join(map(str, windows))} = {total}, must be at most {period}"


@_check("coil.*.blanking_ms", *_WINDOWS, "cycle.period_ms")
def _coil_decays_in_time(coil: Named, *keys: Named) -> Iterator[str]:
    """The nominal timeline's latest switch-off must be old enough at the next sample, or none is trusted."""
    *windows, period = keys
    idle = _idle_ms(tuple(windows), period)
    age = idle + windows[0].value
    if idle >= 0.0 and coil.value > age + SLACK:
        yield (
            f"{coil}, must be at most {rounded(age, 'ms')}, the age of the latest pulse's end at the next "
            f"sample: {period} less {', '.join(map(str, windows[1:]))}"
        )


def _microseconds(length: Named) -> float:
    """In µs, exactly whole if it was meant to be."""
    exact = length.value * 1000.0
    return round(exact) if abs(exact - round(exact)) < SLACK else exact


@_check("cycle.period_ms", *_WINDOWS)
def _lengths_are_whole_microseconds(*lengths: Named) -> Iterator[str]:
    """The controller counts µs; a sample is stamped at its middle and so must be an even number of them."""
    for length in lengths:
        step, name = (2, "an even") if length.path == "cycle.sample_ms" else (1, "a whole")
        if _microseconds(length) % step:
            yield f"{length}, must be {name} number of µs"


@_check("coil.*.blanking_ms", "cycle.blanking_ms")
def _coil_blanking_is_whole_microseconds(coil: Named, cycle: Named) -> Iterator[str]:
    if coil.value != cycle.value and _microseconds(coil) % 1:
        yield f"{coil}, must be a whole number of µs"


@_check("cycle.drive_window_ms", "cycle.pulse_tick_us")
def _drive_window_is_whole_ticks(window: Named, tick: Named) -> Iterator[str]:
    ticks = _microseconds(window) / tick.value
    if ticks % 1 or not FEWEST_TICKS <= ticks <= MOST_TICKS:
        legal = f"a whole number in [{FEWEST_TICKS}, {MOST_TICKS}]"
        yield f"{window} is {ticks:.9g} ticks of {tick}, must be {legal}"


@_check("cycle.shortest_pulse_ms", "control.bench_limit_ms", "cycle.drive_window_ms")
def _pulses_fit_the_drive_window(shortest: Named, bench: Named, window: Named) -> Iterator[str]:
    if shortest.value > window.value:
        yield f"{shortest}, must be at most {window}: no pulse would be left"
    elif not shortest.value <= bench.value <= window.value:
        yield f"{bench}, must be between {shortest} and {window}"


@_check(
    "cycle.timing_tolerance_ms",
    *(f"coil.{axis}.blanking_ms" for axis in AXES),
    *_WINDOWS,
    "cycle.period_ms",
)
def _tolerance_keeps_the_sample_clear(tolerance: Named, *keys: Named) -> Iterator[str]:
    """One cycle may run late and the next early: half of what is free before the sample bounds the tolerance.

    After the sample, half of the compute delay: a late one must end before the pulses start, with time left
    to compute.
    """
    coils, windows, period = keys[:3], keys[3:7], keys[7]
    blanking, _, delay, _ = windows
    slowest = max(coils, key=lambda coil: coil.value)
    idle = _idle_ms(windows, period)
    before = idle + blanking.value - slowest.value
    if idle < 0.0 or before < -SLACK:
        return  # told by the checks above
    if tolerance.value > before / 2.0 + SLACK:
        yield (
            f"{tolerance}, must be at most half of the {rounded(before, 'ms')} that are free before a sample "
            f"({period} less {', '.join(map(str, windows[1:]))} and {slowest})"
        )
    if tolerance.value > delay.value / 2.0 + SLACK:
        yield f"{tolerance}, must be at most half of {delay}: the sample must end before the pulses start"


# Sensors ----------------------------------------------------------------------------------------------------


@_check("magnetometer.counts_per_ut", "magnetometer.range_ut")
@_check("gyro.counts_per_deg_s", "gyro.range_deg_s")
def _counts_fit(sensitivity: Named, full_scale: Named) -> Iterator[str]:
    counts = sensitivity.value * full_scale.value
    if counts > INT16_MAX * (1.0 + SLACK):
        yield f"{sensitivity} × {full_scale} = {counts:.6g} counts, must be at most {INT16_MAX} (16 bits)"


@_check("magnetometer.range_ut", "control.field_max_ut", "magnetometer.bias_ut", "magnetometer.bias_error_ut")
def _magnetometer_spans_the_field(span: Named, field: Named, bias: Named, error: Named) -> Iterator[str]:
    largest = field.value + max(abs(b) + abs(e) for b, e in zip(bias.value, error.value, strict=True))
    if span.value <= largest:
        yield f"{span}, must exceed {rounded(largest, span.unit)}: {field} with {bias} and {error}"


@_check("gyro.range_deg_s", "body.tip_off_deg_s")
def _gyro_spans_the_tip_off(span: Named, tip_off: Named) -> Iterator[str]:
    """By the norm, since the tumble carries it into every axis; a quarter more for growth before damping."""
    least = 1.25 * math.hypot(*tip_off.value)
    if span.value <= least:
        yield f"{span}, must exceed {rounded(least, span.unit)}: 1.25 × the norm of {tip_off}"


# Control ----------------------------------------------------------------------------------------------------


@_check("control.law", "gyro")
@_check("control.settle_by", "gyro")
def _gyro_is_there(user: Named, table: Named) -> Iterator[str]:
    if user.value in ("rate", "gyro") and not table.value:
        yield f"{user} needs a gyro, but there is no table [gyro]"


@_check("control.field_min_ut", "control.field_max_ut")
def _field_bounds_are_ordered(least: Named, greatest: Named) -> Iterator[str]:
    if least.value >= greatest.value:
        yield f"{least}, must be below {greatest}"


@_check("control.settled_deg_s", "control.wake_deg_s")
def _wakes_above_settled(settled: Named, wake: Named) -> Iterator[str]:
    if wake.value <= settled.value:
        yield f"{wake}, must be above {settled}"


@_check("control.settle_by", "control.settled_deg_s", ORBITAL_PERIOD)
def _settled_above_the_orbit(settle_by: Named, settled: Named, period: Named) -> Iterator[str]:
    """The field turns even for a body at rest, about twice an orbit: by it, no lower rate can be told."""
    least = 3.0 * 360.0 / period.value
    if settle_by.value == "field" and settled.value < least:
        yield (
            f"{settled}, must be at least {rounded(least, settled.unit)}, 3 turns in {period}: with "
            f"{settle_by} the field's own turning over an orbit counts as rate; raise the threshold or "
            "settle by a gyro"
        )


@_check("control.settle_by", "control.settled_deg_s", "magnetometer.noise_nt", "cycle.period_ms",
        "control.field_min_ut", "control.field_max_ut")  # fmt: skip
def _settled_above_the_noise(
    settle_by: Named, settled: Named, noise: Named, period: Named, least: Named, greatest: Named
) -> Iterator[str]:
    """Three times the rate noise of a two-sample derivative, √2 σ / (B T), amid the plausible field."""
    floor = 3.0 * rate_noise_deg_s(noise.value, period.value, least.value, greatest.value)
    if settle_by.value == "field" and settled.value < floor:
        yield (
            f"{settled}, must be at least {rounded(floor, settled.unit)}, three times the noise of a rate "
            f"from two samples: with {settle_by}, {noise}, {period} and a field halfway between {least} and "
            f"{greatest}; raise the threshold, lengthen the period or settle by a gyro"
        )


@_check("control.law", "body.tip_off_deg_s", "cycle.period_ms")
def _tip_off_is_not_aliased(law: Named, tip_off: Named, period: Named) -> Iterator[str]:
    """Beyond half a turn between two samples their difference points the wrong way: the law adds energy."""
    turn = math.hypot(*tip_off.value) * period.value * 1e-3
    if law.value == "derivative" and turn >= 180.0:
        longest = rounded(180e3 / math.hypot(*tip_off.value), "ms")
        yield (
            f"{tip_off} turns by {rounded(turn, '°')} in {period}, must be below 180 ° with {law}: beyond it "
            f"the derivative is aliased; the period must be below {longest}"
        )


@_check("control.low_pass_s", "cycle.period_ms")
def _low_pass_is_not_endless(low_pass: Named, period: Named) -> Iterator[str]:
    longest = 100.0 * period.value * 1e-3
    if low_pass.value > longest * (1.0 + SLACK):
        yield f"{low_pass}, must be at most {rounded(longest, 's')}: 100 × {period}"


# Defence ----------------------------------------------------------------------------------------------------


@_check("defence.jump_ut", "control.field_max_ut", "cycle.period_ms", "body.tip_off_deg_s")
def _tumble_is_no_jump(jump: Named, field: Named, period: Named, tip_off: Named) -> Iterator[str]:
    least = turned_ut(tip_off.value, period.value, field.value)
    if jump.value < least * (1.0 - SLACK):
        yield (
            f"{jump}, must be at least {rounded(least, jump.unit)}, by which {field} turns in {period} at "
            f"{FAST:g} × the norm of {tip_off}"
        )


@_check("defence.noise_ut", "magnetometer.noise_nt")
def _noise_is_not_noisy(limit: Named, noise: Named) -> Iterator[str]:
    least = sample_noise_ut(noise.value)
    if limit.value < least * (1.0 - SLACK):
        yield f"{limit}, must be at least {rounded(least, limit.unit)}, 6 √2 × {noise}"


_STILL = ("magnetometer.counts_per_ut", "control.field_min_ut", "cycle.period_ms", ORBITAL_PERIOD)


@_check("defence.frozen_s", *_STILL)
@_check("defence.dead_axis_s", *_STILL)
def _settled_field_is_not_frozen(
    still: Named, counts: Named, field: Named, period: Named, orbit: Named
) -> Iterator[str]:
    cycles = fewest_still_cycles(orbit.value, field.value, counts.value, period.value)
    least = cycles * period.value * 1e-3
    if 0.0 < still.value < least - SLACK:
        yield (
            f"{still}, must be 0 (off) or at least {rounded(least, 's')}, {cycles} × {period}: with {counts}, "
            f"{field} that turns once in {orbit} may take as long to move by {MOVED_COUNTS} counts"
        )


@_check("defence.frozen_s", "cycle.period_ms")
@_check("defence.dead_axis_s", "cycle.period_ms")
@_check("defence.gyro_frozen_s", "cycle.period_ms")
def _still_counts_can_be_counted(still: Named, period: Named) -> Iterator[str]:
    most = MOST_CYCLES * period.value * 1e-3
    if still.value > most + SLACK:
        yield f"{still}, must be at most {rounded(most, 's')}, {MOST_CYCLES} × {period}"


@_check("defence.gyro_frozen_s", "cycle.period_ms")
def _gyro_may_repeat_itself(still: Named, period: Named) -> Iterator[str]:
    least = FEWEST_CYCLES * period.value * 1e-3
    if 0.0 < still.value < least - SLACK:
        yield f"{still}, must be 0 (off) or at least {rounded(least, 's')}, {FEWEST_CYCLES} × {period}"


@_check("defence.dead_axis_s", "defence.frozen_s")
def _one_axis_may_stand_longer(dead: Named, frozen: Named) -> Iterator[str]:
    if 0.0 < dead.value < frozen.value:
        yield f"{dead}, must be 0 (off) or at least {frozen}"


@_check("defence.gyro_frozen_s", "gyro")
@_check("defence.gyro_error_deg_s", "gyro")
def _gyro_to_be_watched_is_there(threshold: Named, gyro: Named) -> Iterator[str]:
    if threshold.value and not gyro.value:
        yield f"{threshold} needs a gyro, but there is no table [gyro]"


@_check("defence.gyro_error_deg_s", "magnetometer.noise_nt", "cycle.period_ms", "control.field_min_ut",
        "control.field_max_ut")  # fmt: skip
def _gyro_error_is_above_the_noise(error: Named, noise: Named, period: Named, *field: Named) -> Iterator[str]:
    least = 3.0 * rate_noise_deg_s(noise.value, period.value, *(bound.value for bound in field))
    most = most_gyro_error_deg_s(period.value)
    if error.value and error.value < least * (1.0 - SLACK):
        yield (
            f"{error}, must be 0 (off) or at least {rounded(least, error.unit)}, three times the noise of a "
            f"rate from two samples: with {noise}, {period} and a field halfway between {field[0]} and "
            f"{field[1]}"
        )
    elif error.value > most * (1.0 + SLACK):
        yield (
            f"{error}, must be at most {rounded(most, error.unit)}, {COMPARED_RAD:g} rad in {period}: gyro "
            "and field are not compared beyond it"
        )


@_check("defence.guard_deg_s", "body.tip_off_deg_s")
def _guard_is_above_the_tip_off(guard: Named, tip_off: Named) -> Iterator[str]:
    """A spin along the field may show late: up to the tip-off rate that is no growth."""
    least = math.hypot(*tip_off.value)
    if guard.value < least * (1.0 - SLACK):
        yield f"{guard}, must be at least {rounded(least, guard.unit)}, the norm of {tip_off}: a spin that shows late has not grown"


@_check("defence.window_s", "cycle.period_ms")
def _window_holds_a_peak(window: Named, period: Named) -> Iterator[str]:
    least = FEWEST_CYCLES * period.value * 1e-3
    if window.value < least - SLACK:
        yield (
            f"{window}, must be at least {rounded(least, 's')}, {FEWEST_CYCLES} × {period}: a peak is taken from "
            "that many"
        )


# Current sense ----------------------------------------------------------------------------------------------


@_check("current_sense.off_counts", "current_sense.counts_at_full", "current_sense.noise_counts", "supply.max_v",
        "supply.nominal_v", "coil.*.blanking_ms", "coil.*.time_constant_ms")  # fmt: skip
def _off_reads_as_off(
    off: Named, full: Named, noise: Named, highest: Named, nominal: Named, blanking: Named, lag: Named
) -> Iterator[str]:
    """What is left of the largest current when the sample begins, and noise, must count as off."""
    left = full.value * highest.value / nominal.value * math.exp(-blanking.value / lag.value)
    least = 6.0 * noise.value + left
    if off.value <= least:
        yield (
            f"{off}, must exceed {rounded(least, off.unit)}: 6 × {noise}, and what {full} at {highest} "
            f"({nominal}) leave after {blanking} with {lag}"
        )


@_check("current_sense.weak_percent", "current_sense.counts_at_full", "current_sense.off_counts", "supply.min_v",
        "supply.nominal_v")  # fmt: skip
def _weak_is_more_than_off(weak: Named, full: Named, off: Named, lowest: Named, nominal: Named) -> Iterator[str]:
    expected = full.value * lowest.value / nominal.value * pulse_share()
    if round(weak.value / 100.0 * expected) <= off.value:
        least = rounded(100.0 * (off.value + 1) / expected, weak.unit)
        yield (
            f"{weak} of the {rounded(expected, full.unit)} that {full} become in a pulse of "
            f"{PULSE_TIME_CONSTANTS:g} L/R at {lowest} ({nominal}) must exceed {off}: raise it to {least}, or "
            "lower current_sense.off_counts"
        )


@_check("current_sense.counts_at_full", "coil.*.time_constant_ms", "cycle.drive_window_ms")
def _a_pulse_reaches_its_current(_sense: Named, lag: Named, window: Named) -> Iterator[str]:
    if PULSE_TIME_CONSTANTS * lag.value > window.value:
        yield (
            f"{lag}, must be at most {rounded(window.value / PULSE_TIME_CONSTANTS, lag.unit)} with a table "
            f"[current_sense], a third of {window}: no pulse reaches a current that can be judged"
        )
