"""Figures of a whole flight for the reviewer: rates, dipole, duty, samples, distance from the truth.

Each function takes a `Flown` and returns a matplotlib Figure that can stand alone. Flights of thousands of cycles are
drawn as bands from the smallest to the largest value of a few hundred runs of cycles, which hides nothing that stands out.
"""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from pyharness.mission import AXES
from pyharness.review.bins import Bins
from pyharness.review.checks import DETUMBLED_DEG_S
from pyharness.review.flown import Flown, first
from pyharness.review.style import (
    AXIS_STYLE, BLUE, GREEN, GREY, INK, ORANGE, PALE, PURPLE, SKY, VERMILLION, house_style, legend_above, new_figure,
)  # fmt: skip
from pyharness.review.wording import percent

_MODE_COLOURS = {
    "hold-off": "#e4e4e4", "damping": "#d3e6f2", "settled": "#cfe8de",
    "safe": "#f6d5c4", "inhibit": "#f4e6c2", "bench": "#e8d3e2",
}  # fmt: skip
_MINUTES_FROM_S = 600.0


def rates_figure(flown: Flown) -> Figure:
    """True rate and estimate with thresholds and modes, the rate along and across the field, and the field."""
    with house_style():
        figure = new_figure(7.2, _title(flown, "rates and field"))
        modes, top, split, below = figure.subplots(4, 1, sharex=True, height_ratios=(0.28, 3.2, 2, 1.5))
        _modes(modes, flown)
        _rate(top, flown)
        _rate_against_field(split, flown)
        _field(below, flown)
        _label_time(below, flown)
    return figure


def _rate(axes: Axes, flown: Flown) -> None:
    time, _ = _time(flown)
    bins = Bins(flown.cycles)
    at = bins.mean(time)
    estimate = flown.estimate_deg_s
    if np.isfinite(estimate).any():
        low, high = bins.least(estimate), bins.greatest(estimate)
        axes.fill_between(at, np.maximum(low, 1e-3), high, color=ORANGE, alpha=0.45, linewidth=0, label="estimate on board")
    axes.plot(at, bins.mean(flown.record.true_rate_deg_s), color=INK, label="true ‖ω‖")
    control = flown.scaling.mission.control
    thresholds = [
        (control.wake_deg_s, "wakes above", GREY, (0, (1, 1.5))),
        (control.settled_deg_s, "slow up to", GREEN, (0, (5, 2))),
    ]
    if control.settled_deg_s != DETUMBLED_DEG_S:
        thresholds.append((DETUMBLED_DEG_S, "goal below", BLUE, (0, (8, 2, 1, 2))))
    for value, label, colour, pattern in thresholds:
        axes.axhline(value, color=colour, linewidth=1, linestyle=pattern, label=f"{label} {value:g} °/s")
    axes.set_yscale("log")
    axes.yaxis.set_major_locator(LogLocator(subs=(1, 2, 5)))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.set_ylabel("‖ω‖ [°/s]")
    _mark_moments(axes, flown)
    axes.set_title("Rate")
    legend_above(axes, 5)


def _mark_moments(axes: Axes, flown: Flown) -> None:
    """Vertical lines at the moments a reviewer asks for, with their times."""
    time, unit = _time(flown)
    slow = first(flown.record.true_rate_deg_s < DETUMBLED_DEG_S)
    # Below the curve before it is slow, above it afterwards: there is nothing there.
    moments = ((slow, f"true ‖ω‖ first below {DETUMBLED_DEG_S:g} °/s", 0.07), (flown.settled_at, "settled: handover", 0.93))
    for index, text, height in moments:
        if index is not None:
            late = time[index] > 0.3 * time[-1]
            axes.axvline(time[index], color=INK, linewidth=0.8, linestyle=(0, (2, 2)))
            axes.annotate(
                f"{text}, {time[index]:.1f} {unit}", (time[index], height), xycoords=axes.get_xaxis_transform(),
                xytext=(-5 if late else 5, 0), textcoords="offset points", ha="right" if late else "left", va="center", fontsize=8,
                bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.0},
            )  # fmt: skip


def _rate_against_field(axes: Axes, flown: Flown) -> None:
    time, _ = _time(flown)
    bins = Bins(flown.cycles)
    along, across = _along_and_across(flown)
    at = bins.mean(time)
    for values, colour, pattern, label in (
        (across, BLUE, "-", "across the field: what the coils can damp now"),
        (np.abs(along), VERMILLION, (0, (5, 1.5)), "along the field: out of reach until the field turns"),
    ):
        axes.fill_between(at, bins.least(values), bins.greatest(values), color=colour, alpha=0.25, linewidth=0)
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
    time, _ = _time(flown)
    bins = Bins(flown.cycles)
    strength = np.sqrt((flown.record.field_t**2).sum(axis=1)) * 1e6
    control = flown.scaling.mission.control
    axes.plot(bins.mean(time), bins.mean(strength), color=INK, label="true ‖B‖")
    for value, end in ((control.field_min_ut, "least"), (control.field_max_ut, "greatest")):
        axes.axhline(value, color=GREY, linewidth=1, linestyle=(0, (1, 1.5)), label=f"{end} plausible, {value:.1f} µT")
    axes.set_ylim(0, control.field_max_ut * 1.1)
    axes.set_ylabel("‖B‖ [µT]")
    axes.set_title("Field")
    legend_above(axes, 3)


def dipole_figure(flown: Flown) -> Figure:
    """Mean dipole per coil, commanded and applied, over the flight and, cycle by cycle, around the first saturation."""
    with house_style():
        figure = new_figure(8.2, _title(flown, "mean dipole over the cycle, per coil"))
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
            grid[0, column].legend(loc="lower left", bbox_to_anchor=(-0.02, 0.985), ncols=3, borderaxespad=0.1, columnspacing=1.2)
        _label_time(grid[5, 0], flown)
        grid[5, 1].set_xlabel("cycle")
    return figure


def _dipole_flight(axes: Axes, flown: Flown, axis: int) -> None:
    time, _ = _time(flown)
    bins = Bins(flown.cycles)
    at = bins.mean(time)
    asked, made = flown.commanded_a_m2[:, axis] * 1e3, flown.applied_a_m2[:, axis] * 1e3
    axes.fill_between(at, bins.least(asked), bins.greatest(asked), color=SKY, alpha=0.45, linewidth=0, label="commanded")
    axes.plot(at, bins.greatest(made), color=BLUE, linewidth=0.9, label="applied, extremes")
    axes.plot(at, bins.least(made), color=BLUE, linewidth=0.9)
    _limits(axes, flown, axis, "limit")
    share = percent(flown.saturated[:, axis].mean())
    axes.text(0.995, 0.05, f"saturated in {share} of all cycles", transform=axes.transAxes, ha="right", va="center", fontsize=8)


def _limits(axes: Axes, flown: Flown, axis: int, label: str) -> None:
    limit = flown.scaling.dipole_a_m2[axis] * 1e3
    for sign in (1, -1):
        axes.axhline(sign * limit, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label=label if sign > 0 else None)
    axes.set_ylim(-1.3 * limit, 1.3 * limit)


def _saturation_strip(axes: Axes, flown: Flown, axis: int) -> None:
    """Share of saturated cycles as a filled area from 0 to 1."""
    time, _ = _time(flown)
    bins = Bins(flown.cycles)
    share = bins.mean(flown.saturated[:, axis])
    axes.fill_between(bins.mean(time), 0, share, step="mid", color=ORANGE, linewidth=0)
    axes.set_ylim(0, 1.02)
    axes.set_yticks([0, 1], ["0", "1"])
    axes.grid(visible=False)
    axes.set_ylabel("sat.", rotation=0, ha="right", va="center")


_CLOSE_UP_CYCLES = 60


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
    axes.plot(cycles[saturated], made[saturated], "v", color=VERMILLION, markersize=3.2, linestyle="none", label="saturated")
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
        figure = new_figure(4.4, _title(flown, "duty and saturation"))
        top, below = figure.subplots(2, 1, sharex=True)
        time, _ = _time(flown)
        bins = Bins(flown.cycles, 120)
        at = bins.mean(time)
        timeline = flown.scaling.timeline
        duty, saturated = bins.mean(flown.duty) * 100, bins.mean(flown.saturated) * 100
        for axis, name in enumerate(AXES):
            top.plot(at, duty[:, axis], label=f"coil {name}, mean {percent(flown.duty[:, axis].mean())}", **AXIS_STYLE[axis])
            below.plot(at, saturated[:, axis], label=f"axis {name}, {percent(flown.saturated[:, axis].mean())} of all", **AXIS_STYLE[axis])
        longest = timeline.drive_window_us / timeline.period_us * 100
        top.axhline(longest, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label=f"drive window, {longest:g} %")
        top.set_ylim(0, longest * 1.08)
        top.set_ylabel("coil on [% of cycle]")
        top.set_title("Duty")
        legend_above(top, 4)
        below.set_ylim(0, 104)
        below.set_ylabel("cycles [%]")
        below.set_title("Saturated cycles")
        legend_above(below, 3)
        _label_time(below, flown)
    return figure


_REJECTING = (
    "SAMPLE_MISSING", "MAG_RANGE", "FIELD_IMPLAUSIBLE", "SAMPLE_OFF_TIME", "SWITCH_OFF_UNSTAMPED", "BLANKED",
)  # fmt: skip
_WITHOUT_DERIVATIVE = ("NO_PREVIOUS", "INTERVAL_SHORT", "INTERVAL_LONG")
_OTHER_BITS = (
    "DERIVATIVE_CLAMPED", "GYRO_MISSING", "GYRO_RANGE", "FELL_BACK", "ESTIMATE_FELL_BACK", "COMMAND_REFUSED",
    "STATE_RESTARTED", "CONFIG_CORRUPT",
)  # fmt: skip


def samples_figure(flown: Flown) -> Figure:
    """When field samples were trusted, and when not and why; other faults, where there are any."""
    others = [name for name in _OTHER_BITS if flown.bit(name).any()]
    rows = [
        ("sample trusted", flown.trusted, GREEN),
        ("sample rejected", ~flown.trusted, VERMILLION),
        *((f"rejected: {_words(name)}", flown.bit(name), ORANGE) for name in _REJECTING),
        *((f"no derivative: {_words(name)}", flown.bit(name), SKY) for name in _WITHOUT_DERIVATIVE),
        *((_words(name), flown.bit(name), PURPLE) for name in others),
    ]
    with house_style():
        figure = new_figure(1.3 + 0.25 * len(rows), _title(flown, "samples and faults"))
        axes = figure.subplots()
        edge = _time_edges(flown)
        width = edge[-1] - edge[0]
        bins = Bins(flown.cycles, 600)
        for row, (_, flags, colour) in enumerate(rows):
            spans = [(edge[a], edge[b] - edge[a]) for a, b in bins.spans(flags)]
            axes.axhline(row, color=PALE, linewidth=0.6, zorder=0)
            axes.broken_barh(spans, (row - 0.32, 0.64), facecolor=colour, edgecolor=colour, linewidth=0.6)
            axes.text(edge[-1] + 0.012 * width, row, f"{flags.sum()}", va="center", ha="left", fontsize=8)
        axes.text(edge[-1] + 0.012 * width, -0.85, "cycles", va="center", ha="left", fontsize=8)
        axes.set_yticks(range(len(rows)), [label for label, _, _ in rows])
        axes.set_ylim(len(rows) - 0.5, -0.6)
        axes.grid(visible=False)
        axes.tick_params(axis="y", length=0)
        _label_time(axes, flown)
    return figure


def error_figure(flown: Flown) -> Figure:
    """Distance of the controller from the truth against its bound, and the short pulses dropped."""
    comparison = flown.comparison
    with house_style():
        figure = new_figure(6.6, _title(flown, "distance of the controller from the truth"))
        command, ticks, used, dropped = figure.subplots(4, 1, sharex=True, height_ratios=(2.2, 2.2, 1.7, 0.9))
        time, _ = _time(flown)
        bins = Bins(flown.cycles)
        at = bins.mean(time)
        to_ma_m2 = comparison.dipole_a_m2 / 32768 * 1e3
        error, bound = comparison.command_error * to_ma_m2, comparison.command_bound * to_ma_m2
        _error_against_bound(command, at, bins, error, bound)
        command.set_ylabel("[mA m²]")
        command.set_title("Mean dipole, largest of the three axes")
        legend_above(command, 3)
        _error_against_bound(ticks, at, bins, comparison.ticks_error, comparison.ticks_bound)
        ticks.set_ylabel("[ticks]")
        ticks.set_title(f"Pulse width, largest of the three coils (1 tick = {flown.scaling.timeline.tick_us:g} µs)")
        for values, limits, colour, pattern, label in (
            (comparison.command_error, comparison.command_bound, BLUE, "-", f"mean dipole, largest {percent(comparison.used)}"),
            (comparison.ticks_error, comparison.ticks_bound, VERMILLION, (0, (5, 1.5)), f"pulse width, largest {percent(comparison.used_ticks)}"),
        ):
            share = values / np.where(limits > 0, limits, np.inf)
            used.plot(at, bins.greatest(share.max(axis=1)) * 100, color=colour, linestyle=pattern, linewidth=0.9, label=label)
        used.axhline(100, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label="the bound")
        used.set_ylim(0, 100 * max(1.15, 1.1 * max(comparison.used, comparison.used_ticks)))
        used.set_ylabel("used [%]")
        used.set_title("Share of the bound used")
        legend_above(used, 3)
        _dropped(dropped, flown, time)
        _label_time(dropped, flown)
    return figure


def _error_against_bound(axes: Axes, at: np.ndarray, bins: Bins, error: np.ndarray, bound: np.ndarray) -> None:
    largest = bound.max(axis=1)
    axes.fill_between(at, bins.least(largest), bins.greatest(largest), color=PALE, linewidth=0)
    axes.plot(at, bins.greatest(largest), color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label="bound (band: its least to its greatest)")
    axes.plot(at, bins.greatest(error.max(axis=1)), color=BLUE, linewidth=0.9, label="largest error")
    axes.set_ylim(0, max(largest.max(initial=0.0), error.max(initial=0.0)) * 1.1 or 1.0)


def _dropped(axes: Axes, flown: Flown, time: np.ndarray) -> None:
    """A row of ticks per coil: pulses shorter than the shortest allowed, which are left out and so outside the bound."""
    for axis, name in enumerate(AXES):
        flags = flown.comparison.dropped[:, axis]
        starts = [a for a, _ in Bins(flown.cycles, 600).spans(flags)]
        axes.plot(time[starts], np.full(len(starts), axis), "|", color=AXIS_STYLE[axis]["color"], markersize=6, markeredgewidth=1.1)
        axes.text(1.005, axis, f"{flags.sum()}", transform=axes.get_yaxis_transform(), va="center", fontsize=8)
    axes.set_yticks(range(3), AXES)
    axes.set_ylim(2.6, -0.6)
    axes.grid(visible=False)
    axes.set_title(f"Pulses dropped, shorter than {flown.scaling.timeline.shortest_pulse_us / 1e3:g} ms (count on the right)")


def _title(flown: Flown, what: str) -> str:
    return f"{flown.scaling.mission.name} · {flown.title}: {what}"


def _words(bit: str) -> str:
    return bit.lower().replace("_", " ").replace("switch off", "switch-off")


def _time(flown: Flown) -> tuple[np.ndarray, str]:
    """Time of each cycle for the axis, and its unit."""
    time = flown.record.time_s
    return (time / 60.0, "min") if time[-1] >= _MINUTES_FROM_S else (time, "s")


def _label_time(axes: Axes, flown: Flown) -> None:
    edge = _time_edges(flown)
    axes.set_xlabel(f"time since the first sample [{_time(flown)[1]}]")
    axes.set_xlim(edge[0], edge[-1])


def _time_edges(flown: Flown) -> np.ndarray:
    """Start of each cycle's stretch of the time axis, and the end of the last, (cycles + 1,)."""
    time, unit = _time(flown)
    return np.append(time, time[-1] + flown.scaling.period_s / (60.0 if unit == "min" else 1.0))


def _modes(axes: Axes, flown: Flown) -> None:
    """A ribbon of the modes, with their names where there is room; the others follow on the right."""
    edge = _time_edges(flown)
    for a, b, name in flown.mode_spans():
        axes.axvspan(edge[a], edge[b], facecolor=_MODE_COLOURS.get(name, "white"), edgecolor="white", linewidth=1.0)
        wide = edge[b] - edge[a] > 0.08 * edge[-1]
        if wide:
            axes.text((edge[a] + edge[b]) / 2, 0.5, name, ha="center", va="center", fontsize=8)
    axes.set_yticks([])
    axes.set_ylim(0, 1)
    axes.grid(visible=False)
    axes.tick_params(axis="x", length=0)
    for spine in axes.spines.values():
        spine.set_visible(False)
    narrow = [f"{name} until {edge[b]:.1f}" for a, b, name in flown.mode_spans() if edge[b] - edge[a] <= 0.08 * edge[-1]]
    axes.set_title("Mode" + (f" (without a name: {', '.join(dict.fromkeys(narrow))} {_time(flown)[1]})" if narrow else ""))
