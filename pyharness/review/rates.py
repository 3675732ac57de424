"""Rates and field over a flight."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from pyharness.mission.model import Control
from pyharness.review.bins import Bins
from pyharness.review.flown import Flown
from pyharness.review.style import (
    BLUE,
    GREEN,
    GREY,
    INK,
    ORANGE,
    VERMILLION,
    house_style,
    legend_above,
    new_figure,
)
from pyharness.review.time_axis import label_time, time_edges, time_of, title_of

_MODE_COLOURS = {
    "hold-off": ("grey", "#d0d0d0"), "damping": ("blue", "#d3e6f2"), "settled": ("green", "#cfe8de"),
    "safe": ("red", "#f6d5c4"), "inhibit": ("yellow", "#f4e6c2"), "bench": ("purple", "#e8d3e2"),
}  # fmt: skip
"""What a reader would call each colour, and the colour."""


def rates_figure(flown: Flown) -> Figure:
    """Modes, true rate and estimate with thresholds, the rate along and across the field, and the field."""
    with house_style():
        figure = new_figure(7.2, title_of(flown, "rates and field"))
        modes, top, split, below = figure.subplots(4, 1, sharex=True, height_ratios=(0.28, 3.2, 2, 1.5))
        _modes(modes, flown)
        _rate(top, flown)
        _rate_against_field(split, flown)
        _field(below, flown)
        label_time(below, flown)
    return figure


def _modes(axes: Axes, flown: Flown) -> None:
    """A ribbon of the modes, with their names where there is room; the others are named above."""
    edge, unit = time_edges(flown), time_of(flown)[1]
    narrow = {}
    for a, b, name in flown.mode_spans():
        called, colour = _MODE_COLOURS.get(name, ("white", "white"))
        axes.axvspan(edge[a], edge[b], facecolor=colour, edgecolor="white", linewidth=1.0)
        if edge[b] - edge[a] > 0.009 * len(name) * edge[-1]:
            axes.text((edge[a] + edge[b]) / 2, 0.5, name, ha="center", va="center", fontsize=8)
        else:
            narrow[name] = f"{called}, unlabelled: {name}, until {edge[b]:.1f} {unit}"
    axes.set_yticks([])
    axes.set_ylim(0, 1)
    axes.grid(visible=False)
    axes.tick_params(axis="x", length=0)
    for spine in axes.spines.values():
        spine.set_visible(False)
    axes.set_title("Mode" + (f" ({'; '.join(narrow.values())})" if narrow else ""))


def _rate(axes: Axes, flown: Flown) -> None:
    time, _ = time_of(flown)
    bins = Bins(flown.cycles)
    at = bins.mean(time)
    estimate = flown.estimate_deg_s
    if np.isfinite(estimate).any():
        low, high = bins.least(estimate), bins.greatest(estimate)
        axes.fill_between(
            at, np.maximum(low, 1e-3), high, color=ORANGE, alpha=0.45, linewidth=0, label="estimate on board"
        )
    axes.plot(at, bins.mean(flown.record.true_rate_deg_s), color=INK, label="true ‖ω‖")
    rate_axis(axes, flown.scaling.mission.control)
    axes.set_ylabel("‖ω‖ [°/s]")
    _mark_moments(axes, flown)
    axes.set_title("Rate")
    legend_above(axes, 4)


def rate_axis(axes: Axes, control: Control) -> None:
    """A logarithmic axis of rates, °/s, with both thresholds of the settled decision."""
    for value, label, colour, pattern in (
        (control.wake_deg_s, "wakes above", GREY, (0, (1, 1.5))),
        (control.settled_deg_s, "slow up to", GREEN, (0, (5, 2))),
    ):
        axes.axhline(value, color=colour, linewidth=1, linestyle=pattern, label=f"{label} {value:g} °/s")
    axes.set_yscale("log")
    axes.yaxis.set_major_locator(LogLocator(subs=(1, 2, 5)))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())


def _mark_moments(axes: Axes, flown: Flown) -> None:
    """Vertical lines at the moments a reviewer asks for, with their times."""
    time, unit = time_of(flown)
    # Below the curve before it is slow, above it afterwards: there is nothing there. Each line ends short of
    # the other's label, whichever comes first and however close they are.
    moments = (
        (flown.slow_at, f"true ‖ω‖ first below {flown.slow_deg_s:g} °/s", 0.07, (0.0, 0.86)),
        (flown.settled_at, "settled: handover", 0.93, (0.14, 1.0)),
    )
    for index, text, height, reach in moments:
        if index is not None:
            late = time[index] > 0.3 * time[-1]
            axes.axvline(time[index], *reach, color=INK, linewidth=0.8, linestyle=(0, (2, 2)))
            axes.annotate(
                f"{text}, {time[index]:.1f} {unit}",
                (time[index], height),
                xycoords=axes.get_xaxis_transform(),
                xytext=(-5 if late else 5, 0),
                textcoords="offset points",
                ha="right" if late else "left",
                va="center",
                fontsize=8,
                bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.0},
            )


def _rate_against_field(axes: Axes, flown: Flown) -> None:
    time, _ = time_of(flown)
    bins = Bins(flown.cycles)
    along, across = _along_and_across(flown)
    at = bins.mean(time)
    for values, colour, pattern, label in (
        (across, BLUE, "-", "across the field: what the coils can damp now"),
        (np.abs(along), VERMILLION, (0, (5, 1.5)), "along the field: out of reach until the field turns"),
    ):
        axes.fill_between(
            at, bins.least(values), bins.greatest(values), color=colour, alpha=0.25, linewidth=0
        )
        axes.plot(at, bins.mean(values), color=colour, linestyle=pattern, label=label)
    axes.set_ylim(bottom=0)
    axes.set_ylabel("[°/s]")
    axes.set_title("True rate against the field")
    legend_above(axes, 2)


def _along_and_across(flown: Flown) -> tuple[np.ndarray, np.ndarray]:
    """True rate along the true field, signed, and across it, (cycles,), °/s."""
    field = flown.record.field_t
    direction = field / np.sqrt((field**2).sum(axis=1))[:, None]
    along = (flown.record.rate_rad_s * direction).sum(axis=1)
    across = np.sqrt(((flown.record.rate_rad_s - along[:, None] * direction) ** 2).sum(axis=1))
    return np.degrees(along), np.degrees(across)


def _field(axes: Axes, flown: Flown) -> None:
    time, _ = time_of(flown)
    bins = Bins(flown.cycles)
    strength = np.sqrt((flown.record.field_t**2).sum(axis=1)) * 1e6
    control = flown.scaling.mission.control
    axes.plot(bins.mean(time), bins.mean(strength), color=INK, label="true ‖B‖")
    for value, end in ((control.field_min_ut, "least"), (control.field_max_ut, "greatest")):
        axes.axhline(
            value, color=GREY, linewidth=1, linestyle=(0, (1, 1.5)), label=f"{end} plausible, {value:.1f} µT"
        )
    axes.set_ylim(0, control.field_max_ut * 1.1)
    axes.set_ylabel("‖B‖ [µT]")
    axes.set_title("Field")
    legend_above(axes, 3)
