"""Dipole, duty and saturation over a flight."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pyharness.mission import AXES
from pyharness.review.bins import Bins
from pyharness.review.flown import Flown, first
from pyharness.review.style import (
    AXIS_STYLE,
    BLUE,
    INK,
    ORANGE,
    SKY,
    VERMILLION,
    house_style,
    legend_above,
    new_figure,
)
from pyharness.review.time_axis import label_time, time_of, title_of
from pyharness.review.wording import percent

_CLOSE_UP_CYCLES = 60


def dipole_figure(flown: Flown) -> Figure:
    """Mean dipole per coil, commanded and applied: the whole flight, and single cycles at the first saturation.

    Saturated cycles are marked: as a share under the whole flight, one by one beside it.
    """
    with house_style():
        figure = new_figure(8.2, title_of(flown, "mean dipole over the cycle, per coil"))
        grid = figure.subplots(6, 2, width_ratios=(3, 2), height_ratios=(3, 0.55) * 3, sharex="col")
        window = _close_up(flown)
        for axis, name in enumerate(AXES):
            _dipole_flight(grid[2 * axis, 0], flown, axis)
            _saturation_strip(grid[2 * axis + 1, 0], flown, axis)
            _dipole_cycles(grid[2 * axis, 1], flown, axis, window)
            _cycle_strip(grid[2 * axis + 1, 1], flown, axis, window)
            for column in (0, 1):
                grid[2 * axis, column].set_ylabel(f"coil {name} [mA m²]")
        grid[0, 0].set_title("Whole flight", pad=20)
        grid[0, 1].set_title(f"Cycle by cycle, {window.start} to {window.stop - 1}", pad=20)
        for column in (0, 1):
            grid[0, column].legend(
                loc="lower left", bbox_to_anchor=(-0.02, 0.985), ncols=3, borderaxespad=0.1, columnspacing=1.2
            )
        label_time(grid[5, 0], flown)
        grid[5, 1].set_xlabel("cycle")
    return figure


def _dipole_flight(axes: Axes, flown: Flown, axis: int) -> None:
    time, _ = time_of(flown)
    bins = Bins(flown.cycles)
    at = bins.mean(time)
    asked, made = flown.commanded_a_m2[:, axis] * 1e3, flown.applied_a_m2[:, axis] * 1e3
    axes.fill_between(
        at, bins.least(asked), bins.greatest(asked), color=SKY, alpha=0.45, linewidth=2, label="commanded"
    )
    axes.plot(at, bins.greatest(made), color=BLUE, linewidth=0.9, label="applied, extremes")
    axes.plot(at, bins.least(made), color=BLUE, linewidth=0.9)
    _limits(axes, flown, axis, "limit")
    share = percent(flown.saturated[:, axis].mean())
    axes.text(
        0.995,
        0.05,
        f"saturated in {share} of all cycles",
        transform=axes.transAxes,
        ha="right",
        va="center",
        fontsize=8,
    )


def _limits(axes: Axes, flown: Flown, axis: int, label: str) -> None:
    limit = flown.scaling.dipole_a_m2[axis] * 1e3
    for sign in (1, -1):
        axes.axhline(
            sign * limit, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label=label if sign > 0 else None
        )
    axes.set_ylim(-1.3 * limit, 1.3 * limit)


def _saturation_strip(axes: Axes, flown: Flown, axis: int) -> None:
    """Share of saturated cycles as a filled area from 0 to 1."""
    time, _ = time_of(flown)
    bins = Bins(flown.cycles)
    share = bins.mean(flown.saturated[:, axis])
    axes.fill_between(bins.mean(time), 0, share, step="mid", color=ORANGE, linewidth=0)
    axes.set_ylim(0, 1.02)
    axes.set_yticks([0, 1], ["0", "1"])
    axes.grid(visible=False)
    axes.set_ylabel("sat.", rotation=0, ha="right", va="center")


def _close_up(flown: Flown) -> range:
    """The cycles to show one by one: around the first that is saturated, or the first that is driven."""
    start = first(flown.saturated.any(axis=1))
    if start is None:
        start = first(flown.duty.any(axis=1)) or 0
    start = max(0, min(start - _CLOSE_UP_CYCLES // 6, flown.cycles - _CLOSE_UP_CYCLES))
    return range(start, min(start + _CLOSE_UP_CYCLES, flown.cycles))


def _dipole_cycles(axes: Axes, flown: Flown, axis: int, window: range) -> None:
    cycles = np.array(window)
    asked, made = flown.commanded_a_m2[cycles, axis] * 1e3, flown.applied_a_m2[cycles, axis] * 1e3
    axes.step(cycles, asked, where="mid", color=SKY, linewidth=2.6, label="commanded")
    axes.step(cycles, made, where="mid", color=BLUE, linewidth=0.9, label="applied")
    saturated = flown.saturated[cycles, axis]
    axes.plot(
        cycles[saturated],
        made[saturated],
        "v",
        color=VERMILLION,
        markersize=3.2,
        linestyle="none",
        label="saturated",
    )
    _limits(axes, flown, axis, "_limit")


def _cycle_strip(axes: Axes, flown: Flown, axis: int, window: range) -> None:
    """A tick for each saturated cycle."""
    cycles = np.array(window)
    axes.vlines(cycles[flown.saturated[cycles, axis]], 0, 1, color=VERMILLION, linewidth=1.6)
    axes.set_ylim(0, 1)
    axes.set_yticks([])
    axes.grid(visible=False)
    axes.set_ylabel("sat.", rotation=0, ha="right", va="center")


def duty_figure(flown: Flown) -> Figure:
    """Duty of each coil and share of saturated cycles over the flight."""
    with house_style():
        figure = new_figure(4.4, title_of(flown, "duty and saturation"))
        top, below = figure.subplots(2, 1, sharex=True)
        time, _ = time_of(flown)
        bins = Bins(flown.cycles, 120)
        at = bins.mean(time)
        timeline = flown.scaling.timeline
        duty, saturated = bins.mean(flown.duty) * 100, bins.mean(flown.saturated) * 100
        for axis, name in enumerate(AXES):
            top.plot(
                at,
                duty[:, axis],
                label=f"coil {name}, mean {percent(flown.duty[:, axis].mean())}",
                **AXIS_STYLE[axis],
            )
            below.plot(
                at,
                saturated[:, axis],
                label=f"axis {name}, {percent(flown.saturated[:, axis].mean())} of all",
                **AXIS_STYLE[axis],
            )
        longest = timeline.drive_window_us / timeline.period_us * 100
        top.axhline(
            longest, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label=f"drive window, {longest:g} %"
        )
        top.set_ylim(0, longest * 1.08)
        top.set_ylabel("coil on [% of cycle]")
        top.set_title("Duty")
        legend_above(top, 4)
        below.set_ylim(0, 104)
        below.set_ylabel("cycles [%]")
        below.set_title("Saturated cycles")
        legend_above(below, 3)
        label_time(below, flown)
    return figure
