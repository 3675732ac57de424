"""The tables of the page: mission and integers with their physical size, timeline, status bits."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from pyharness.flight.header import Header
from pyharness.mission import AXES, Mission
from pyharness.mission.schema import BY_PATH, KEYS, each_axis
from pyharness.mission.wording import shown
from pyharness.review.flown import Flown
from pyharness.review.wording import joined
from pyharness.scaling import Q15, Scaling


@dataclass(frozen=True)
class Row:
    """Name, value and what it means."""

    name: str
    value: str
    meaning: str = ""


def mission_rows(mission: Mission) -> list[Row]:
    """Every key of the mission with its value as parsed, defaults filled in, and its unit."""
    paths = [path for key in KEYS for path in each_axis(key.path)]
    paths.sort(
        key=lambda path: (_TABLES.index(path.partition(".")[0]), path[:6] if path.startswith("coil.") else "")
    )
    values = {path: _mission_value(mission, path) for path in paths}
    return [
        Row(path, _shown(value), "" if BY_PATH[path].kind == "text" else BY_PATH[path].unit)
        for path, value in values.items() if value is not None
    ]  # fmt: skip


_TABLES = list(dict.fromkeys(key.path.partition(".")[0] for key in KEYS))
"""In the order of the mission file; within them each coil's keys stay together."""


def _mission_value(mission: Mission, path: str) -> Any:
    """The value of a key, None where it is not used."""
    table, _, name = path.partition(".")
    if not name:
        return getattr(mission, table)
    if table == "coil":
        axis, _, name = name.partition(".")
        coil = mission.coil[AXES.index(axis)]
        return getattr(coil, name) if hasattr(coil, name) else getattr(coil.winding, name, None)
    if name.startswith("inertia_kg_m2."):
        row, column = (AXES.index(axis) for axis in name[-2:])
        return mission.body.inertia_kg_m2[row][column]
    return getattr(getattr(mission, table), name, None)


def _shown(value: Any) -> str:
    if isinstance(value, tuple):
        return f"[{', '.join(map(_shown, value))}]"
    if isinstance(value, float):
        value = float(f"{value:.9g}")  # a derived dipole has digits without meaning
    return value if isinstance(value, str) else shown(value)


def configuration_rows(scaling: Scaling, header: Header) -> list[Row]:
    """Every integer of the configuration, and what it stands for."""
    return [
        Row(name, joined(value), _physical(scaling, header, name, value))
        for name, value in _leaves(scaling.config)
    ]  # fmt: skip


def _leaves(tree: dict[str, Any], prefix: str = "") -> Iterator[tuple[str, Any]]:
    for name, value in tree.items():
        if isinstance(value, dict):
            yield from _leaves(value, f"{prefix}{name}.")
        else:
            yield prefix + name, value


_CODES = {"law": "LAW", "gain_scaling": "GAIN", "saturation": "SATURATE", "settle_by": "SETTLE_BY"}


def _physical(scaling: Scaling, header: Header, name: str, value: Any) -> str:
    parent, _, leaf = name.rpartition(".")
    sensor, path = parent.rpartition(".")[2], scaling.config["path"]
    if leaf in _CODES:
        return header.named(f"MRD_{_CODES[leaf]}_")[value].lower().replace("_", " ")
    if leaf == "digest":
        return f"{value:08x}"
    if leaf.startswith("norm_"):
        return f"‖B‖ = {math.sqrt(value) * scaling.field_t * 1e6:.2f} µT"
    if leaf.endswith("_us"):
        return _each(value, 1e-3, "ms")
    if leaf.endswith("_ticks"):
        return _each(value, scaling.timeline.tick_us * 1e-3, "ms")
    if leaf.endswith("_dwell"):
        return _each(value, scaling.period_s, "s")
    if leaf in ("settled_rate", "wake_rate"):
        return _each(value, math.degrees(scaling.rate_rad_s), "°/s")
    if leaf == "hold_off_s":
        return f"{value} s"
    if leaf == "filter_gain":
        return "no low-pass" if value == Q15 else f"pole {1 - value / Q15:.4g}"
    if sensor in ("mag", "gyro") and leaf == "offset":
        return _each(value, *_count(scaling, sensor))
    if sensor in ("mag", "gyro") and leaf == "matrix":
        return _each(value, 2.0 ** -path[sensor]["shift"], "counts out per raw count")
    if sensor == "gyro" and scaling.raw_rate_rad_s is None:
        return "not fitted"
    if leaf == "limit":
        raw = scaling.raw_field_t * 1e6 if sensor == "mag" else math.degrees(scaling.raw_rate_rad_s)
        return _each(value, raw, "µT" if sensor == "mag" else "°/s")
    if sensor.endswith("_gain") and leaf == "mantissa":
        return (
            joined([f"{m / 2.0**s:.5g}" for m, s in zip(value, path[sensor]["shift"], strict=True)])
            + " (mantissa / 2^shift)"
        )
    return ""


def _count(scaling: Scaling, sensor: str) -> tuple[float, str]:
    return (scaling.field_t * 1e9, "nT") if sensor == "mag" else (math.degrees(scaling.rate_rad_s), "°/s")


def _each(value: Any, step: float, unit: str) -> str:
    values = value if isinstance(value, tuple) else (value,)
    return f"{', '.join(f'{v * step:.5g}' for v in values)} {unit}"


def size_rows(scaling: Scaling) -> list[Row]:
    """What one count stands for."""
    rows = [
        Row("raw count of the magnetometer", f"{scaling.raw_field_t * 1e9:.5g} nT"),
        Row("field count", f"{scaling.field_t * 1e9:.5g} nT"),
        Row("rate count", f"{math.degrees(scaling.rate_rad_s):.5g} °/s"),
        Row("tick of the pulse timer", f"{scaling.timeline.tick_us:g} µs"),
    ]
    for axis, name in enumerate(AXES):
        full, limit = scaling.mission.coil[axis].dipole_a_m2 * 1e3, scaling.dipole_a_m2[axis] * 1e3
        step = f"{scaling.command_a_m2(axis) * 1e6:.5g} µA m²"
        limits = f"limit of the mean {limit:.5g} mA m², full dipole {full:.5g} mA m²"
        rows.append(Row(f"command count, coil {name}", step, limits))
    gain = scaling.gain
    rows.append(
        Row(
            "gain k",
            f"{gain.k_am2_s_per_t:.5g} A m² s/T",
            f"K = {gain.K_n_m_s:.5g} N m s, from {gain.origin}",
        )
    )
    return rows


def timeline_rows(scaling: Scaling) -> list[tuple[str, float, float]]:
    """(window, from, to) in ms from the start of the cycle."""
    t = scaling.timeline
    edges = (
        0,
        t.sample_start_us,
        t.sample_start_us + t.sample_us,
        t.drive_start_us,
        t.drive_end_us,
        t.period_us,
    )
    names = (
        "blanking: coils off, currents decay",
        "sample",
        "compute delay",
        "drive window",
        "rest: coils off",
    )
    return [(name, a / 1e3, b / 1e3) for name, a, b in zip(names, edges[:-1], edges[1:], strict=True)]


@dataclass(frozen=True)
class StatusRow:
    """A bit of the status word, what it means, and in how many cycles of each flight it was set."""

    bit: int
    name: str
    text: str
    counts: tuple[int, ...]


def status_rows(flights: Sequence[Flown], header: Header) -> list[StatusRow]:
    """The dictionary of the status word, with its text from the header."""
    return [
        StatusRow(
            bit, name, header.texts[f"MRD_S_{name}"], tuple(int(f.record.bit(bit).sum()) for f in flights)
        )
        for bit, name in sorted(header.named("MRD_S_").items())
    ]
