"""One cycle under the magnifier: windows, coil currents with their edges, and the stray field they leave."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from pyharness.mission import AXES
from pyharness.plant.coils import Coils
from pyharness.review.blanking import worst_stray_t_per_a_m2
from pyharness.review.flown import Flown, first
from pyharness.review.style import AXIS_STYLE, GREY, INK, house_style, legend_above, new_figure
from pyharness.review.time_axis import title_of

_WINDOWS = (
    ("blanking", "#efefef", ""),
    ("sample", "#cfe8de", ""),
    ("delay", "#f4ecd2", "////"),
    ("drive window", "#e3eff7", ""),
)


def default_cycle(flown: Flown) -> int:
    """The first saturated cycle after one with pulses; else the first with pulses; else the second."""
    on = flown.duty.any(axis=1)
    after_pulses = np.append(False, on[:-1])
    for flags in (flown.saturated.any(axis=1) & after_pulses, on):
        index = first(flags)
        if index is not None:
            return index
    return min(1, flown.cycles - 1)


def cycle_figure(flown: Flown, cycle: int | None = None) -> Figure:
    """Currents over a cycle; the stray field from the end of the pulses before it to the start of its own.

    Raises IndexError for a cycle that was not flown.
    """
    cycle = default_cycle(flown) if cycle is None else cycle
    if not 0 <= cycle < flown.cycles:
        raise IndexError(f"cycle {cycle} was not flown, there are {flown.cycles}")
    with house_style():
        figure = new_figure(7.4, title_of(flown, f"cycle {cycle} under the magnifier"))
        ribbon, current, stray = figure.subplots(3, 1, height_ratios=(0.3, 2.4, 3))
        timeline = flown.scaling.timeline
        idle_ms = (timeline.period_us - timeline.drive_end_us) / 1e3
        before_ms = idle_ms + 0.03 * timeline.period_us / 1e3
        whole = (-before_ms, timeline.period_us / 1e3 * 1.005)
        _ribbon(ribbon, flown, whole)
        _currents(current, flown, cycle, whole)
        _stray(
            stray,
            flown,
            cycle,
            (-idle_ms - 0.2 * timeline.blanking_us / 1e3, timeline.drive_start_us / 1e3 * 1.12),
        )
        stray.set_xlabel(f"time from the start of cycle {cycle} [ms]")
    return figure


def _edges_ms(flown: Flown) -> list[float]:
    t = flown.scaling.timeline
    return [
        us / 1e3
        for us in (0, t.sample_start_us, t.sample_start_us + t.sample_us, t.drive_start_us, t.drive_end_us)
    ]


def _shade(axes: Axes, flown: Flown) -> None:
    edges = _edges_ms(flown)
    drive = _WINDOWS[-1][1]
    period_ms = flown.scaling.timeline.period_us / 1e3
    axes.axvspan(edges[-2] - period_ms, edges[-1] - period_ms, facecolor=drive, linewidth=0.0, zorder=0)
    for (_, colour, hatch), a, b in zip(_WINDOWS, edges[:-1], edges[1:], strict=True):
        axes.axvspan(a, b, facecolor=colour, edgecolor="#cfcfcf", hatch=hatch, linewidth=0.0, zorder=0)
    axes.grid(visible=False)


def _ribbon(axes: Axes, flown: Flown, span: tuple[float, float]) -> None:
    """The windows' names and lengths; those too narrow for their names are named above."""
    _shade(axes, flown)
    edges = _edges_ms(flown)
    width = span[1] - span[0]
    named = []
    for (name, _, _), a, b in zip(_WINDOWS, edges[:-1], edges[1:], strict=True):
        text = f"{name} {b - a:g} ms"
        if (b - a) / width > 0.012 * len(text):
            axes.text((a + b) / 2, 0.5, text, ha="center", va="center", fontsize=8)
        else:
            named.append(text)
    first_windows = f"; in order: {', '.join(named)}" if named else ""
    axes.set_title(f"Windows of the cycle of {flown.scaling.timeline.period_us / 1e3:g} ms{first_windows}")
    axes.set_xlim(*span)
    axes.set_xticks([])
    axes.set_yticks([])
    for spine in axes.spines.values():
        spine.set_visible(False)


def _ticks(flown: Flown, cycle: int) -> tuple[np.ndarray, np.ndarray]:
    """Commanded signed ticks and how late each coil was switched off, (3, 1); zero before the flight."""
    if cycle < 0:
        return np.zeros((3, 1), dtype=np.int64), np.zeros((3, 1), dtype=np.int64)
    commanded = flown.record.outputs["ticks"][cycle].astype(np.int64)[:, None]
    applied = flown.record.applied_ticks[cycle].astype(np.int64)[:, None]
    return commanded, np.abs(applied) - np.abs(commanded)


def decaying_dipole(flown: Flown, cycle: int, time_ms: np.ndarray) -> np.ndarray:
    """Dipole of each coil's current (K, 3), A m², at times (K,) from the start of a cycle.

    That of its own pulse, and what is left of the one before.
    """
    timeline = flown.scaling.timeline
    coils = Coils([flown.scaling.mission])
    since_window_s = (time_ms * 1e3 - timeline.drive_start_us) * 1e-6
    total = np.zeros((len(time_ms), 3))
    for which, offset_s in ((cycle, 0.0), (cycle - 1, flown.scaling.period_s)):
        ticks, late = _ticks(flown, which)
        total += coils.waveform(ticks, since_window_s + offset_s, late)[:, :, 0]
    return total


def _currents(axes: Axes, flown: Flown, cycle: int, span: tuple[float, float]) -> None:
    timeline = flown.scaling.timeline
    _shade(axes, flown)
    time = _fine_times(flown, cycle, span)
    full = Coils([flown.scaling.mission]).full_dipole[:, 0]
    current = decaying_dipole(flown, cycle, time) / full * 100
    ticks, late = _ticks(flown, cycle)
    for axis, name in enumerate(AXES):
        count = int(ticks[axis, 0])
        width_ms = (abs(count) + int(late[axis, 0])) * timeline.tick_us / 1e3
        saturated = ", demand saturated" if flown.saturated[cycle, axis] else ""
        text = (
            f"coil {name}: {'+' if count > 0 else '−'}{width_ms:g} ms{saturated}"
            if count
            else f"coil {name}: no pulse"
        )
        axes.plot(time, current[:, axis], label=text, **AXIS_STYLE[axis])
    axes.axhline(0, color=GREY, linewidth=0.6)
    axes.set_xlim(*span)
    axes.set_ylim(-118, 118)
    axes.set_ylabel("current [% of full]")
    axes.set_title("Coil currents")
    axes.annotate("tail of\nthe cycle\nbefore", (0, 0.84), xycoords=axes.get_xaxis_transform(), xytext=(3, 0),
                  textcoords="offset points", fontsize=8, va="center")  # fmt: skip
    legend_above(axes, 3)


def _fine_times(flown: Flown, cycle: int, span: tuple[float, float]) -> np.ndarray:
    """Times that show every edge: a coarse grid, and eight L/R from the start and the end of each pulse."""
    timeline = flown.scaling.timeline
    times = [np.linspace(*span, 200)]
    taus = [coil.time_constant_ms for coil in flown.scaling.mission.coil]
    for which in (cycle - 1, cycle):
        start = timeline.drive_start_us / 1e3 + (which - cycle) * timeline.period_us / 1e3
        ticks, late = _ticks(flown, which)
        for axis, tau in enumerate(taus):
            end = start + (abs(int(ticks[axis, 0])) + int(late[axis, 0])) * timeline.tick_us / 1e3
            times += [start + np.linspace(0, 8 * tau, 40), end + np.linspace(0, 8 * tau, 40)]
    merged = np.unique(np.concatenate(times))
    return merged[(merged >= span[0]) & (merged <= span[1])]


def _stray(axes: Axes, flown: Flown, cycle: int, span: tuple[float, float]) -> None:
    timeline, count_nt = flown.scaling.timeline, flown.scaling.raw_field_t * 1e9
    _shade(axes, flown)
    time = np.linspace(*span, 500)
    dipole = np.abs(decaying_dipole(flown, cycle, time))
    stray = np.array([worst_stray_t_per_a_m2(flown.scaling, coil) for coil in range(3)]) * 1e9
    floor = count_nt / 1000
    for axis, name in enumerate(AXES):
        seen = np.where(dipole[:, axis] * stray[axis] >= floor, dipole[:, axis] * stray[axis], np.nan)
        axes.plot(time, seen, label=f"coil {name}, current", **AXIS_STYLE[axis])
    axes.axhline(
        count_nt,
        color=INK,
        linewidth=1.1,
        linestyle=(0, (4, 2)),
        label=f"one magnetometer count, {count_nt:.3g} nT",
    )
    for axis, name in enumerate(AXES):
        kept = (
            flown.scaling.mission.coil[axis].remanence_fraction
            * flown.scaling.mission.coil[axis].dipole_a_m2
            * stray[axis]
        )
        if kept > 0:
            axes.axhline(
                kept,
                color=AXIS_STYLE[axis]["color"],
                linewidth=1.2,
                linestyle=(0, (1, 1.6)),
                label=f"coil {name}, remanence of a full pulse",
            )
    axes.set_yscale("log")
    top = max(stray * [coil.dipole_a_m2 for coil in flown.scaling.mission.coil])
    axes.set_ylim(floor, max(top, count_nt) * 3)
    axes.yaxis.set_major_locator(LogLocator())
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.set_xlim(*span)
    axes.set_ylabel("[nT]")
    axes.set_title(
        "Stray field at the magnetometer, on its worst axis: from the end of the last pulses to the next"
    )
    axes.figure.legend(*axes.get_legend_handles_labels(), loc="outside lower left", ncols=3)
    for name, at_us in (("blanking", timeline.blanking_us / 2), ("sample", timeline.mid_sample_us)):
        axes.annotate(
            name, (at_us / 1e3, 0.96), xycoords=axes.get_xaxis_transform(), ha="center", va="top", fontsize=8
        )
