"""Every named value of the arithmetic with its declared range, in one table.

Fields carry their name in mrd.h: `config.…`, `inputs.…`, `state.…`, `outputs.…`, and the parts of the trace
by themselves (`derivative.factor`). The other names are the intermediate values of the arithmetic document.
The range of a value is the one it has where its stage is reached; a trace value that is not reached is 0.
The range of a configuration field is the legal one, of an input the width of its type, and of a state field
the invariant that a step keeps.
"""

from __future__ import annotations

from typing import NamedTuple

from pyharness.exact.num import INT16_MAX, UINT16_MAX, Vector

UINT32_MAX = 2**32 - 1
NORM_MAX = 3 * INT16_MAX**2
FILTER_MAX = 256 * INT16_MAX
CROSS_MAX = 2 * INT16_MAX**2
NORM_ROOT_MAX = 56754  # of NORM_MAX
RATE_SLOW_MAX = UINT16_MAX - 1  # the saturated estimate is never slow


class Range(NamedTuple):
    """A closed range lo:hi, with the unit or format of the value and what it is."""

    lo: int
    hi: int
    unit: str
    meaning: str


class RangeError(ValueError):
    """A named value has left its declared range."""

    def __init__(self, name: str, value: int | Vector) -> None:
        self.name, self.value, self.range = name, value, RANGES[name]
        lo, hi, unit, meaning = self.range
        super().__init__(f"{name}: {value} {unit} ({meaning}), must be in {lo}:{hi}")


def _sym(n: int, unit: str, meaning: str) -> Range:
    return Range(-n, n, unit, meaning)


def _flag(meaning: str) -> Range:
    return Range(0, 1, "flag", meaning)


def _u16(unit: str, meaning: str) -> Range:
    return Range(0, UINT16_MAX, unit, meaning)


def _u32(unit: str, meaning: str) -> Range:
    return Range(0, UINT32_MAX, unit, meaning)


def _i16(unit: str, meaning: str) -> Range:
    return Range(-INT16_MAX - 1, INT16_MAX, unit, meaning)


def _sensor(path: str, what: str) -> dict[str, Range]:
    return {
        f"{path}.matrix": _sym(INT16_MAX, "Q(shift)", f"{what} calibration matrix"),
        f"{path}.offset": _sym(INT16_MAX, f"{what} count", f"{what} offset"),
        f"{path}.shift": Range(1, 16, "bits", f"{what} matrix format"),
        f"{path}.limit": Range(1, INT16_MAX, "raw count", f"{what} clipped value"),
    }


def _gain(path: str, what: str) -> dict[str, Range]:
    return {
        f"{path}.mantissa": Range(32768, UINT16_MAX, "mantissa", f"gain of the {what} law"),
        f"{path}.shift": Range(-30, 31, "bits", f"gain of the {what} law"),
    }


def _counters(path: str) -> dict[str, Range]:
    return {
        f"{path}.trusted": _u16("cycles", "with a trusted sample"),
        f"{path}.rejected": _u16("cycles", "without a trusted sample"),
        f"{path}.blanked": _u16("cycles", "with a sample inside a blanking time"),
        f"{path}.fell_back": _u16("cycles", "in which the law fell back"),
        f"{path}.refused": _u16("commands", "refused"),
        f"{path}.restarts": _u16("restarts", "after a failed integrity check"),
        f"{path}.corrupt": _u16("cycles", "with a corrupt configuration"),
        f"{path}.mag_faults": _u16("cycles", "with a magnetometer out of range or without continuity"),
        f"{path}.gyro_faults": _u16("cycles", "with a gyro missing, out of range, frozen or disagreeing"),
        f"{path}.coil_faults": _u16("cycles", "with a wrong coil current or a missing stamp"),
        f"{path}.time_faults": _u16("cycles", "with a sample off its place or a wrong interval"),
        f"{path}.trips": _u16("divergences", "in all"),
    }


def _ballot(path: str, what: str) -> dict[str, Range]:
    return {
        f"{path}.level": Range(0, 64, "votes", f"against {what}"),
        f"{path}.tripped": _flag(f"against {what}"),
    }


_CONFIG = {
    **_sensor("config.path.mag", "field"),
    **_sensor("config.path.gyro", "rate"),
    "config.path.gyro_fitted": _flag("gyro fitted"),
    "config.path.law": Range(1, 2, "MRD_LAW", "law"),
    "config.path.gain_scaling": Range(1, 2, "MRD_GAIN", "gain scaling"),
    "config.path.saturation": Range(1, 2, "MRD_SATURATE", "saturation policy"),
    "config.path.norm_min_sq": Range(32768, NORM_MAX, "field count^2", "least plausible norm squared"),
    "config.path.norm_max_sq": Range(32768, NORM_MAX, "field count^2", "greatest plausible norm squared"),
    "config.path.period_us": Range(2**14, 10_000_000, "us", "nominal cycle"),
    "config.path.phase_us": Range(0, 9_999_999, "us", "mid-sample after the start of the cycle"),
    "config.path.tolerance_us": Range(0, 2_499_999, "us", "largest departure of mid-sample from its place"),
    "config.path.half_sample_us": Range(0, 9_999_999, "us", "half the sample length"),
    "config.path.delay_us": Range(0, 9_999_999, "us", "mid-sample to the start of the drive window"),
    "config.path.blanking_us": Range(0, 9_999_999, "us", "least age of a switch-off at a sample"),
    "config.path.tick_us": Range(1, UINT16_MAX, "us", "pulse timer tick"),
    "config.path.window_ticks": Range(1, 2**14, "ticks", "drive window"),
    "config.path.shortest_ticks": Range(1, 2**14, "ticks", "shortest pulse"),
    "config.path.polarity": _sym(1, "sign", "coil polarity"),
    "config.path.filter_gain": Range(128, 2**15, "Q15", "1 - pole of the low-pass"),
    **_gain("config.path.derivative_gain", "derivative"),
    **_gain("config.path.rate_gain", "rate"),
    "config.path.jump_max_sq": Range(1, NORM_MAX, "field count^2", "greatest change a sample, squared"),
    "config.path.noise_limit": Range(1, UINT16_MAX, "field count", "greatest change of the norm"),
    "config.path.frozen_limit": _u16("samples", "with the same counts on all axes; 0: never frozen"),
    "config.path.dead_limit": _u16("samples", "with the same count on one axis; 0: never dead"),
    "config.path.gyro_frozen_limit": _u16("samples", "with the same gyro counts; 0: never frozen"),
    "config.path.agree_limit": _u16("field count a period", "gyro against field; 0: not compared"),
    "config.path.agree_mantissa": Range(32768, UINT16_MAX, "mantissa", "w x B in field counts a period"),
    "config.path.agree_shift": Range(1, 31, "bits", "w x B in field counts a period"),
    "config.path.agree_rate_max": Range(1, INT16_MAX, "rate count", "not compared above"),
    "config.path.current_fitted": _flag("coil current sense fitted"),
    "config.path.current_ticks": Range(1, 2**14, "ticks", "shorter pulses are not judged"),
    "config.path.current_min": Range(2, INT16_MAX, "current count", "less is weak"),
    "config.path.current_off_max": Range(1, INT16_MAX - 1, "current count", "more is not off"),
    "config.supervisor.settle_dwell": Range(1, UINT32_MAX, "cycles", "slow until SETTLED"),
    "config.supervisor.wake_dwell": Range(1, UINT32_MAX, "cycles", "fast until DAMPING again"),
    "config.supervisor.hold_off_s": _u32("s", "separation to the first pulse of the law"),
    "config.supervisor.settle_by": Range(1, 2, "MRD_SETTLE_BY", "source of the rate estimate"),
    "config.supervisor.settled_rate": Range(0, RATE_SLOW_MAX, "rate count", "slow: at or below"),
    "config.supervisor.wake_rate": Range(0, RATE_SLOW_MAX, "rate count", "fast: above"),
    "config.supervisor.estimate_mantissa": Range(32768, UINT16_MAX, "mantissa", "rate count per chord"),
    "config.supervisor.estimate_shift": Range(1, 31, "bits", "rate count per chord"),
    "config.supervisor.window_cycles": Range(1, UINT32_MAX, "cycles", "over which progress is judged"),
    "config.supervisor.pause_cycles": Range(1, UINT32_MAX, "cycles", "in PAUSE"),
    "config.supervisor.guard_turn": _u16("Q15 rad a period", "diverging above this only; 65535: never"),
    "config.supervisor.stall_turn": _u16("Q15 rad a period", "no progress above this only"),
    "config.supervisor.growth": Range(257, 1024, "Q8", "diverging: above this times the peak before"),
    "config.supervisor.progress": Range(1, 256, "Q8", "stalled: above this times an earlier peak"),
    "config.supervisor.retries": _u16("pauses", "before SAFE"),
    "config.supervisor.bench_key": Range(1, UINT16_MAX, "key", "carried by the arm command"),
    "config.supervisor.bench_limit_ticks": Range(1, 2**14, "ticks", "longest bench pulse"),
    "config.digest": _u32("digest", "of the configuration"),
}

_INPUTS = {
    "inputs.path.cycle_start_us": _u32("us", "start of the cycle, wraps"),
    "inputs.path.sample_us": _u32("us", "mid-sample, wraps"),
    "inputs.path.switch_off_us": _u32("us", "last switch-off of each coil, wraps"),
    "inputs.path.mag_raw": _i16("raw count", "magnetometer"),
    "inputs.path.gyro_raw": _i16("raw count", "gyro"),
    "inputs.path.mag_valid": _u16("flag", "magnetometer sampled"),
    "inputs.path.gyro_valid": _u16("flag", "gyro sampled"),
    "inputs.path.current_valid": _u16("flag", "coil currents read"),
    "inputs.path.current_driven": _i16("current count", "at the end of the last pulse"),
    "inputs.path.current_sampled": _i16("current count", "while the magnetometer samples"),
    "inputs.separation_s": _u32("s", "since separation"),
    "inputs.low_power": _u16("flag", "coils are to stay off"),
    "inputs.command": _u16("MRD_COMMAND", "command"),
    "inputs.command_key": _u16("key", "with arm"),
    "inputs.command_coil": _u16("axis", "with bench"),
    "inputs.command_ticks": _i16("ticks", "with bench"),
}

_STATE = {
    "state.path.filter": _sym(FILTER_MAX, "Q8 field count a period", "low-pass"),
    "state.path.sample_us": _u32("us", "of the last trusted sample"),
    "state.path.switch_off_us": _u32("us", "stamps of the last step"),
    "state.path.drive_us": _u32("us", "start of the drive window of each coil's last pulse"),
    "state.path.field": _sym(INT16_MAX, "field count", "last trusted sample"),
    "state.path.field_valid": _flag("field holds a trusted sample of the last step"),
    "state.path.filter_valid": _flag("filter has begun"),
    "state.path.off_known": _flag("switch_off_us holds stamps"),
    "state.path.off_clear": _flag("this switch-off was once old enough"),
    "state.path.pending": _flag("a pulse whose switch-off is not stamped yet"),
    "state.path.ticks": _sym(2**14, "ticks", "pulses of the last step"),
    "state.path.mag_raw": _i16("raw count", "magnetometer, last sample"),
    "state.path.mag_known": _flag("mag_raw holds a sample"),
    "state.path.mag_same": _u16("samples", "in a row with that count"),
    "state.path.norm": Range(0, NORM_ROOT_MAX, "field count", "norm of the last step"),
    "state.path.norm_known": _flag("norm is that of the last step"),
    **_ballot("state.path.noise", "the norm"),
    **_ballot("state.path.jumping", "the field"),
    "state.path.gyro_raw": _i16("raw count", "gyro, last sample"),
    "state.path.gyro_known": _flag("gyro_raw holds a sample"),
    "state.path.gyro_same": _u16("samples", "in a row with these counts"),
    "state.path.rate": _sym(INT16_MAX, "rate count", "rate of the last step"),
    "state.path.rate_known": _flag("rate can be used"),
    **_ballot("state.path.agreement", "the gyro"),
    **_ballot("state.path.weak", "a coil's current"),
    **_ballot("state.path.backward", "a coil's sense"),
    "state.dwell": _u32("cycles", "towards damping, settled or waking, or in PAUSE"),
    "state.mode": Range(3, 15, "MRD_MODE", "mode"),
    "state.inhibit_commanded": _u16("flags", "0, or 65535: inhibit stays until resume"),
    "state.trips": _u16("divergences", "since the last RESUME or SETTLED"),
    "state.cycle": _u16("cycles", "since reset, wraps"),
    "state.progress.window": Range(0, UINT32_MAX - 1, "cycles", "of the present window"),
    "state.progress.peak": _u16("rate count", "peaks of the present window and the two before"),
    "state.progress.least": _u16("rate count", "of the present four estimates"),
    "state.progress.in_four": Range(0, 3, "estimates", "of the present four"),
    "state.progress.stalled": _flag("no progress at the end of the last window"),
    **_counters("state.counters"),
    "state.digest": _u32("digest", "of the state"),
}

_TRACE = {
    # stage 1
    "calibration.sum": _sym(65535 * 32766, "Q(shift) count", "matrix times raw counts"),
    "calibration.value": _sym(2**30 + INT16_MAX, "count", "calibrated, before the clamp"),
    "calibration.field": _sym(INT16_MAX, "field count", "field"),
    "calibration.rate": _sym(INT16_MAX, "rate count", "rate"),
    "calibration.rate_valid": _flag("rate can be used"),
    # stage 2
    "plausibility.norm_sq": Range(0, NORM_MAX, "field count^2", "norm of the field, squared"),
    "plausibility.norm": Range(0, NORM_ROOT_MAX, "field count", "norm of the field, rounded down"),
    # stage 3
    "currents.along": Range(-INT16_MAX - 1, INT16_MAX + 1, "current count", "in the sense of the pulse"),
    "currents.fault": Range(0, 3, "MRD_COIL", "what is held against a coil"),
    # stage 4
    "gate.departure": _u32("us", "mid-sample against its place in the cycle, mod 2^32"),
    "gate.age_us": _u32("us", "switch-off to the start of the sample, mod 2^32"),
    "gate.since_start_us": _u32("us", "start of the cycle after the drive window opened, wraps"),
    "gate.since_drive_us": _u32("us", "start of the last pulse's drive window to the switch-off, mod 2^32"),
    "gate.trusted": _flag("sample is used"),
    # stage 5
    "continuity.same": _u16("samples", "in a row with the same count"),
    "continuity.elapsed": _u32("us", "since the last trusted sample, mod 2^32"),
    "continuity.difference": _sym(2 * INT16_MAX, "field count", "from the last trusted sample"),
    "continuity.jump_sq": Range(0, NORM_MAX, "field count^2", "clamped difference, squared"),
    "continuity.norm_change": Range(0, NORM_ROOT_MAX, "field count", "of the norm from the last step"),
    "continuity.gyro_same": _u16("samples", "of the gyro in a row with the same counts"),
    # stage 6
    "derivative.interval_us": _u32("us", "between the two samples, mod 2^32"),
    "derivative.period": Range(2**14, 2**15 - 1, "us >> k", "P: period in 15 bits"),
    "derivative.interval": Range(2**13, 49151, "us >> k", "I: interval in the unit of the period"),
    "derivative.quotient": Range(10922, 32770, "Q14", "period / interval, before the limit"),
    "derivative.factor": Range(10922, 2**15, "Q14", "period / interval"),
    "derivative.difference": _sym(2 * INT16_MAX, "field count", "between the two samples"),
    "derivative.product": _sym(2 * INT16_MAX * 2**15, "Q14 field count a period", "difference times factor"),
    "derivative.unclamped": _sym(4 * INT16_MAX, "field count a period", "derivative before the clamp"),
    "derivative.derivative": _sym(INT16_MAX, "field count a period", "derivative of the field"),
    "derivative.valid": _flag("there is a derivative"),
    # stage 7
    "low_pass.target": _sym(FILTER_MAX, "Q8 field count a period", "derivative in the filter's format"),
    "low_pass.error": _sym(2 * FILTER_MAX, "Q8 field count a period", "target minus filter"),
    "low_pass.product": _sym(2 * FILTER_MAX * 2**15, "Q23 field count a period", "error times gain; 40 bits"),
    "low_pass.filter": _sym(FILTER_MAX, "Q8 field count a period", "new filter"),
    "low_pass.filtered": _sym(INT16_MAX, "field count a period", "filtered derivative"),
    # stage 8
    "agreement.mean_rate": _sym(INT16_MAX, "rate count", "rate at the middle of the interval"),
    "agreement.mean_field": _sym(INT16_MAX, "field count", "field at the middle of the interval"),
    "agreement.product": _sym(
        CROSS_MAX * UINT16_MAX, "Q(shift + 16) field count a period", "w x B times mantissa; 48 bits"),
    "agreement.residual": _sym(INT16_MAX + 2**30, "field count a period", "derivative plus w x B"),
    "agreement.allowed": Range(1, UINT16_MAX + 4095, "field count a period", "greatest residual that agrees"),
    "agreement.judged": _flag("gyro and field were compared"),
    # stage 9
    "law.active": Range(0, 2, "MRD_LAW", "law that acted"),
    "law.norm": Range(32768, NORM_MAX, "field count^2", "norm limited to its plausible range"),
    "law.exponent": Range(0, 16, "bits", "norm brought to 16 bits"),
    "law.reciprocal": Range(32768, 65535, "2^31 / norm", "of the norm in 16 bits"),
    "law.scaled": Range(2**30, 2**32 - 131071, "product", "gain mantissa times reciprocal"),
    "law.mantissa": Range(32768, UINT16_MAX, "mantissa", "gain used"),
    "law.shift": Range(1, 31, "bits", "gain used"),
    "law.cross": _sym(CROSS_MAX, "rate count x field count", "w x B"),
    "law.product": _sym(INT16_MAX * UINT16_MAX, "Q(shift) command", "filtered derivative times gain"),
    "law.cross_product": _sym(CROSS_MAX * UINT16_MAX, "Q(shift + 16) command", "w x B times gain; 48 bits"),
    "law.demand": _sym(2**30, "Q15 of the dipole limit", "unsaturated command"),
    # stage 10
    "saturation.largest": Range(0, 2**30, "Q15 of the dipole limit", "largest demand of the three axes"),
    "saturation.exponent": Range(0, 15, "bits", "largest demand brought to 16 bits"),
    "saturation.divisor": Range(32768, 65535, "demand >> exponent", "largest demand in 16 bits"),
    "saturation.reciprocal": Range(32767, 65534, "Q16", "limit / divisor"),
    "saturation.product": Range(0, INT16_MAX * 2**16 + 32767, "Q16 command", "demand times reciprocal"),
    "saturation.command": _sym(INT16_MAX, "Q15 of the dipole limit", "command"),
    # stage 11
    "pulses.product": Range(0, INT16_MAX * 2**14, "Q15 ticks", "magnitude of the command times the window"),
    "pulses.width": Range(0, 2**14, "ticks", "width before the shortest pulse"),
    "pulses.ticks": _sym(2**14, "ticks", "signed pulse"),
    # commit
    "commit.ticks": _i16("ticks", "pulses really to be made, whoever commits them"),
}

_ESTIMATE = {
    "estimate.sum_sq": Range(0, NORM_MAX, "count^2", "squares of the rate, or of the filtered derivative"),
    "estimate.change": Range(0, NORM_ROOT_MAX, "field count a period", "a: norm of the filtered derivative"),
    "estimate.norm": Range(1, NORM_ROOT_MAX, "field count", "b: norm of the field"),
    "estimate.turn": _u16("Q15 rad a period", "chord of the field's turn"),
    "estimate.product": Range(0, UINT16_MAX**2, "Q(shift) rate count", "chord times mantissa"),
    "estimate.across": _u16("rate count", "rate across the field, saturated"),
    "estimate.across_valid": _flag("there is a rate across the field"),
}

_PROGRESS = {
    "ballot.level": Range(0, 64, "votes", "against"),
    "progress.window": Range(1, UINT32_MAX, "cycles", "of the window, this one counted"),
    "progress.grown": Range(0, 256 * UINT16_MAX, "Q8 rate count", "peak of the window"),
    "progress.allowed": Range(0, 1024 * UINT16_MAX, "Q8 rate count", "share of an earlier peak"),
}

_OUTPUTS = {
    "outputs.ticks": _sym(2**14, "ticks", "signed pulses of this cycle"),
    "outputs.mode": Range(3, 15, "MRD_MODE", "mode"),
    "outputs.status": Range(0, UINT32_MAX, "bits", "status word"),
    "outputs.rate": _u16("rate count", "rate estimate, saturated"),
    "outputs.rate_valid": _flag("there is a rate estimate"),
    "outputs.handover": _flag("settled"),
    "outputs.cycle": _u16("cycles", "since reset, wraps"),
    "outputs.digest": _u32("digest", "of the configuration in use"),
    **_counters("outputs.counters"),
}

RANGES: dict[str, Range] = {**_CONFIG, **_INPUTS, **_STATE, **_TRACE, **_ESTIMATE, **_PROGRESS, **_OUTPUTS}

_BOUNDS = {name: (entry.lo, entry.hi) for name, entry in RANGES.items()}


def inside(name: str, values: int | tuple[int, ...]) -> bool:
    """Whether a value, or every element of an array, is in the declared range."""
    lo, hi = _BOUNDS[name]
    return all(lo <= value <= hi for value in (values if isinstance(values, tuple) else (values,)))


def check(name: str, value: int) -> int:
    """The value itself. Raises RangeError if it has left the declared range."""
    lo, hi = _BOUNDS[name]
    if lo <= value <= hi:
        return value
    raise RangeError(name, value)


def check3(name: str, values: Vector) -> Vector:
    """The vector itself. Raises RangeError if an element has left the declared range."""
    lo, hi = _BOUNDS[name]
    x, y, z = values
    if lo <= x <= hi and lo <= y <= hi and lo <= z <= hi:
        return values
    raise RangeError(name, values)
