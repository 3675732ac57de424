"""From SI units to the controller's integers: the only place where a float becomes an integer.

Every integer is rounded to nearest. What does not fit is refused with the mission key that has to change. The physical
size of each integer of the trace is in `Scaling.size_of`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from pyharness import exact
from pyharness.exact import constants as mrd
from pyharness.gain import Gain, gain_of
from pyharness.mission import Mission, MissionError
from pyharness.mission.defence import COMPARED_RAD, PULSE_TIME_CONSTANTS, pulse_share
from pyharness.mission.model import AXES, Matrix, Vector
from pyharness.plant.cycle import Timeline
from pyharness.plant.sensors import rotation_matrix

FULL_SCALE = 32767
Q15 = 32768
NEVER_A_JUMP = 3 * FULL_SCALE**2
TIP_OFF_MARGIN = 1.25
"""Full scale of the rate over the tip-off rate."""

Config = dict[str, Any]


@dataclass(frozen=True)
class Integers:
    """A bare integer configuration, for what needs no physical units."""

    config: Config


@dataclass(frozen=True)
class Size:
    """What one count of an integer stands for: `value = count × step` in `unit`."""

    step: float
    unit: str

    def value(self, count: int | float) -> float:
        """The physical value of a count."""
        return count * self.step


@dataclass(frozen=True)
class Scaling:
    """The integer configuration of a mission and the physical size of its integers (SI)."""

    mission: Mission
    config: Config
    gain: Gain
    timeline: Timeline
    field_t: float  # one field count
    rate_rad_s: float  # one rate count
    dipole_a_m2: Vector  # mean dipole over the cycle at full command, per axis: full dipole × P / T
    raw_field_t: float  # one magnetometer count
    raw_rate_rad_s: float | None  # one gyro count

    @property
    def period_s(self) -> float:
        """The nominal cycle, s."""
        return self.timeline.period_us * 1e-6

    def command_a_m2(self, axis: int) -> float:
        """Mean dipole of one count of the command, A m²."""
        return self.dipole_a_m2[axis] / Q15

    def size_of(self, column: str) -> Size | None:
        """The physical size of an integer of inputs, outputs or trace, by its column name; None for flags and codes."""
        name, _, index = column.partition("[")
        axis = int(index.rstrip("]")) if index else 0
        leaf = name.rpartition(".")[2]
        per_second = self.field_t / self.period_s
        sizes = {
            "field": Size(self.field_t * 1e9, "nT"),
            "rate": Size(math.degrees(self.rate_rad_s), "°/s"),
            "norm": Size(self.field_t * 1e9, "nT"),
            "norm_change": Size(self.field_t * 1e9, "nT"),
            "norm_sq": Size((self.field_t * 1e6) ** 2, "µT²"),
            "jump_sq": Size((self.field_t * 1e6) ** 2, "µT²"),
            "derivative": Size(per_second * 1e9, "nT/s"),
            "filtered": Size(per_second * 1e9, "nT/s"),
            "filter": Size(per_second * 1e9 / 256, "nT/s"),
            "residual": Size(per_second * 1e9, "nT/s"),
            "across": Size(math.degrees(self.rate_rad_s), "°/s"),
            "turn": Size(math.degrees(1.0 / Q15), "° a period"),
            "factor": Size(1 / 16384, "period/interval"),
            "cross": Size(self.rate_rad_s * self.field_t * 1e9, "rad/s nT"),
            "demand": Size(self.command_a_m2(axis) * 1e3, "mA m²"),
            "command": Size(self.command_a_m2(axis) * 1e3, "mA m²"),
            "ticks": Size(self.timeline.tick_us * 1e-3, "ms"),
            "command_ticks": Size(self.timeline.tick_us * 1e-3, "ms"),
            "mag_raw": Size(self.raw_field_t * 1e9, "nT"),
            "separation_s": Size(1.0, "s"),
        }
        if self.raw_rate_rad_s is not None:
            sizes["gyro_raw"] = Size(math.degrees(self.raw_rate_rad_s), "°/s")
        if self.mission.current_sense is not None:
            percent = Size(100.0 / self.mission.current_sense.counts_at_full, "% of full current")
            sizes |= {"current_driven": percent, "current_sampled": percent}
        if leaf.endswith("_us"):
            return Size(1e-3, "ms")
        return None if name == "command" else sizes.get(leaf)  # the operator's command has no size


def scale(mission: Mission) -> Scaling:
    """The integers of a mission. Raises MissionError with every number that the integers cannot carry."""
    problems: list[str] = []
    timeline = Timeline.of(mission)
    gain = gain_of(mission)
    field_t = mission.control.field_max_ut * 1e-6 / FULL_SCALE
    rate_rad_s = TIP_OFF_MARGIN * mission.tip_off_rad_s / FULL_SCALE
    share = timeline.drive_window_us / timeline.period_us
    dipole = tuple(coil.dipole_a_m2 * share for coil in mission.coil)
    partial = Scaling(
        mission=mission, config={}, gain=gain, timeline=timeline, field_t=field_t, rate_rad_s=rate_rad_s,
        dipole_a_m2=dipole, raw_field_t=1e-6 / mission.magnetometer.counts_per_ut,
        raw_rate_rad_s=math.radians(1.0 / mission.gyro.counts_per_deg_s) if mission.gyro else None,
    )  # fmt: skip
    config = {"path": _path(partial, problems), "supervisor": _supervisor(partial, problems)}
    if problems:
        raise MissionError(mission.source, problems)
    config["digest"] = exact.config_digest(config)
    refusal = exact.init(config)
    if refusal != mrd.MRD_OK:
        raise MissionError(mission.source, [f"the controller would refuse these integers, code {refusal}: see mrd.h"])
    return Scaling(**{**partial.__dict__, "config": config})


def _path(s: Scaling, problems: list[str]) -> Config:
    mission, control, t = s.mission, s.mission.control, s.timeline
    mag, gyro = mission.magnetometer, mission.gyro
    norm_min, norm_max = _norm_range(s)
    if norm_min < Q15:
        problems.append(
            f"control.field_min_ut: {control.field_min_ut:g} µT is {math.sqrt(norm_min):.0f} counts of the field, must be at "
            f"least 182: raise it above {control.field_max_ut * 182 / FULL_SCALE:.2g} µT, or lower control.field_max_ut"
        )
    return {
        "mag": _sensor("magnetometer", mag.misalignment_deg, mag.bias_ut, s.raw_field_t, 1e-6, s.field_t,
                       mag.counts_per_ut * mag.range_ut, problems),
        "gyro": _sensor("gyro", gyro.misalignment_deg, gyro.bias_deg_s, s.raw_rate_rad_s, math.pi / 180, s.rate_rad_s,
                        gyro.counts_per_deg_s * gyro.range_deg_s, problems) if gyro else _NO_SENSOR,
        "gyro_fitted": int(gyro is not None),
        "law": {"derivative": mrd.MRD_LAW_DERIVATIVE, "rate": mrd.MRD_LAW_RATE}[control.law],
        "gain_scaling": {"constant": mrd.MRD_GAIN_CONSTANT, "normalised": mrd.MRD_GAIN_NORMALISED}[control.gain_scaling],
        "saturation": {"per-axis": mrd.MRD_SATURATE_PER_AXIS,
                       "keep-direction": mrd.MRD_SATURATE_KEEP_DIRECTION}[control.saturation],
        "norm_min_sq": norm_min,
        "norm_max_sq": norm_max,
        "period_us": t.period_us,
        "phase_us": t.mid_sample_us,
        "tolerance_us": round(mission.cycle.timing_tolerance_ms * 1e3),
        "half_sample_us": t.sample_us // 2,
        "delay_us": t.delay_us,
        "blanking_us": tuple(round(coil.blanking_ms * 1e3) for coil in mission.coil),
        "tick_us": t.tick_us,
        "window_ticks": t.window_ticks,
        "shortest_ticks": max(1, math.ceil(t.shortest_pulse_us / t.tick_us)),
        "polarity": tuple(coil.polarity for coil in mission.coil),
        "filter_gain": _filter_gain(control.low_pass_s, s.period_s),
        "derivative_gain": _gain(s, "derivative law", s.field_t / s.period_s, 0, problems),
        "rate_gain": _gain(s, "rate-damping law", s.rate_rad_s * s.field_t, 16, problems) if control.law == "rate"
        else _no_gain(control.gain_scaling, norm_min),
        **_continuity(s),
        **_agreement(s),
        **_current_sense(s),
    }  # fmt: skip


def _norm_range(s: Scaling) -> tuple[int, int]:
    """Least and greatest plausible ‖B‖², field counts²."""
    control = s.mission.control
    return tuple(round((ut * 1e-6 / s.field_t) ** 2) for ut in (control.field_min_ut, control.field_max_ut))


def _continuity(s: Scaling) -> Config:
    defence = s.mission.defence
    jump, noise = (ut * 1e-6 / s.field_t for ut in (defence.jump_ut, defence.noise_ut))
    return {
        "jump_max_sq": _limited(jump * jump, 1, NEVER_A_JUMP),
        "noise_limit": _limited(noise, 1, 65535),
        "frozen_limit": _cycles(s, defence.frozen_s),
        "dead_limit": _cycles(s, defence.dead_axis_s),
        "gyro_frozen_limit": _cycles(s, defence.gyro_frozen_s),
    }


def _agreement(s: Scaling) -> Config:
    """Gyro against field; not compared without a gyro, or where the factor from rate to turn leaves its range."""
    turn_rad = s.rate_rad_s * s.period_s  # in a period, of one rate count
    mantissa, shift = _mantissa(turn_rad * 65536)
    error_deg_s = s.mission.defence.gyro_error_deg_s
    if s.mission.gyro is None or not 1 <= shift <= 31:
        return {"agree_limit": 0, "agree_mantissa": Q15, "agree_shift": 31, "agree_rate_max": 1}
    limit = math.radians(error_deg_s) * s.period_s * FULL_SCALE  # the greatest plausible field
    return {
        "agree_limit": _limited(limit, 1, 65535) if error_deg_s else 0,
        "agree_mantissa": mantissa,
        "agree_shift": shift,
        "agree_rate_max": _limited(COMPARED_RAD / turn_rad, 1, FULL_SCALE),
    }


def _current_sense(s: Scaling) -> Config:
    sense, supply = s.mission.current_sense, s.mission.supply
    if sense is None:
        return {"current_fitted": 0, "current_ticks": 1, "current_min": (2, 2, 2), "current_off_max": 1}
    slowest_us = max(coil.time_constant_ms for coil in s.mission.coil) * 1e3
    judged_ticks = _whole_up(PULSE_TIME_CONSTANTS * slowest_us / s.timeline.tick_us)
    expected = sense.counts_at_full * supply.min_v / supply.nominal_v * pulse_share()
    return {
        "current_fitted": 1,
        "current_ticks": min(s.timeline.window_ticks, judged_ticks),
        "current_min": (round(sense.weak_percent / 100.0 * expected),) * 3,
        "current_off_max": sense.off_counts,
    }


def _limited(value: float, least: int, greatest: int) -> int:
    return min(greatest, max(least, round(value)))


def _whole_up(value: float) -> int:
    """Rounded up, but not over the last bit of a decimal fraction."""
    return math.ceil(value - 1e-6)


def _cycles(s: Scaling, seconds: float) -> int:
    """The cycles that last this long at least."""
    return _whole_up(seconds / s.period_s)


def _supervisor(s: Scaling, problems: list[str]) -> Config:
    control, defence = s.mission.control, s.mission.defence
    mantissa, shift = _mantissa(1.0 / (Q15 * s.period_s * s.rate_rad_s))
    if not 1 <= shift <= 31:
        problems.append(
            f"body.tip_off_deg_s: {math.degrees(s.mission.tip_off_rad_s):g} °/s at a period of {s.period_s * 1e3:g} ms cannot be "
            "estimated in 16 bits"
        )
    bench = math.floor(control.bench_limit_ms * 1e3 / s.timeline.tick_us)
    if not 1 <= bench <= s.timeline.window_ticks:
        problems.append(
            f"control.bench_limit_ms: {control.bench_limit_ms:g} ms, must be in [{s.timeline.tick_us / 1e3:g}, "
            f"{s.timeline.drive_window_us / 1e3:g}] ms, from one tick to the drive window"
        )
    return {
        "settle_dwell": max(1, _cycles(s, control.dwell_s)),
        "wake_dwell": max(1, _cycles(s, control.wake_dwell_s)),
        "hold_off_s": control.hold_off_s,
        "settle_by": {"field": mrd.MRD_SETTLE_BY_FIELD, "gyro": mrd.MRD_SETTLE_BY_GYRO}[control.settle_by],
        "settled_rate": _rate_count(s, "control.settled_deg_s", control.settled_deg_s, problems),
        "wake_rate": _rate_count(s, "control.wake_deg_s", control.wake_deg_s, problems),
        "estimate_mantissa": mantissa,
        "estimate_shift": shift,
        "window_cycles": max(1, _cycles(s, defence.window_s)),
        "pause_cycles": max(1, _cycles(s, defence.pause_s)),
        "guard_turn": _turn(s, defence.guard_deg_s) if defence.divergence_guard else 65535,
        "stall_turn": _turn(s, control.settled_deg_s),
        "growth": _limited(256.0 * (1.0 + defence.growth_percent / 100.0), 257, 1024),
        "progress": _limited(256.0 * (1.0 - defence.progress_percent / 100.0), 1, 256),
        "retries": defence.retries,
        "bench_key": control.bench_key,
        "bench_limit_ticks": bench,
    }


def _rate_count(s: Scaling, key: str, deg_s: float, problems: list[str]) -> int:
    count = round(math.radians(deg_s) / s.rate_rad_s)
    if not 1 <= count <= 65534:
        problems.append(
            f"{key}: {deg_s:g} °/s, must be in [{math.degrees(s.rate_rad_s):.2g}, "
            f"{math.degrees(s.rate_rad_s) * 65534:.4g}] °/s, the range of the rate at this tip-off rate"
        )
    return count


def _turn(s: Scaling, deg_s: float) -> int:
    """The chord 2 sin(ωT/2) of the field's turn in a period, Q15 rad; from half a turn on, and as the greatest count, never exceeded."""
    half_turn = 0.5 * math.radians(deg_s) * s.period_s
    return min(65535, round(Q15 * 2.0 * math.sin(min(half_turn, math.pi / 2.0))))


_NO_SENSOR: Config = {"matrix": (0,) * 9, "offset": (0,) * 3, "shift": 1, "limit": 1}


def _sensor(name: str, misalignment_deg: Vector, bias: Vector, raw: float, bias_unit: float, count: float,
            full_scale: float, problems: list[str]) -> Config:
    """Calibration of one sensor: out = R (raw counts × raw − bias) / count, R from sensor to body axes.

    `raw` and `count` are the SI sizes of a raw count and a count out, `bias_unit` that of the bias.
    """
    rotation: Matrix = rotation_matrix(misalignment_deg).tolist()
    ratio = raw / count
    shift = next((s for s in range(16, 0, -1) if _fits(rotation, ratio * 2**s)), None)
    if shift is None:
        problems.append(
            f"{name}: one raw count is {ratio:.4g} counts on board, too coarse for 16 bits; needs more counts per unit, "
            "or a smaller range on board"
        )
        return _NO_SENSOR
    offset = [round(sum(r * b for r, b in zip(row, bias, strict=True)) * bias_unit / count) for row in rotation]
    for axis, value in zip(AXES, offset, strict=True):
        if abs(value) > FULL_SCALE:
            problems.append(f"{name}: bias on {axis} is {value} counts on board, must be in [-32767, 32767]")
    return {
        "matrix": tuple(round(r * ratio * 2**shift) for row in rotation for r in row),
        "offset": tuple(offset),
        "shift": shift,
        "limit": min(FULL_SCALE, math.floor(full_scale)),
    }


def _fits(rotation: Matrix, factor: float) -> bool:
    rows = [[abs(round(r * factor)) for r in row] for row in rotation]
    return all(max(row) <= FULL_SCALE and sum(row) <= 65535 for row in rows)


def _filter_gain(time_constant_s: float, period_s: float) -> int:
    """1 − pole of the sampled first-order low-pass, pole = exp(−T/τ), in Q15."""
    return Q15 if time_constant_s == 0 else max(128, round(Q15 * -math.expm1(-period_s / time_constant_s)))


def _mantissa(value: float) -> tuple[int, int]:
    """(m, s) with value ≈ m / 2^s and m in [32768, 65535]."""
    fraction, exponent = math.frexp(value)  # value = fraction × 2^exponent, fraction in [0.5, 1)
    mantissa, shift = round(fraction * 65536), 16 - exponent
    return (mantissa, shift) if mantissa < 65536 else (32768, shift - 1)


def _gain(s: Scaling, law: str, input_si: float, input_shift: int, problems: list[str]) -> Config:
    """The gain of one law: command counts per count of its input, of size `input_si` [T/s] and shifted down by `input_shift`."""
    control = s.mission.control
    normalised = control.gain_scaling == "normalised"
    strength = s.gain.K_n_m_s / s.field_t**2 if normalised else s.gain.k_am2_s_per_t
    pairs = [_mantissa(strength * input_si / s.command_a_m2(axis) * 2.0**input_shift) for axis in range(3)]
    least, greatest = _shift_range(s)
    if not all(least <= shift <= greatest for _, shift in pairs):
        given, unit = (s.gain.K_n_m_s, "N m s") if normalised else (s.gain.k_am2_s_per_t, "A m² s/T")
        low = max(given * Q15 / m * 2.0 ** (shift - greatest) for m, shift in pairs)
        high = min(given * 65535 / m * 2.0 ** (shift - least) for m, shift in pairs)
        problems.append(
            f"{s.gain.origin}: {given:.4g} {unit}: its integer mantissa would be lost in the {law} on coil.x, coil.y or coil.z, "
            f"must be in [{low * 1.005:.3g}, {high * 0.995:.3g}] {unit}"
        )
    return {"mantissa": tuple(m for m, _ in pairs), "shift": tuple(n for _, n in pairs)}


def _shift_range(s: Scaling) -> tuple[int, int]:
    """Legal shifts of a gain, as the configuration check in fsw_c/README.md has them."""
    if s.mission.control.gain_scaling == "constant":
        return 1, 31
    low, high = _norm_range(s)
    return 2 - low.bit_length(), 31 - high.bit_length()


def _no_gain(gain_scaling: str, norm_min: int) -> Config:
    shift = 1 if gain_scaling == "constant" else 2 - norm_min.bit_length()
    return {"mantissa": (Q15,) * 3, "shift": (shift,) * 3}
