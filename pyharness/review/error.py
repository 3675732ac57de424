"""Distance of the controller from the truth over a flight."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pyharness.mission import AXES
from pyharness.review.bins import Bins
from pyharness.review.flown import Flown
from pyharness.review.style import (
    AXIS_STYLE,
    BLUE,
    INK,
    PALE,
    VERMILLION,
    house_style,
    legend_above,
    new_figure,
)
from pyharness.review.time_axis import label_time, time_of, title_of
from pyharness.review.wording import percent


def error_figure(flown: Flown) -> Figure:
    """Distance of the controller from the truth against its bound, and the short pulses dropped."""
    comparison = flown.comparison
    with house_style():
        figure = new_figure(6.6, title_of(flown, "distance of the controller from the truth"))
        command, ticks, used, dropped = figure.subplots(4, 1, sharex=True, height_ratios=(2.2, 2.2, 1.7, 0.9))
        time, _ = time_of(flown)
        bins = Bins(flown.cycles)
        at = bins.mean(time)
        error, bound = comparison.command_error_a_m2 * 1e3, comparison.command_bound_a_m2 * 1e3
        _error_against_bound(command, at, bins, error, bound)
        command.set_ylabel("[mA m²]")
        command.set_title("Mean dipole, largest of the three axes")
        legend_above(command, 3)
        _error_against_bound(ticks, at, bins, comparison.ticks_error, comparison.ticks_bound)
        ticks.set_ylabel("[ticks]")
        ticks.set_title(
            f"Pulse width, largest of the three coils (1 tick = {flown.scaling.timeline.tick_us:g} µs)"
        )
        for values, limits, colour, pattern, label in (
            (
                comparison.command_error,
                comparison.command_bound,
                BLUE,
                "-",
                f"mean dipole, largest {percent(comparison.used)}",
            ),
            (
                comparison.ticks_error,
                comparison.ticks_bound,
                VERMILLION,
                (0, (5, 1.5)),
                f"pulse width, largest {percent(comparison.used_ticks)}",
            ),
        ):
            share = values / np.where(limits > 0, limits, np.inf)
            used.plot(
                at,
                bins.greatest(share.max(axis=1)) * 100,
                color=colour,
                linestyle=pattern,
                linewidth=0.9,
                label=label,
            )
        used.axhline(100, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label="the bound")
        used.set_ylim(0, 100 * max(1.15, 1.1 * max(comparison.used, comparison.used_ticks)))
        used.set_ylabel("used [%]")
        used.set_title("Share of the bound used")
        legend_above(used, 3)
        _dropped(dropped, flown, time)
        label_time(dropped, flown)
    return figure


def _error_against_bound(
    axes: Axes, at: np.ndarray, bins: Bins, error: np.ndarray, bound: np.ndarray
) -> None:
    largest = bound.max(axis=1)
    axes.fill_between(at, bins.least(largest), bins.greatest(largest), color=PALE, linewidth=0)
    axes.plot(
        at,
        bins.greatest(largest),
        color=INK,
        linewidth=0.9,
        linestyle=(0, (4, 2)),
        label="bound (band: its least to its greatest)",
    )
    axes.plot(at, bins.greatest(error.max(axis=1)), color=BLUE, linewidth=0.9, label="largest error")
    axes.set_ylim(0, max(largest.max(initial=0.0), error.max(initial=0.0)) * 1.1 or 1.0)


def _dropped(axes: Axes, flown: Flown, time: np.ndarray) -> None:
    """A row of ticks per coil: pulses left out because they were too short, and so outside the bound."""
    for axis in range(3):
        flags = flown.dropped[:, axis]
        starts = [a for a, _ in Bins(flown.cycles, 600).spans(flags)]
        axes.plot(
            time[starts],
            np.full(len(starts), axis),
            "|",
            color=AXIS_STYLE[axis]["color"],
            markersize=6,
            markeredgewidth=1.1,
        )
        axes.text(
            1.005, axis, f"{flags.sum()}", transform=axes.get_yaxis_transform(), va="center", fontsize=8
        )
    axes.set_yticks(range(3), AXES)
    axes.set_ylim(2.6, -0.6)
    axes.grid(visible=False)
    shortest_ms = flown.scaling.timeline.shortest_pulse_us / 1e3
    axes.set_title(f"Pulses dropped while damping, shorter than {shortest_ms:g} ms (count on the right)")
