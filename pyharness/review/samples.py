"""Which samples were used and which not, and the faults, over a flight."""

from __future__ import annotations

from matplotlib.figure import Figure

from pyharness.review.bins import Bins
from pyharness.review.flown import Flown
from pyharness.review.style import GREEN, ORANGE, PALE, PURPLE, SKY, VERMILLION, house_style, new_figure
from pyharness.review.time_axis import label_time, time_edges, title_of

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
        figure = new_figure(1.3 + 0.25 * len(rows), title_of(flown, "samples and faults"))
        axes = figure.subplots()
        edge = time_edges(flown)
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
        label_time(axes, flown)
    return figure


def _words(bit: str) -> str:
    return bit.lower().replace("_", " ").replace("switch off", "switch-off")
