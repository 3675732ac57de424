"""The figure of a replay: rate estimate, field, command, pulses, and what each cycle's status and mode say."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pyharness.mission import AXES
from pyharness.replay.replayed import Replayed
from pyharness.review.bins import Bins
from pyharness.review.rates import rate_axis
from pyharness.review.style import (
    AXIS_STYLE,
    BLUE,
    GREEN,
    GREY,
    INK,
    ORANGE,
    PALE,
    PURPLE,
    VERMILLION,
    house_style,
    legend_above,
    new_figure,
)

_MINUTES_FROM_S = 600.0


def replay_figure(replayed: Replayed) -> Figure:
    """Everything a log's reader looks for, on one time axis. Long logs are drawn as bands from smallest to largest value."""
    rows = _strip_rows(replayed)
    heights = (2.2, 1.6, 1.6, 1.6, 0.22 * len(rows))
    with house_style():
        figure = new_figure(
            sum(heights) + 1.6,
            f"{replayed.scaling.mission.name} · {replayed.log.source.name}: replay through {replayed.controller}",
        )
        rate, field, command, pulses, strips = figure.subplots(5, 1, sharex=True, height_ratios=heights)
        _rate(rate, replayed)
        _field(field, replayed)
        _per_axis(
            command,
            replayed,
            replayed.commanded_a_m2 * 1e3,
            "Command: mean dipole that the law asks for",
            "[mA m²]",
        )
        _per_axis(pulses, replayed, replayed.pulses_ms, "Pulses that leave", "[ms]")
        _strips(strips, replayed, rows)
        edge, unit = _edges(replayed)
        strips.set_xlabel(f"time since the first cycle of the log [{unit}]")
        strips.set_xlim(edge[0], edge[-1])
    return figure


def _edges(replayed: Replayed) -> tuple[np.ndarray, str]:
    """Start of each cycle on the axis and the end of the last, (rows + 1,), and the unit."""
    time = replayed.time_s
    edge = np.append(time, time[-1] + replayed.scaling.period_s)
    return (edge / 60.0, "min") if edge[-1] >= _MINUTES_FROM_S else (edge, "s")


def _rate(axes: Axes, replayed: Replayed) -> None:
    bins, edge = Bins(replayed.rows), _edges(replayed)[0]
    at, estimate = bins.mean(edge[:-1]), replayed.estimate_deg_s
    axes.plot(at, bins.greatest(estimate), color=ORANGE, label="estimate, extremes")
    axes.plot(at, np.maximum(bins.least(estimate), 1e-3), color=ORANGE, linewidth=0.7)
    rate_axis(axes, replayed.scaling.mission.control)
    axes.set_ylabel("[°/s]")
    axes.set_title("Rate estimate on board")
    legend_above(axes, 3)


def _field(axes: Axes, replayed: Replayed) -> None:
    bins, edge = Bins(replayed.rows), _edges(replayed)[0]
    at, field = bins.mean(edge[:-1]), replayed.field_ut
    axes.fill_between(
        at, bins.least(field), bins.greatest(field), color=BLUE, linewidth=1.2, label="‖B‖ measured"
    )
    rejected = np.where(replayed.trusted, np.nan, np.nan_to_num(field))
    axes.plot(
        at,
        bins.greatest(rejected),
        "x",
        color=VERMILLION,
        markersize=4,
        linestyle="none",
        label="rejected; at 0: no sample",
    )
    control = replayed.scaling.mission.control
    for value, end in ((control.field_min_ut, "least"), (control.field_max_ut, "greatest")):
        axes.axhline(
            value, color=GREY, linewidth=1, linestyle=(0, (1, 1.5)), label=f"{end} plausible, {value:.1f} µT"
        )
    axes.set_ylim(bottom=-3)
    axes.set_ylabel("[µT]")
    axes.set_title("Field")
    legend_above(axes, 4)


def _per_axis(axes: Axes, replayed: Replayed, values: np.ndarray, title: str, unit: str) -> None:
    bins, edge = Bins(replayed.rows), _edges(replayed)[0]
    at = bins.mean(edge[:-1])
    for axis, name in enumerate(AXES):
        axes.plot(at, bins.greatest(values[:, axis]), label=name, **AXIS_STYLE[axis])
        axes.plot(at, bins.least(values[:, axis]), **AXIS_STYLE[axis])
    axes.axhline(0, color=INK, linewidth=0.6)
    axes.set_ylabel(unit)
    axes.set_title(title)
    legend_above(axes, 3)


def _strip_rows(replayed: Replayed) -> list[tuple[str, np.ndarray, str]]:
    """(label, (rows,) bool, colour) of each strip: modes that occur, samples, status bits that are seen."""
    mode = replayed.outputs["mode"]
    names = {int(code): replayed.interface.mode_name(int(code)) for code in np.unique(mode)}
    return [
        *((f"mode {name}", mode == code, GREEN) for code, name in names.items()),
        ("sample rejected", ~replayed.trusted, VERMILLION),
        *(
            (name.lower().replace("_", " "), replayed.bit(number), PURPLE)
            for number, name in replayed.bits_seen()
        ),
    ]


def _strips(axes: Axes, replayed: Replayed, rows: list[tuple[str, np.ndarray, str]]) -> None:
    bins, edge = Bins(replayed.rows, 600), _edges(replayed)[0]
    for row, (_, flags, colour) in enumerate(rows):
        spans = [(edge[a], edge[b] - edge[a]) for a, b in bins.spans(flags)]
        axes.axhline(row, color=PALE, linewidth=0.6, zorder=0)
        axes.broken_barh(spans, (row - 0.32, 0.64), facecolor=colour, edgecolor=colour, linewidth=0.6)
        axes.annotate(
            f"{flags.sum()}", (1.005, row), xycoords=("axes fraction", "data"), va="center", fontsize=8
        )
    axes.set_yticks(range(len(rows)), [label for label, _, _ in rows])
    axes.set_ylim(len(rows) - 0.5, -0.6)
    axes.grid(visible=False)
    axes.tick_params(axis="y", length=0)
    axes.set_title("Mode, samples and status, with the number of cycles")
