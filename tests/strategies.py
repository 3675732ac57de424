"""Hypothesis strategies for the controller: any legal configuration, and inputs that reach its deep stages.

The generators draw integers from a source: from hypothesis (which shrinks what fails) or from a seeded
`random.Random` (for many thousand rows). Ranges are followed constructively, nothing is filtered away.
Sequences follow a plausible timeline and a plausible field, disturbed now and then by corner values, so
that most cycles have a derivative and a law. Limits and windows are often small, so that within a short
sequence ballots trip and clear, windows end, and pauses and retries run out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
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
Raw = tuple[int, int, int]
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
    if not once_in(source, 6):
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


def _limit(source: Source, lo: int, hi: int) -> int:
    """A number of equal samples: none, a few, or any."""
    return pick(source, (0, 0, source.integer(lo, hi), source.integer(lo, hi), spread(source, 1, 65535)))


def _continuity(source: Source) -> Record:
    """Limits of the continuity and agreement checks: often so wide that they do not end every flight at once."""
    return {
        "jump_max_sq": spread(source, 1, NORM_MAX) if once_in(source, 3) else NORM_MAX,
        "noise_limit": spread(source, 1, 65535) if once_in(source, 4) else 65535,
        "frozen_limit": _limit(source, 1, 12),
        "dead_limit": _limit(source, 4, 12),
        "gyro_frozen_limit": _limit(source, 1, 12),
        "agree_limit": pick(source, (0, spread(source, 1, 65535), span(source, 100, 2000))),
        "agree_mantissa": span(source, 32768, 65535),
        "agree_shift": pick(source, (span(source, 1, 31), source.integer(16, 31))),
        "agree_rate_max": pick(source, (32767, 32767, spread(source, 1, 32767))),
    }


def _current_sense(source: Source, window_ticks: int) -> Record:
    """A current sense that is fitted, or fields of which nobody takes notice."""
    if source.integer(0, 2) == 0:
        return {
            "current_fitted": 0,
            "current_ticks": span(source, -32768, 32767),
            "current_min": vector(source, -32768, 32767),
            "current_off_max": span(source, -32768, 32767),
        }
    off_max = spread(source, 1, 32766)
    return {
        "current_fitted": 1,
        "current_ticks": spread(source, 1, window_ticks),
        "current_min": tuple(spread(source, off_max + 1, 32767) for _ in range(3)),
        "current_off_max": off_max,
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
    timeline = _timeline(source)
    return {
        "mag": mag,
        "gyro": _sensor(source),
        "gyro_fitted": fitted,
        "law": source.integer(1, 1 + fitted),
        "gain_scaling": gain_scaling,
        "saturation": source.integer(1, 2),
        "norm_min_sq": norm_min_sq,
        "norm_max_sq": norm_max_sq,
        **timeline,
        "polarity": tuple(pick(source, (1, -1)) for _ in range(3)),
        "filter_gain": pick(source, (2**15, span(source, 128, 2**15))),
        "derivative_gain": _gain(source, *shifts),
        "rate_gain": _gain(source, *shifts),
        **_continuity(source),
        **_current_sense(source, timeline["window_ticks"]),
    }


def _progress(source: Source) -> Record:
    """Windows and pauses, half of them a few cycles long; a window needs four estimates to have a peak."""
    return {
        "window_cycles": pick(source, (
            source.integer(4, 12), source.integer(4, 12), source.integer(1, 6), spread(source, 1, WRAP - 1))),
        "pause_cycles": pick(source, (source.integer(1, 6), source.integer(1, 20), spread(source, 1, WRAP - 1))),
        "guard_turn": pick(source, (spread(source, 0, 255), spread(source, 0, 255), spread(source, 0, 65535), 65535)),
        "stall_turn": pick(source, (spread(source, 0, 4095), spread(source, 0, 65535))),
        "growth": pick(source, (257, span(source, 257, 1024))),
        "progress": span(source, 1, 256),
        "retries": pick(source, (source.integer(0, 3), span(source, 0, 65535))),
    }


def any_config(source: Source) -> Record:
    """Any legal configuration, its digest filled."""
    path = any_path_config(source)
    settled_rate = spread(source, 0, pick(source, (255, 65534)))
    config = {
        "path": path,
        "supervisor": {
            "settle_dwell": pick(source, (source.integer(1, 4), span(source, 1, WRAP - 1))),
            "wake_dwell": pick(source, (source.integer(1, 4), span(source, 1, WRAP - 1))),
            "hold_off_s": spread(source, 0, WRAP - 1),
            "settle_by": source.integer(1, 1 + path["gyro_fitted"]),
            "settled_rate": settled_rate,
            "wake_rate": pick(source, (settled_rate, spread(source, settled_rate, 65534))),
            "estimate_mantissa": span(source, 32768, 65535),
            "estimate_shift": span(source, 1, 31) if once_in(source, 4) else source.integer(14, 20),
            **_progress(source),
            "bench_key": span(source, 1, 65535),
            "bench_limit_ticks": span(source, 1, path["window_ticks"]),
        },
    }
    return {**config, "digest": config_digest(config)}


# ---- inputs ----

def _plausible_raw(source: Source, config: Record) -> Raw:
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


def _gyro_raw(source: Source, config: Record) -> Raw:
    """Raw counts of a rate in range, if a few tries find one."""
    raw = (0, 0, 0)
    for _ in range(4):
        raw = _raw_in_range(source, config["gyro"])
        if not calibrate_sensor(config["gyro"], raw)[1]:
            break
    return raw


def _near(source: Source, raw: Raw, most: int) -> Raw:
    return tuple(max(-32768, min(32767, r + source.integer(-most, most))) for r in raw)


class _Counts:
    """Raw counts of a sensor in a row of cycles: leaping, turning to and fro, or nearly steady for a while.

    A turn is even, or ever faster, as a tumble that grows. Now and then one axis, or all, stand still, for
    about as many cycles as the limits allow.
    """

    def __init__(self, source: Source, leap: Callable[[], Raw], stills: Sequence[int], calm: int) -> None:
        self._source, self._leap, self._stills, self._calm = source, leap, stills, calm
        self._raw = leap()
        self._left = self._still = self._cycle = 0

    def next(self) -> Raw:
        """The counts of a cycle."""
        source = self._source
        if not self._left:
            self._begin()
        self._left -= 1
        self._cycle += 1
        if not self._still and once_in(source, 2 * self._calm):
            self._still = max(1, pick(source, self._stills) + source.integer(-1, 2))
            self._still_axes = pick(source, ((0, 1, 2), (0,), (1,), (2,)))
        moved = self._moved()
        if self._still:
            self._still -= 1
            moved = tuple(self._raw[i] if i in self._still_axes else moved[i] for i in range(3))
        self._raw = moved
        return moved

    def _begin(self) -> None:
        source = self._source
        self._left, self._cycle = pick(source, (3, 10, 40, 150)), 0
        self._kind = pick(source, ("leap", "turn", "steady"))
        self._base, self._end = self._leap(), _near(source, self._leap(), 50)
        self._swing = pick(source, (2, 30, 30, 300))  # cycles from one end of a turn to the other
        self._power = pick(source, (1, 2))  # even, or ever faster
        self._noise = pick(source, (0, 1, 3, 30))

    def _moved(self) -> Raw:
        if self._kind == "leap":
            return _near(self._source, self._leap(), self._noise)
        if self._kind == "steady":
            return _near(self._source, self._base, self._noise)
        # In range at both ends, hence all the way: what a sensor can measure is convex.
        there = self._cycle % (2 * self._swing)
        turned = min(there, 2 * self._swing - there) ** self._power
        return tuple(b + (e - b) * turned // self._swing**self._power for b, e in zip(self._base, self._end))


class _Currents:
    """Coil currents in a row of cycles: of one sense and strength for a while, whatever is commanded.

    Nobody knows here which coils are driven; a turn of the field keeps the sense of its pulses for a while.
    """

    def __init__(self, source: Source, path: Record, calm: int) -> None:
        self._source, self._path, self._calm = source, path, calm
        self._left = 0

    def next(self) -> Record:
        """The currents of a cycle."""
        source = self._source
        if not self._left:
            self._left = pick(source, (10, 40, 100))
            self._sign = tuple(pick(source, (1, -1)) for _ in range(3))
            self._strength = tuple(pick(source, ("full", "full", "weak", "none")) for _ in range(3))
        self._left -= 1
        return {
            "current_valid": 0 if once_in(source, self._calm) else pick(source, (1, 1, 65535)),
            "current_driven": tuple(self._driven(i) for i in range(3)),
            "current_sampled": tuple(self._sampled() for _ in range(3)),
        }

    def _driven(self, i: int) -> int:
        source, least, off_max = self._source, self._path["current_min"][i], self._path["current_off_max"]
        if once_in(source, self._calm):
            edge = pick(source, (off_max, off_max + 1, least, least - 1)) * pick(source, (1, -1))
            return pick(source, (max(-32768, min(32767, edge)), span(source, -32768, 32767)))
        weak = max(1, min(abs(least) - 1, 32767))
        return self._sign[i] * {
            "full": span(source, min(weak + 1, 32767), 32767), "weak": span(source, 0, weak), "none": 0,
        }[self._strength[i]]

    def _sampled(self) -> int:
        source, off_max = self._source, min(abs(self._path["current_off_max"]), 32767)
        if once_in(source, 8 * self._calm):
            edge = pick(source, (off_max, min(off_max + 1, 32767))) * pick(source, (1, -1))
            return pick(source, (edge, span(source, -32768, 32767)))
        return source.integer(-min(off_max, 3), min(off_max, 3))


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
    likely = (
        MRD_COMMAND_SAFE, MRD_COMMAND_ARM, MRD_COMMAND_BENCH, MRD_COMMAND_BENCH, MRD_COMMAND_RESUME,
        MRD_COMMAND_RESUME)
    return {
        "command": pick(source, (*likely, source.integer(0, 10), span(source, 0, 65535))),
        "command_key": pick(source, (key, key, span(source, 0, 65535))),
        "command_coil": pick(source, (0, 1, 2, 0, 1, 2, span(source, 0, 65535))),
        "command_ticks": pick(source, (span(source, -limit, limit), span(source, -limit, limit),
                                       span(source, -32768, 32767), limit + 1)),
    }


def _path_inputs(
    source: Source, path: Record, cycle_start: int, switch_off: Callable[[int], Raw],
    mag: _Counts, gyro: _Counts, currents: _Currents, calm: int,
) -> Record:
    """One cycle's inputs of a path; `calm` is how rarely something is disturbed.

    `switch_off` gives the stamps for a sample that begins at a time.
    """
    tolerance = path["tolerance_us"]
    sample = (cycle_start + path["phase_us"] + span(source, -min(tolerance, 50), min(tolerance, 50))) % WRAP
    if once_in(source, 4 * calm):
        departure = pick(source, (1, -1)) * (tolerance + source.integer(0, 1))
        sample = (cycle_start + path["phase_us"] + departure) % WRAP
    if once_in(source, 8 * calm):
        sample = span(source, 0, WRAP - 1)
    mag_raw, gyro_raw = mag.next(), gyro.next()
    if once_in(source, 4 * calm):
        mag_raw = vector(source, -32768, 32767)
    if once_in(source, 4 * calm):
        gyro_raw = vector(source, -32768, 32767)
    return {
        "cycle_start_us": cycle_start,
        "sample_us": sample,
        "switch_off_us": switch_off((sample - path["half_sample_us"]) % WRAP),
        "mag_raw": mag_raw,
        "gyro_raw": gyro_raw,
        "mag_valid": pick(source, (0, 65535)) if once_in(source, 4 * calm) else 1,
        "gyro_valid": pick(source, (0, 65535)) if once_in(source, calm) else 1,
        **currents.next(),
    }


def _lapses(period: int, opens: int) -> tuple[int, ...]:
    """From one cycle to the next, if not a period: too short or long, the clock set forward or back."""
    over = 2**30 + opens  # a drive window that opened 2^30 us before the start of the cycle
    return (period // 2, period + period // 2, 2 * period, 0, HALF, -period, -3 * period, over, over + 1)


def any_inputs(source: Source, config: Record, n: int) -> list[Record]:
    """The inputs of n cycles in a row.

    Nobody knows here which coils are driven: the stamps are those of a host that refreshes all in each cycle.
    """
    path, supervisor = config["path"], config["supervisor"]
    calm = pick(source, (1000, 16, 4))
    pool = [_plausible_raw(source, path) for _ in range(2)]
    pool.append(tuple(-r for r in pool[0]))  # the furthest leap that there is
    period, hold_off_s = path["period_us"], supervisor["hold_off_s"]
    before_wrap = WRAP - period * source.integer(1, max(1, n))
    cycle_start = pick(source, (0, before_wrap, span(source, 0, WRAP - 1)))
    held = once_in(source, 8)  # in hold-off throughout: no pulse, hence stamps that may grow old
    opens = path["phase_us"] + path["delay_us"]
    drive = (cycle_start - period + opens) % WRAP
    stamps = _Stamps(source, path, calm)
    stills = [path[limit] for limit in ("frozen_limit", "dead_limit") if path[limit] <= 12]
    mag = _Counts(source, lambda: pick(source, pool), stills or (20,), calm)
    gyro = _Counts(source, lambda: _gyro_raw(source, path), (2, 6), calm)
    currents = _Currents(source, path, calm)
    sequence: list[Record] = []
    for _ in range(n):
        cycle_start %= WRAP
        commanded, early = once_in(source, calm), held or once_in(source, calm)
        sequence.append({
            "path": _path_inputs(
                source, path, cycle_start, partial(stamps.next, drive), mag, gyro, currents, calm),
            "separation_s": max(0, hold_off_s - 1) if early else span(source, hold_off_s, WRAP - 1),
            "low_power": pick(source, (1, 65535)) if once_in(source, calm) else 0,
            **(_command(source, config) if commanded else {
                "command": MRD_COMMAND_NONE, "command_key": 0, "command_coil": 0, "command_ticks": 0}),
        })
        drive = (cycle_start + opens) % WRAP
        late = once_in(source, calm)
        cycle_start += pick(source, _lapses(period, opens)) if late else period
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
