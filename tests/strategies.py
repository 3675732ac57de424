"""Hypothesis strategies for the controller: any legal configuration, and inputs that reach its deep stages.

The generators draw integers from a source: from hypothesis (which shrinks what fails) or from a seeded
`random.Random` (for many thousand rows). Ranges are followed constructively, nothing is filtered away.
Sequences follow a plausible timeline and a plausible field, disturbed now and then by corner values, so
that most cycles have a derivative and a law.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import isqrt
from random import Random
from typing import Any, Protocol, TypeVar

from hypothesis import strategies as st

from pyharness.exact import config_digest
from pyharness.exact.calibration import calibrate_sensor
from pyharness.exact.constants import (
    MRD_COMMAND_ARM,
    MRD_COMMAND_BENCH,
    MRD_COMMAND_NONE,
    MRD_COMMAND_RESUME,
    MRD_COMMAND_SAFE,
    MRD_GAIN_CONSTANT,
)

Record = dict[str, Any]
Item = TypeVar("Item")

WRAP = 2**32
HALF = 2**31  # of the wrap: a difference from here on lies in the future
NORM_MAX = 3 * 32767**2
ROW_SUM_MAX = 65535


class Source(Protocol):
    """Where the integers come from."""

    def integer(self, lo: int, hi: int) -> int:
        """An integer in lo:hi."""


class Seeded:
    """Integers from a seeded generator."""

    def __init__(self, seed: int) -> None:
        self._random = Random(seed)

    def integer(self, lo: int, hi: int) -> int:
        return self._random.randint(lo, hi)


class Drawn:
    """Integers from hypothesis."""

    def __init__(self, draw: st.DrawFn) -> None:
        self._draw = draw

    def integer(self, lo: int, hi: int) -> int:
        return self._draw(st.integers(lo, hi))


def pick(source: Source, items: Sequence[Item]) -> Item:
    """One of the items, each as likely; the first is the simplest."""
    return items[source.integer(0, len(items) - 1)]


def once_in(source: Source, n: int) -> bool:
    """True once in n times."""
    return source.integer(0, n - 1) == n - 1


def span(source: Source, lo: int, hi: int) -> int:
    """lo:hi, each end once in ten times."""
    beyond = (hi - lo) // 8
    return max(lo, min(hi, source.integer(lo - beyond, hi + beyond)))


def spread(source: Source, lo: int, hi: int) -> int:
    """lo:hi with every length in binary as likely as any other, lo ≥ 0."""
    length = source.integer(lo.bit_length(), hi.bit_length())
    return span(source, max(lo, 1 << length >> 1), min(hi, (1 << length) - 1))


def vector(source: Source, lo: int, hi: int) -> tuple[int, int, int]:
    return span(source, lo, hi), span(source, lo, hi), span(source, lo, hi)


# ---- configurations ----

def _row(source: Source) -> list[int]:
    """Three entries with an absolute sum up to 65535, in any order."""
    left, row = ROW_SUM_MAX, []
    for _ in range(3):
        most = min(left, 32767)
        row.append(span(source, -most, most))
        left -= abs(row[-1])
    turn = source.integer(0, 2)
    return row[turn:] + row[:turn]


def _aligned_row(source: Source, axis: int, shift: int) -> list[int]:
    """A row of a sensor that is nearly aligned with the body: ¼ to 4 counts out per raw count."""
    scale = min(32767, spread(source, 1 << shift >> 2, 4 << shift))
    most = min(scale // 16, (ROW_SUM_MAX - scale) // 2)
    row = [source.integer(-most, most) for _ in range(3)]
    row[axis] = pick(source, (scale, -scale))
    return row


def _sensor(source: Source) -> Record:
    shift = source.integer(1, 16)
    if source.integer(0, 2) < 2:
        rows = [_aligned_row(source, axis, shift) for axis in range(3)]
        offset = vector(source, -200, 200)
        limit = spread(source, 1000, 32767)
    else:
        rows = [_row(source) for _ in range(3)]
        offset = vector(source, -32767, 32767)
        limit = span(source, 1, 32767)
    return {"matrix": tuple(sum(rows, [])), "offset": offset, "shift": shift, "limit": limit}


def _raw_in_range(source: Source, sensor: Record) -> tuple[int, int, int]:
    """Raw counts below the limit, of any size."""
    greatest = spread(source, 0, sensor["limit"] - 1)
    return vector(source, -greatest, greatest)


def _norms(source: Source, mag: Record) -> tuple[int, int]:
    """A plausible range, mostly one that this magnetometer can meet."""
    middle = 0
    if not once_in(source, 4):
        for _ in range(8):
            field, out_of_range = calibrate_sensor(mag, _raw_in_range(source, mag))
            if not out_of_range and sum(x * x for x in field) >= 32768:
                middle = sum(x * x for x in field)
                break
    middle = middle or spread(source, 32768, NORM_MAX)
    return spread(source, 32768, middle), spread(source, middle, NORM_MAX)


def _gain(source: Source, lo: int, hi: int) -> Record:
    return {"mantissa": vector(source, 32768, 65535), "shift": vector(source, lo, hi)}


def _timeline(source: Source) -> Record:
    period = spread(source, 2**14, 10_000_000)
    window_ticks = spread(source, 1, 2**14)
    tick_us = span(source, 1, min(65535, period // window_ticks))
    left = period - window_ticks * tick_us
    phase = span(source, 0, left)
    delay = span(source, 0, left - phase)
    half = span(source, 0, min(phase, delay))
    most = left - half - delay
    return {
        "period_us": period,
        "phase_us": phase,
        "tolerance_us": span(source, 0, period // 4 - 1),
        "half_sample_us": half,
        "delay_us": delay,
        "blanking_us": vector(source, 0, most),
        "tick_us": tick_us,
        "window_ticks": window_ticks,
        "shortest_ticks": spread(source, 1, window_ticks),
    }


def any_path_config(source: Source) -> Record:
    """Any legal configuration of a path."""
    mag = _sensor(source)
    fitted = source.integer(0, 1)
    norm_min_sq, norm_max_sq = _norms(source, mag)
    gain_scaling = source.integer(1, 2)
    if gain_scaling == MRD_GAIN_CONSTANT:
        shifts = 1, 31
    else:
        shifts = 2 - norm_min_sq.bit_length(), 31 - norm_max_sq.bit_length()
    return {
        "mag": mag,
        "gyro": _sensor(source),
        "gyro_fitted": fitted,
        "law": source.integer(1, 1 + fitted),
        "gain_scaling": gain_scaling,
        "saturation": source.integer(1, 2),
        "norm_min_sq": norm_min_sq,
        "norm_max_sq": norm_max_sq,
        **_timeline(source),
        "polarity": tuple(pick(source, (1, -1)) for _ in range(3)),
        "filter_gain": pick(source, (2**15, span(source, 128, 2**15))),
        "derivative_gain": _gain(source, *shifts),
        "rate_gain": _gain(source, *shifts),
    }


def any_config(source: Source) -> Record:
    """Any legal configuration, its digest filled."""
    path = any_path_config(source)
    settled_rate = spread(source, 0, 65534)
    config = {
        "path": path,
        "supervisor": {
            "settle_dwell": pick(source, (source.integer(1, 4), span(source, 1, WRAP - 1))),
            "wake_dwell": pick(source, (source.integer(1, 4), span(source, 1, WRAP - 1))),
            "hold_off_s": spread(source, 0, WRAP - 1),
            "settle_by": source.integer(1, 1 + path["gyro_fitted"]),
            "settled_rate": settled_rate,
            "wake_rate": span(source, settled_rate, 65534),
            "estimate_mantissa": span(source, 32768, 65535),
            "estimate_shift": span(source, 1, 31),
            "bench_key": span(source, 1, 65535),
            "bench_limit_ticks": span(source, 1, path["window_ticks"]),
        },
    }
    return {**config, "digest": config_digest(config)}


# ---- inputs ----

def _plausible_raw(source: Source, config: Record) -> tuple[int, int, int]:
    """Raw counts of a plausible field, if a few tries find one."""
    mag, raw = config["mag"], (0, 0, 0)
    for _ in range(8):
        raw = _raw_in_range(source, mag)
        field, out_of_range = calibrate_sensor(mag, raw)
        norm_sq = sum(x * x for x in field)
        if out_of_range or norm_sq == 0:
            continue
        if not config["norm_min_sq"] <= norm_sq <= config["norm_max_sq"]:
            wanted = isqrt(source.integer(config["norm_min_sq"], config["norm_max_sq"]))
            raw = tuple(r * wanted // isqrt(norm_sq) for r in raw)
            raw = tuple(max(1 - mag["limit"], min(mag["limit"] - 1, r)) for r in raw)
            field, out_of_range = calibrate_sensor(mag, raw)
            norm_sq = sum(x * x for x in field)
        if not out_of_range and config["norm_min_sq"] <= norm_sq <= config["norm_max_sq"]:
            return raw
    return raw


def _gyro_raw(source: Source, config: Record) -> tuple[int, int, int]:
    """Raw counts of a rate in range, if a few tries find one."""
    raw = (0, 0, 0)
    for _ in range(4):
        raw = _raw_in_range(source, config["gyro"])
        if not calibrate_sensor(config["gyro"], raw)[1]:
            break
    return raw


def _near(source: Source, raw: tuple[int, ...], most: int) -> tuple[int, ...]:
    return tuple(max(-32768, min(32767, r + source.integer(-most, most))) for r in raw)


def _good_stamp(source: Source, drive: int, start: int, blanking_us: int) -> int:
    """A switch-off after the last drive window opened that is old enough for the sample, if there is one."""
    latest = (start - blanking_us) % WRAP
    since_drive = (latest - drive) % WRAP
    return (latest - source.integer(0, since_drive if since_drive < HALF else 0)) % WRAP


def _disturbed_stamp(source: Source, drive: int, period: int, start: int, blanking_us: int) -> int:
    """A new stamp that is good, stale, too young, on an edge, or anything."""
    kind = source.integer(0, 15)
    if kind < 6:
        return _good_stamp(source, drive, start, blanking_us)
    if kind < 11:  # of an earlier pulse
        return (drive - span(source, 1, 3 * period)) % WRAP
    if kind < 13:
        return (start - spread(source, 0, blanking_us) + 1) % WRAP
    if kind == 13:
        return (drive + pick(source, (0, -1, HALF - 1, HALF))) % WRAP
    if kind == 14:
        return (start - pick(source, (HALF, HALF - 1))) % WRAP
    return span(source, 0, WRAP - 1)


class _Stamps:
    """A host's stamps in a row of cycles: refreshed in each, unless a coil's stay frozen for a while.

    Half of the frozen ones end late: with the stamp that was due when they froze.
    """

    def __init__(self, source: Source, path: Record, calm: int) -> None:
        self._source, self._path, self._calm = source, path, calm
        self._stamps = [source.integer(0, WRAP - 1) if once_in(source, calm) else 0 for _ in range(3)]
        self._frozen = [0, 0, 0]  # cycles left
        self._due = [0, 0, 0]

    def next(self, drive: int, start: int) -> tuple[int, int, int]:
        """The stamps of a cycle: last drive window opened at `drive`, the sample begins at `start`."""
        for i, blanking_us in enumerate(self._path["blanking_us"]):
            self._stamps[i] = self._coil(i, drive, start, blanking_us)
        return tuple(self._stamps)

    def _coil(self, i: int, drive: int, start: int, blanking_us: int) -> int:
        source = self._source
        if self._frozen[i]:
            self._frozen[i] -= 1
            late = not self._frozen[i] and source.integer(0, 1)
            return self._due[i] if late else self._stamps[i]
        good = _good_stamp(source, drive, start, blanking_us)
        if not once_in(source, self._calm):
            return good
        if once_in(source, 3):
            self._frozen[i], self._due[i] = pick(source, (1, 2, 3, 20)), good
            return self._stamps[i]
        return _disturbed_stamp(source, drive, self._path["period_us"], start, blanking_us)


def _command(source: Source, config: Record) -> Record:
    """A command with its values, mostly in their limits."""
    supervisor = config["supervisor"]
    limit, key = supervisor["bench_limit_ticks"], supervisor["bench_key"]
    likely = MRD_COMMAND_SAFE, MRD_COMMAND_ARM, MRD_COMMAND_BENCH, MRD_COMMAND_BENCH, MRD_COMMAND_RESUME
    return {
        "command": pick(source, (*likely, source.integer(0, 6), span(source, 0, 65535))),
        "command_key": pick(source, (key, key, span(source, 0, 65535))),
        "command_coil": pick(source, (0, 1, 2, 0, 1, 2, span(source, 0, 65535))),
        "command_ticks": pick(source, (span(source, -limit, limit), span(source, -limit, limit),
                                       span(source, -32768, 32767), limit + 1)),
    }


def _path_inputs(
    source: Source, path: Record, cycle_start: int, drive: int, stamps: _Stamps, pool: list, calm: int,
) -> Record:
    """One cycle's inputs of a path; `calm` is how rarely something is disturbed.

    `drive` is when the drive window of the cycle before opened.
    """
    tolerance = path["tolerance_us"]
    sample = (cycle_start + path["phase_us"] + span(source, -min(tolerance, 50), min(tolerance, 50))) % WRAP
    if once_in(source, 4 * calm):
        departure = pick(source, (1, -1)) * (tolerance + source.integer(0, 1))
        sample = (cycle_start + path["phase_us"] + departure) % WRAP
    if once_in(source, 8 * calm):
        sample = span(source, 0, WRAP - 1)
    start = (sample - path["half_sample_us"]) % WRAP
    switch_off = stamps.next(drive, start)
    mag_raw = _near(source, pick(source, pool), pick(source, (0, 3, 30)))
    gyro_raw = _gyro_raw(source, path)
    if once_in(source, 4 * calm):
        mag_raw = vector(source, -32768, 32767)
    if once_in(source, 4 * calm):
        gyro_raw = vector(source, -32768, 32767)
    return {
        "cycle_start_us": cycle_start,
        "sample_us": sample,
        "switch_off_us": switch_off,
        "mag_raw": mag_raw,
        "gyro_raw": gyro_raw,
        "mag_valid": pick(source, (0, 65535)) if once_in(source, 4 * calm) else 1,
        "gyro_valid": pick(source, (0, 65535)) if once_in(source, calm) else 1,
    }


def any_inputs(source: Source, config: Record, n: int) -> list[Record]:
    """The inputs of n cycles in a row.

    Nobody knows here which coils are driven: the stamps are those of a host that refreshes all in each cycle.
    """
    path, supervisor = config["path"], config["supervisor"]
    calm = pick(source, (1000, 16, 4))
    pool = [_plausible_raw(source, path) for _ in range(3)]
    period, hold_off_s = path["period_us"], supervisor["hold_off_s"]
    before_wrap = WRAP - period * source.integer(1, max(1, n))
    cycle_start = pick(source, (0, before_wrap, span(source, 0, WRAP - 1)))
    held = once_in(source, 8)  # in hold-off throughout: no pulse, hence stamps that may grow old
    opens = path["phase_us"] + path["delay_us"]
    drive = (cycle_start - period + opens) % WRAP
    stamps = _Stamps(source, path, calm)
    sequence: list[Record] = []
    for _ in range(n):
        cycle_start %= WRAP
        commanded, early = once_in(source, calm), held or once_in(source, calm)
        sequence.append({
            "path": _path_inputs(source, path, cycle_start, drive, stamps, pool, calm),
            "separation_s": max(0, hold_off_s - 1) if early else span(source, hold_off_s, WRAP - 1),
            "low_power": pick(source, (1, 65535)) if once_in(source, calm) else 0,
            **(_command(source, config) if commanded else {
                "command": MRD_COMMAND_NONE, "command_key": 0, "command_coil": 0, "command_ticks": 0}),
        })
        drive = (cycle_start + opens) % WRAP
        late = once_in(source, calm)
        lapse = pick(source, (period // 2, period + period // 2, 2 * period, HALF)) if late else period
        cycle_start += lapse
    return sequence


@st.composite
def path_configs(draw: st.DrawFn) -> Record:
    """Any legal configuration of a path."""
    return any_path_config(Drawn(draw))


@st.composite
def configs(draw: st.DrawFn) -> Record:
    """Any legal configuration, its digest filled."""
    return any_config(Drawn(draw))


@st.composite
def inputs_sequences(draw: st.DrawFn, config: Record, n: int) -> list[Record]:
    """The inputs of n cycles in a row for this configuration; beyond some 20 cycles use `Seeded`."""
    return any_inputs(Drawn(draw), config, n)


@st.composite
def flights(draw: st.DrawFn, most: int = 8) -> tuple[Record, list[Record]]:
    """A configuration and 1 to `most` cycles of inputs for it."""
    source = Drawn(draw)
    config = any_config(source)
    return config, any_inputs(source, config, source.integer(1, most))
