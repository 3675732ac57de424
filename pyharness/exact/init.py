"""The configuration check: the first of the MRD_E_* checks that fails, in the order of their codes."""

from __future__ import annotations

from collections.abc import Callable

from pyharness.exact.constants import (
    MRD_E_AGREEMENT,
    MRD_E_BENCH,
    MRD_E_CHOICE,
    MRD_E_CONTINUITY,
    MRD_E_CURRENT,
    MRD_E_DIGEST,
    MRD_E_ESTIMATE,
    MRD_E_FILTER,
    MRD_E_GAIN,
    MRD_E_GYRO,
    MRD_E_MAG,
    MRD_E_NORM,
    MRD_E_PERIOD,
    MRD_E_POLARITY,
    MRD_E_PROGRESS,
    MRD_E_SAMPLE,
    MRD_E_SETTLE,
    MRD_E_TIMELINE,
    MRD_E_WINDOW,
    MRD_GAIN_CONSTANT,
    MRD_LAW_RATE,
    MRD_OK,
    MRD_SETTLE_BY_GYRO,
)
from pyharness.exact.integrity import config_digest
from pyharness.exact.num import Record, bits
from pyharness.exact.ranges import inside

ROW_SUM_MAX = 65535


def _within(record: Record, prefix: str, *names: str) -> bool:
    return all(inside(f"{prefix}.{name}", record[name]) for name in names)


def _sensor(sensor: Record, prefix: str) -> bool:
    m = sensor["matrix"]
    rows = (m[0:3], m[3:6], m[6:9])
    return (_within(sensor, prefix, "matrix", "offset", "shift", "limit")
            and all(sum(map(abs, row)) <= ROW_SUM_MAX for row in rows))


def _mag(path: Record) -> bool:
    return _sensor(path["mag"], "config.path.mag")


def _gyro(path: Record) -> bool:
    return _within(path, "config.path", "gyro_fitted") and (
        not path["gyro_fitted"] or _sensor(path["gyro"], "config.path.gyro"))


def _norm(path: Record) -> bool:
    return (_within(path, "config.path", "norm_min_sq", "norm_max_sq")
            and path["norm_min_sq"] <= path["norm_max_sq"])


def _period(path: Record) -> bool:
    return _within(path, "config.path", "period_us")


def _sample(path: Record) -> bool:
    return (path["half_sample_us"] <= path["phase_us"] < path["period_us"]
            and path["tolerance_us"] < path["period_us"] // 4)


def _window(path: Record) -> bool:
    return (_within(path, "config.path", "tick_us", "window_ticks", "shortest_ticks")
            and path["shortest_ticks"] <= path["window_ticks"])


def _timeline(path: Record) -> bool:
    period, phase, half = path["period_us"], path["phase_us"], path["half_sample_us"]
    end = phase + path["delay_us"] + path["window_ticks"] * path["tick_us"]
    return (half <= path["delay_us"] <= period and end <= period
            and all(blanking <= period + phase - half - end for blanking in path["blanking_us"]))


def _filter(path: Record) -> bool:
    return _within(path, "config.path", "filter_gain")


def _choice(path: Record) -> bool:
    return (_within(path, "config.path", "law", "gain_scaling", "saturation")
            and (path["law"] != MRD_LAW_RATE or path["gyro_fitted"] == 1))


def _polarity(path: Record) -> bool:
    return all(polarity in (1, -1) for polarity in path["polarity"])


def _gain(path: Record) -> bool:
    lowest = highest = 0  # what is added to a shift, at least and at most
    if path["gain_scaling"] != MRD_GAIN_CONSTANT:
        lowest = bits(path["norm_min_sq"]) - 16 + 15
        highest = bits(path["norm_max_sq"]) - 16 + 16
    return all(
        _within(path[law], f"config.path.{law}", "mantissa")
        and all(shift + lowest >= 1 and shift + highest <= 31 for shift in path[law]["shift"])
        for law in ("derivative_gain", "rate_gain")
    )


def _continuity(path: Record) -> bool:
    return _within(path, "config.path", "jump_max_sq", "noise_limit")


def _agreement(path: Record) -> bool:
    return _within(path, "config.path", "agree_mantissa", "agree_shift", "agree_rate_max")


def _current(path: Record) -> bool:
    return _within(path, "config.path", "current_fitted") and (
        not path["current_fitted"]
        or (1 <= path["current_ticks"] <= path["window_ticks"]
            and 1 <= path["current_off_max"] < min(path["current_min"])))


def _settle(config: Record) -> bool:
    supervisor = config["supervisor"]
    return (_within(supervisor, "config.supervisor", "settle_by", "settle_dwell", "wake_dwell", "wake_rate")
            and (supervisor["settle_by"] != MRD_SETTLE_BY_GYRO or config["path"]["gyro_fitted"] == 1)
            and supervisor["settled_rate"] <= supervisor["wake_rate"])


def _estimate(config: Record) -> bool:
    return _within(config["supervisor"], "config.supervisor", "estimate_mantissa", "estimate_shift")


def _progress(config: Record) -> bool:
    return _within(
        config["supervisor"], "config.supervisor", "growth", "progress", "window_cycles", "pause_cycles")


def _bench(config: Record) -> bool:
    return (_within(config["supervisor"], "config.supervisor", "bench_key")
            and 1 <= config["supervisor"]["bench_limit_ticks"] <= config["path"]["window_ticks"])


def _digest(config: Record) -> bool:
    return config["digest"] == config_digest(config)


Checks = tuple[tuple[int, Callable[[Record], bool]], ...]

PATH_CHECKS: Checks = (
    (MRD_E_MAG, _mag),
    (MRD_E_GYRO, _gyro),
    (MRD_E_NORM, _norm),
    (MRD_E_PERIOD, _period),
    (MRD_E_SAMPLE, _sample),
    (MRD_E_WINDOW, _window),
    (MRD_E_TIMELINE, _timeline),
    (MRD_E_FILTER, _filter),
    (MRD_E_CHOICE, _choice),
    (MRD_E_POLARITY, _polarity),
    (MRD_E_GAIN, _gain),
    (MRD_E_CONTINUITY, _continuity),
    (MRD_E_AGREEMENT, _agreement),
    (MRD_E_CURRENT, _current),
)
SUPERVISOR_CHECKS: Checks = (
    (MRD_E_SETTLE, _settle),
    (MRD_E_ESTIMATE, _estimate),
    (MRD_E_PROGRESS, _progress),
    (MRD_E_BENCH, _bench),
    (MRD_E_DIGEST, _digest),
)


def _first_failure(record: Record, checks: Checks) -> int:
    return next((code for code, passes in checks if not passes(record)), MRD_OK)


def path_check(path: Record) -> int:
    """MRD_OK, or the first MRD_E_* that applies to the configuration of a path."""
    return _first_failure(path, PATH_CHECKS)


def init(config: Record) -> int:
    """MRD_OK, or the first MRD_E_* that applies to a configuration."""
    return path_check(config["path"]) or _first_failure(config, SUPERVISOR_CHECKS)
