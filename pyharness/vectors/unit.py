"""Unit vectors: short runs of made inputs, a stage or two each, for whoever ports a stage.

The inputs are chosen on either side of every boundary of the arithmetic document, or drawn from the raw PCG64 stream.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from math import isqrt
from typing import Any

import numpy as np

from pyharness.exact import constants as mrd
from pyharness.exact.calibration import calibrate_sensor
from pyharness.exact.law import cross_product, rate_law
from pyharness.exact.num import norm_shift
from pyharness.mission import load_mission
from pyharness.scaling import Config, Scaling, scale

WRAP = 2**32
START_US = 5_000_000
QUIET_FIELD = (1500, -1200, 1800)
"""Raw counts of a plausible field."""


@dataclass(frozen=True)
class Unit:
    """One file of unit vectors: `fill` sets the inputs (rows,), which start as quiet cycles, for a configuration."""

    name: str
    purpose: str
    rows: int
    fill: Callable[[np.ndarray, Config, int], None]
    seed: int = 0
    overrides: dict[str, Any] = field(default_factory=dict)

    @property
    def laid_over(self) -> dict[str, Any]:
        """What is laid over the mission: no defences that look at more than one sample, unless the overrides name some."""
        return {"defence": _BARE, **self.overrides}

    def scaling(self, mission_path: str) -> Scaling:
        """The integers these vectors are for. Raises MissionError."""
        return scale(load_mission(mission_path, self.laid_over))

    def inputs(self, config: Config, dtype: np.dtype) -> np.ndarray:
        """The inputs, (rows,) records."""
        inputs = quiet_cycles(self.rows, config["path"], dtype)
        self.fill(inputs, config, self.seed)
        return inputs


def quiet_cycles(rows: int, path: Config, dtype: np.dtype) -> np.ndarray:
    """Cycles on time, with a steady field, no rate, all coils long off and hold-off over."""
    inputs = np.zeros(rows, dtype)
    start = START_US + np.arange(rows, dtype=np.int64) * path["period_us"]
    cycle = inputs["path"]
    cycle["cycle_start_us"] = start % WRAP
    cycle["sample_us"] = (start + path["phase_us"]) % WRAP
    cycle["switch_off_us"] = ((start - path["half_sample_us"] - 1) % WRAP)[:, None]
    cycle["mag_raw"] = QUIET_FIELD
    cycle["mag_valid"] = cycle["gyro_valid"] = 1
    inputs["separation_s"] = 4000
    _refresh_stamps(inputs, path)
    return inputs


def _refresh_stamps(inputs: np.ndarray, path: Config) -> None:
    """Every coil just old enough at each sample: stamped anew in each cycle, as after a pulse."""
    blanking = np.array(path["blanking_us"], dtype=np.int64)
    start = inputs["path"]["sample_us"].astype(np.int64)[:, None] - path["half_sample_us"]
    inputs["path"]["switch_off_us"] = (start - blanking) % WRAP


def _corners(limit: int) -> list[int]:
    return [0, 1, -1, 2, -2, limit - 1, 1 - limit, limit, -limit, 32766, 32767, -32767, -32768]


def _calibration(inputs: np.ndarray, config: Config, seed: int) -> None:
    path = config["path"]
    row = 0
    for sensor, name in (("mag", "mag_raw"), ("gyro", "gyro_raw")):
        for axis in range(3):
            for value in _corners(path[sensor]["limit"]):
                inputs["path"][name][row, axis] = value
                row += 1
        for value in _corners(path[sensor]["limit"]):
            inputs["path"][name][row] = value
            row += 1
    inputs["path"]["gyro_valid"][row] = 0
    inputs["path"]["mag_valid"][row + 1] = 0


def _plausibility(inputs: np.ndarray, config: Config, seed: int) -> None:
    path = config["path"]
    per_count = path["mag"]["matrix"][0] / 2 ** path["mag"]["shift"]
    bounds = [round(path[key] ** 0.5 / per_count) for key in ("norm_min_sq", "norm_max_sq")]
    values = [bound + step for bound in bounds for step in range(-20, 20)]
    inputs["path"]["mag_raw"][:, 0] = values[: len(inputs)]
    inputs["path"]["mag_raw"][:, 1:] = 0


def _blanking(inputs: np.ndarray, config: Config, seed: int) -> None:
    path = config["path"]
    start = inputs["path"]["sample_us"].astype(np.int64) - path["half_sample_us"]
    row = 0
    for coil in range(3):
        blanking = path["blanking_us"][coil]
        for age in (blanking - 1, blanking, blanking + 1, 0, -1, 2**31 - 1, 2**31, 2**31 + 1, WRAP - 1, blanking):
            inputs["path"]["switch_off_us"][row, coil] = (start[row] - age) % WRAP
            row += 1
    # Stamps that do not change: once clear they stay clear; after a pulse they do not count.
    inputs["path"]["switch_off_us"][row : row + 12] = inputs["path"]["switch_off_us"][row]
    _turn_field(inputs, row + 4, row + 8)
    row += 12
    # Off its place in the cycle by the tolerance, and by one more.
    for late in (path["tolerance_us"], path["tolerance_us"] + 1, -path["tolerance_us"], -path["tolerance_us"] - 1):
        inputs["path"]["sample_us"][row] = (int(inputs["path"]["sample_us"][row]) + late) % WRAP
        row += 2


def _turn_field(inputs: np.ndarray, first: int, end: int) -> None:
    """A field that moves from cycle to cycle, so that the law asks for pulses."""
    for row in range(first, end):
        inputs["path"]["mag_raw"][row] = (QUIET_FIELD[0] + 90 * (row - first + 1), QUIET_FIELD[1], QUIET_FIELD[2] - 70)


def _derivative(inputs: np.ndarray, config: Config, seed: int) -> None:
    path = config["path"]
    period = path["period_us"]
    intervals = [period, (period + 1) // 2 - 1, (period + 1) // 2, (period + 1) // 2 + 1, period - 1, period, period + 1,
                 period + period // 2 - 1, period + period // 2, period + period // 2 + 1, 2 * period, 0, 1, WRAP - 1, period]
    fields = [(1500, -1200, 1800), (1501, -1203, 1790), (-1500, 1200, -1800), (3000, 2000, -3000), (-3000, -2000, 3000)]
    sample = START_US + path["phase_us"]
    for row in range(len(inputs)):
        sample += intervals[row % len(intervals)]
        inputs["path"]["sample_us"][row] = sample % WRAP
        inputs["path"]["cycle_start_us"][row] = (sample - path["phase_us"]) % WRAP
        inputs["path"]["mag_raw"][row] = fields[row // 3 % len(fields)]
    _refresh_stamps(inputs, path)


def _low_pass(inputs: np.ndarray, config: Config, seed: int) -> None:
    raw = inputs["path"]["mag_raw"].astype(np.int64)
    row = np.arange(len(inputs))
    ramp = np.where(row < 40, 12 * row, np.where(row < 90, 480, np.where(row < 130, 480 - 7 * (row - 90), 200)))
    raw[:, 0] += ramp
    raw[:, 1] -= ramp // 3
    raw[150:, 2] += np.where(row[150:] % 2 == 0, 1, 0)
    inputs["path"]["mag_raw"] = raw
    inputs["path"]["mag_valid"][135] = 0


_FASTEST = 5600
"""Raw rate near the full scale of the rate on board."""


def _sweep(largest: int) -> list[int]:
    """Raw rates from 1 to the largest, each a little more than the last, with both signs."""
    values, value = [], 1
    while value < largest:
        values += [value, -value]
        value = value + 1 + value // 6
    return values


def _saturation(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Demand on x, y, z alone and on all together, from nothing to far beyond the limit."""
    sweep = _sweep(_FASTEST)
    row = 0
    for field_axis, rate_axis in ((2, 1), (0, 2), (1, 0)):  # ω × B on x, y, z
        for value in sweep:
            inputs["path"]["mag_raw"][row] = 0
            inputs["path"]["mag_raw"][row, field_axis] = 2600
            inputs["path"]["gyro_raw"][row, rate_axis] = value
            row += 1
    for value in sweep:
        inputs["path"]["mag_raw"][row] = (1700, -1500, 1300)
        inputs["path"]["gyro_raw"][row] = (value, value // 2, -value // 3)
        row += 1


def _ties(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Demands whose scaled value lies exactly between two counts, where rounding half up, down or to even differ.

    With the largest demand at 65534 of its leading 16 bits the factor is 32768, and every odd axis is such a tie. Where a
    mission's gain has fewer of them the rest of the cycles stay quiet.
    """
    path, row = config["path"], 0
    for field_z in range(3000, 4400):
        per_raw = max(_demand(path, (40, 30, field_z), (3, 4000, 5))) / 4000
        near = round(65534 / per_raw)
        for rate_y in range(near - 1, near + 2):
            mag, gyro = (40, 30, field_z), (row + 3, rate_y, row + 5)
            demand = _demand(path, mag, gyro)
            leading, down = norm_shift(max(demand), 16)
            if leading == 65534 and any((d >> down) % 2 for d in demand):
                inputs["path"]["mag_raw"][row], inputs["path"]["gyro_raw"][row] = mag, gyro
                row += 1
                break
        if row == len(inputs):
            return


def _demand(path: Config, mag: tuple[int, ...], gyro: tuple[int, ...]) -> list[int]:
    """Magnitudes of the rate law's demand for raw counts in range."""
    cross = cross_product(calibrate_sensor(path["gyro"], gyro)[0], calibrate_sensor(path["mag"], mag)[0])
    gain = path["rate_gain"]
    return [abs(d) for d in rate_law(cross, (gain["mantissa"], gain["shift"]))]


def _saturation_rows() -> int:
    return 4 * len(_sweep(_FASTEST))


def _pulses(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Commands around the shortest pulse, count by count of the gyro."""
    for row in range(len(inputs)):
        axis = row // 60 % 3
        inputs["path"]["mag_raw"][row] = 0
        inputs["path"]["mag_raw"][row, (axis + 2) % 3] = 2600
        inputs["path"]["gyro_raw"][row, (axis + 1) % 3] = (row % 60) - 30


def _estimate(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Turns of the field from nothing to more than half a turn a period, where the chord is twice the norm."""
    raw = inputs["path"]["mag_raw"]
    for row in range(len(inputs)):
        sign = -1 if row % 2 else 1
        if row < 40:  # half a turn, give or take some counts
            raw[row] = (sign * (1500 + row // 4), -sign * 1200, sign * (1800 - row % 3))
        elif row < 60:  # from strong to weak and back: the chord is many times the norm
            raw[row] = (4200, 0, 0) if row % 2 else (-1300 - row, 0, 0)
        else:  # slow turns, count by count
            raw[row] = (1500 + (row - 60) // 2 * (row % 2), -1200, 1800)


def _settling(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Rates on either side of both thresholds, for as long as the dwells, one cycle less and one more."""
    settled, wake = config["supervisor"]["settled_rate"], config["supervisor"]["wake_rate"]
    settle_dwell, wake_dwell = config["supervisor"]["settle_dwell"], config["supervisor"]["wake_dwell"]
    plan = [(settled, settle_dwell - 1), (settled + 1, 1), (settled, settle_dwell + 1), (wake, wake_dwell + 1), (wake + 1, wake_dwell - 1),
            (wake, 1), (wake + 1, wake_dwell), (settled + 1, settle_dwell + 1), (settled, settle_dwell)]  # fmt: skip
    row = 0
    for rate, cycles in plan:
        inputs["path"]["gyro_raw"][row : row + cycles] = _gyro_raw(config["path"]["gyro"], rate)
        row += cycles


def _gyro_raw(sensor: Config, rate: int) -> tuple[int, int, int]:
    """Raw counts whose norm on board is exactly this rate, near the x axis."""
    near = round((rate + sensor["offset"][0]) * 2 ** sensor["shift"] / sensor["matrix"][0])
    for x in range(near, near - 40, -1):
        for y in range(-40, 200):
            if isqrt(sum(w * w for w in calibrate_sensor(sensor, (x, y, 0))[0])) == rate:
                return x, y, 0
    return near, 0, 0


_COMMANDS = (mrd.MRD_COMMAND_NONE, mrd.MRD_COMMAND_ARM, mrd.MRD_COMMAND_INHIBIT, mrd.MRD_COMMAND_SAFE, mrd.MRD_COMMAND_RESUME,
             mrd.MRD_COMMAND_BENCH)  # fmt: skip


def _modes(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Every command in every mode, with and without low power; the field moves, so that pulses are asked for."""
    key, limit = config["supervisor"]["bench_key"], config["supervisor"]["bench_limit_ticks"]
    rows = iter(range(len(inputs)))

    def give(code: int, **values: int) -> None:
        row = next(rows)
        inputs["command"][row] = code
        for name, value in values.items():
            inputs[name][row] = value

    reach = {
        "hold-off": [(mrd.MRD_COMMAND_SAFE, {}), (mrd.MRD_COMMAND_RESUME, {"separation_s": 0})],
        "damping": [(mrd.MRD_COMMAND_SAFE, {}), (mrd.MRD_COMMAND_RESUME, {}), (mrd.MRD_COMMAND_NONE, {}), (mrd.MRD_COMMAND_NONE, {})],
        "safe": [(mrd.MRD_COMMAND_SAFE, {})],
        "inhibit": [(mrd.MRD_COMMAND_SAFE, {}), (mrd.MRD_COMMAND_RESUME, {}), (mrd.MRD_COMMAND_INHIBIT, {})],
        "bench": [(mrd.MRD_COMMAND_SAFE, {}), (mrd.MRD_COMMAND_ARM, {"command_key": key})],
    }
    for steps in reach.values():
        for code in (*_COMMANDS, 1, 65535):
            for low_power in (0, 1):
                for step, values in steps:
                    give(step, **values)
                give(code, low_power=low_power, command_key=key, command_coil=1, command_ticks=-limit)
    for coil, ticks in ((0, 1), (1, -1), (2, limit), (0, limit + 1), (0, -limit - 1), (3, 5), (65535, 5), (1, 0), (2, -32768)):
        give(mrd.MRD_COMMAND_SAFE)
        give(mrd.MRD_COMMAND_ARM, command_key=key)
        give(mrd.MRD_COMMAND_BENCH, command_coil=coil, command_ticks=ticks)
    give(mrd.MRD_COMMAND_SAFE)
    give(mrd.MRD_COMMAND_ARM, command_key=key ^ 1)
    first_spare = next(rows)
    inputs["command"][first_spare:] = 0
    inputs["separation_s"][first_spare:] = np.arange(len(inputs) - first_spare)
    row = np.arange(len(inputs))
    inputs["path"]["mag_raw"][:, 0] = QUIET_FIELD[0] + 60 * (row % 7)
    inputs["path"]["mag_raw"][:, 1] = QUIET_FIELD[1] - 40 * (row % 5)


def _random(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Mostly plausible cycles with wild values among them; stamps, validity and commands are drawn too."""
    path = config["path"]
    draw = _draws(seed)
    pick = lambda items: items[next(draw) % len(items)]  # noqa: E731
    for row in range(len(inputs)):
        cycle = inputs["path"]
        for name, sensor, size in (("mag_raw", "mag", 2600), ("gyro_raw", "gyro", 5500)):
            for axis in range(3):
                wild = next(draw) % 97 == 0
                cycle[name][row, axis] = pick(_corners(path[sensor]["limit"])) if wild else next(draw) % (2 * size) - size
        if next(draw) % 3 == 0 and row:  # slow change, so that demands below saturation occur
            near = cycle["mag_raw"][row - 1].astype(np.int64) + [next(draw) % 9 - 4 for _ in range(3)]
            cycle["mag_raw"][row] = np.clip(near, -32768, 32767)
        cycle["mag_valid"][row] = next(draw) % 29 != 0
        cycle["gyro_valid"][row] = next(draw) % 11 != 0
        if next(draw) % 17 == 0:
            cycle["sample_us"][row] = (int(cycle["sample_us"][row]) + next(draw) % 6001 - 3000) % WRAP
        if next(draw) % 13 == 0:
            coil = next(draw) % 3
            cycle["switch_off_us"][row, coil] = (int(cycle["switch_off_us"][row, coil]) + next(draw) % 20001 - 10000) % WRAP
        if next(draw) % 61 == 0:
            inputs["low_power"][row] = 1
        if next(draw) % 53 == 0:
            inputs["command"][row] = pick((*_COMMANDS, 7))
            inputs["command_key"][row] = pick((config["supervisor"]["bench_key"], 0, 1))
            inputs["command_coil"][row] = next(draw) % 4
            inputs["command_ticks"][row] = next(draw) % 2400 - 1200
        elif next(draw) % 19 == 0:
            inputs["command"][row] = mrd.MRD_COMMAND_RESUME


def _draws(seed: int) -> Iterable[int]:
    generator = np.random.PCG64(seed)
    while True:
        yield from (int(word) >> 11 for word in generator.random_raw(4096))


def _continuity(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Counts that stand still for as long as the limits, jumps on either side of theirs, a norm that trembles, a gyro that stands still."""
    path = config["path"]
    raw = inputs["path"]["mag_raw"].astype(np.int64)
    row = np.arange(len(inputs))
    raw += np.stack([row % 2, row % 3, row % 5], axis=1)  # moving, but hardly
    frozen, dead = path["frozen_limit"], path["dead_limit"]
    first = 10
    raw[first : first + frozen + 3] = raw[first]  # all axes, until it shows and a little longer
    first += frozen + 8
    raw[first : first + frozen] = raw[first]  # one sample short of it
    first += frozen + 5
    raw[first : first + dead + 3, 1] = raw[first, 1]  # one axis
    first += dead + 8
    jump = isqrt(path["jump_max_sq"]) * 2 ** path["mag"]["shift"] // path["mag"]["matrix"][0]
    for step in range(-3, 4):  # single samples around the limit
        raw[first, 0] += jump + step
        first += 4
    tremble = path["noise_limit"] * 2 ** path["mag"]["shift"] // path["mag"]["matrix"][0]
    for step, rows in ((-4, 20), (60, 15), (0, 70), (60, 20), (0, 70)):  # below, one vote short of tripping, clearing, tripping, clearing
        on = slice(first, first + rows)
        if step:
            raw[on] += np.where(row[on, None] % 2 == 0, (tremble + step) * np.array(QUIET_FIELD) // isqrt(sum(q * q for q in QUIET_FIELD)), 0)
        first += rows
    inputs["path"]["mag_raw"] = raw
    still = path["gyro_frozen_limit"]
    inputs["path"]["gyro_raw"][:, 0] = row % 7
    inputs["path"]["gyro_raw"][20 : 20 + still + 3] = 5
    inputs["path"]["gyro_raw"][30 + 2 * still : 30 + 3 * still] = 9
    inputs["path"]["mag_valid"][first - 30] = 0


def _agreement(inputs: np.ndarray, config: Config, seed: int) -> None:
    """A field that stands still and a gyro that does not: around the limit, tripping, clearing, beyond the rates that are compared."""
    path = config["path"]
    gyro = inputs["path"]["gyro_raw"]
    row = np.arange(len(inputs))
    inputs["path"]["mag_raw"][:] = (40, -30, 2600)
    near = _rate_at_limit(path)
    plan = [(near - 2, 10), (near + 2, 10), (0, 60), (3 * near, 14), (0, 20), (-3 * near, 20), (0, 80), (5600, 20), (-near, 30), (0, 60)]
    first = 4
    for rate, rows in plan:
        gyro[first : first + rows, 1] = rate
        first += rows
    inputs["path"]["gyro_valid"][np.isin(row, (30, 31, 95))] = 0
    inputs["path"]["mag_valid"][120] = 0


def _rate_at_limit(path: Config) -> int:
    """Raw rate on y that contradicts a field of 2600 raw counts on z by just what is allowed."""
    field = calibrate_sensor(path["mag"], (40, -30, 2600))[0][2]
    per_raw = path["gyro"]["matrix"][4] / 2 ** path["gyro"]["shift"]
    return round(path["agree_limit"] * 2.0 ** (16 + path["agree_shift"]) / path["agree_mantissa"] / field / per_raw)


def _currents(inputs: np.ndarray, config: Config, seed: int) -> None:
    """Currents around every threshold: weak, backward and on, each on another coil, with pulses of both signs; given back by RESUME."""
    path = config["path"]
    row = np.arange(len(inputs))
    driven, sampled = inputs["path"]["current_driven"], inputs["path"]["current_sampled"]
    inputs["path"]["current_valid"] = 1
    inputs["path"]["mag_raw"][:] = (2000, -1500, 1000)
    inputs["path"]["gyro_raw"][:] = np.where(row[:, None] % 40 < 20, 1, -1) * np.array((2000, -1000, 500))
    # ω × B of these counts has the signs (-, -, -), then (+, +, +): the coils' currents follow with the polarity.
    sign = -np.where(np.maximum(row - 1, 0)[:, None] % 40 < 20, 1, -1) * np.array(path["polarity"])
    least, off = np.array(path["current_min"]), path["current_off_max"]
    driven[:] = sign * (least + 300)
    driven[30:70, 0] = (sign * (least - 1))[30:70, 0]  # weak until it trips
    driven[70:140, 0] = (sign * least)[70:140, 0]
    driven[80:120, 1] = (sign * -(off + 1))[80:120, 1]  # backward until it trips: out of use
    driven[150:160, 2] = (sign * -off)[150:160, 2]  # off, not backward: weak
    sampled[170, 0], sampled[171, 0] = off, off + 1
    sampled[172, 1], sampled[173, 1] = -off, -off - 1
    sampled[175:180, 2] = 32767
    sampled[180, 2] = driven[181, 2] = -32768
    inputs["path"]["current_valid"][160:163] = 0
    inputs["command"][200], inputs["command"][202] = mrd.MRD_COMMAND_SAFE, mrd.MRD_COMMAND_RESUME
    inputs["path"]["mag_valid"][176] = 0


def _progress(inputs: np.ndarray, config: Config, seed: int) -> None:
    """A field that turns ever faster, then evenly: windows of eight cycles, pauses of four, one retry, then safe."""
    row = np.arange(len(inputs))
    turn = np.zeros(len(inputs), dtype=np.int64)
    for first, end, step in ((0, 8, 560), (8, 40, 600), (40, 60, 700), (60, 80, 800), (80, 96, 900), (100, 180, 400)):
        turn[first:end] = step + 8 * (row[first:end] - first)
    turn[180:] = 300  # the same from window to window: no progress
    inputs["path"]["mag_raw"][:, 0] = QUIET_FIELD[0] + np.where(row % 2 == 0, turn, -turn)
    inputs["command"][[97, 182]] = mrd.MRD_COMMAND_RESUME
    inputs["low_power"][140:143] = 1


_RATE = {"control": {"law": "rate"}}
_SLOW_RATE = {"control": {"law": "rate", "K_n_m_s": 4.0e-6}}
_BARE = {"jump_ut": 1000.0, "noise_ut": 1000.0, "frozen_s": 0.0, "dead_axis_s": 0.0, "gyro_frozen_s": 0.0, "gyro_error_deg_s": 0.0}
"""No defence that looks at more than one sample: for vectors of single stages, whose counts stand still and jump."""
_SENSE = {"counts_at_full": 2000, "noise_counts": 2.0}

UNIT = (
    Unit("calibration", "stage 1: every sensor axis at and around its limits", 108, _calibration),
    Unit("plausibility", "stage 2: the norm of the field on either side of its bounds", 80, _plausibility),
    Unit("gate", "stage 4: ages on either side of the blanking time and of 2^31 µs, stamps that do not change, place in the cycle", 54,
         _blanking),
    Unit("derivative", "stage 6: intervals on either side of half a period and one and a half, large changes", 60, _derivative),
    Unit("low-pass", "stage 7: steps, ramps, single counts and a restart of the filter", 200, _low_pass,
         overrides={"control": {"low_pass_s": 3.0}}),
    Unit("saturation-per-axis", "stages 9 and 10: demand on each axis and all together, axis by axis", _saturation_rows(), _saturation,
         overrides={"control": {"law": "rate", "saturation": "per-axis", "K_n_m_s": 2.0e-4}}),
    Unit("saturation-keep-direction", "stages 9 and 10: the same demands, keeping the direction", _saturation_rows(), _saturation,
         overrides={"control": {"law": "rate", "K_n_m_s": 2.0e-4}}),
    Unit("saturation-ties", "stage 10: scaled demands exactly between two counts", 12, _ties,
         overrides={"control": {"law": "rate", "K_n_m_s": 4.0e-5}}),
    Unit("pulses", "stage 11: commands around the shortest pulse", 180, _pulses, overrides=_SLOW_RATE),
    Unit("estimate", "stage 12: the rate from the field's turn, from nothing to its saturation", 120, _estimate,
         overrides={"gyro": None, "control": {"settle_by": "field"}}),
    Unit("settling", "modes: rates on either side of the settled and the wake threshold, for the dwells", 60, _settling,
         overrides={"control": {"dwell_s": 2.5, "wake_dwell_s": 1.5}}),
    Unit("continuity", "stage 5: counts that stand still, jumps, a norm that trembles, around every limit", 560, _continuity,
         overrides={"control": {"hold_off_s": 100_000}, "defence": {}}),
    Unit("agreement", "stage 8: gyro against field, around the limit, until it trips and until it clears", 360, _agreement,
         overrides={"defence": {"frozen_s": 0.0, "dead_axis_s": 0.0, "gyro_frozen_s": 0.0, "jump_ut": 1000.0}}),
    Unit("currents", "stage 3: coil currents around every threshold", 240, _currents,
         overrides={"control": {"law": "rate"}, "current_sense": _SENSE}),
    Unit("progress", "modes: peaks from window to window, divergence, pause, retries, no progress", 260, _progress,
         overrides={"gyro": None, "control": {"settle_by": "field"}, "body": {"tip_off_deg_s": [10.0, 0.0, 0.0]},
                    "defence": {**_BARE, "window_s": 4.0, "pause_s": 2.0, "retries": 1, "growth_percent": 5.0}}),
    Unit("modes", "modes: every command in every mode, with and without low power; hold-off runs out at the end", 360, _modes),
    Unit("random-derivative", "whole steps of the derivative law, drawn", 500, _random, seed=101),
    Unit("random-rate", "whole steps of the rate-damping law, drawn", 500, _random, seed=102, overrides=_RATE),
    Unit("random-derivative-normalised", "whole steps, gain normalised by the field, low-pass, axis by axis, drawn", 500, _random, seed=103,
         overrides={"control": {"gain_scaling": "normalised", "saturation": "per-axis", "low_pass_s": 1.5}}),
    Unit("random-rate-normalised", "whole steps of the rate-damping law, gain normalised by the field, drawn", 500, _random, seed=104,
         overrides={"control": {"law": "rate", "gain_scaling": "normalised"}}),
)  # fmt: skip
