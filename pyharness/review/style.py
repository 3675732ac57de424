"""How all figures look, and how they become PNG or SVG: same inputs, same bytes.

Colours follow the Okabe–Ito set, which colour-blind people can tell apart; lines also differ in pattern.
"""

from __future__ import annotations

import io
import re
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any
from xml.etree import ElementTree

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.style import context

INK, GREY, PALE = "#222222", "#777777", "#d8d8d8"
BLUE, VERMILLION, GREEN, ORANGE, SKY, PURPLE = (
    "#0072b2",
    "#d55e00",
    "#007a5a",
    "#e69f00",
    "#56b4e9",
    "#a0407a",
)

AXIS_STYLE = (
    {"color": BLUE, "linestyle": "-"},
    {"color": VERMILLION, "linestyle": (0, (5, 1.5))},
    {"color": GREEN, "linestyle": (0, (6, 1.5, 1.2, 1.5))},
)
"""Line style of body axis or coil x, y, z, the same in every figure."""

WIDTH_IN = 9.6

_STYLE: dict[str, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans", "Verdana", "Arial", "sans-serif"],
    "font.size": 8.5,
    "axes.titlesize": 9,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.labelsize": 8.5,
    "axes.edgecolor": GREY,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": "#e6e6e6",
    "grid.linewidth": 0.6,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 8,
    "ytick.labelsize": 8,
    "legend.fontsize": 8,
    "legend.frameon": False,
    "legend.handlelength": 2.6,
    "lines.linewidth": 1.2,
    "figure.titlesize": 10.5,
    "figure.titleweight": "bold",
    "text.color": INK,
    "text.parse_math": False,  # a mission may have a $ in its name
    "svg.fonttype": "none",
    "svg.hashsalt": "slackwater",
    "savefig.dpi": 150,
}


@contextmanager
def house_style() -> Iterator[None]:
    """The settings for drawing and saving; whatever holds outside is left alone and has no influence."""
    with context(["default", _STYLE]):
        yield


def new_figure(height_in: float, title: str) -> Figure:
    """An empty figure with a title, left-aligned."""
    figure = Figure(figsize=(WIDTH_IN, height_in), layout="constrained")
    figure.suptitle(title, x=0.01, ha="left")
    return figure


def legend_above(axes: Axes, columns: int) -> None:
    """The legend on the right above the axes, on the line of their title, where it hides nothing."""
    axes.legend(
        loc="lower right", bbox_to_anchor=(1.0, 0.985), ncols=columns, borderaxespad=0.0, columnspacing=1.4
    )


_METADATA = {"svg": dict.fromkeys(("Date", "Creator", "Format", "Type")), "png": {"Software": None}}


def save(figure: Figure, target: Any, kind: str) -> None:
    """Write a figure as "svg" or "png" to a path or binary file, without date or program in its metadata."""
    with house_style():
        figure.savefig(target, format=kind, metadata=_METADATA[kind])


def inline_svg(figure: Figure, name: str, label: str) -> str:
    """The figure as an <svg> element for HTML: no prolog, scaled by the page, ids and styles its own.

    `name` goes before every id, so that several figures can stand in one page.
    """
    buffer = io.BytesIO()
    save(figure, buffer, "svg")
    root = ElementTree.fromstring(buffer.getvalue())
    for element in root.iter():
        element.tag = _local(element.tag)
        element.attrib = {
            _local(key): _renamed(_local(key), value, name) for key, value in element.attrib.items()
        }
        if element.tag == "style":
            element.text = (element.text or "").replace("*{", f"#{name} *{{")
    root.attrib = {"id": name, "viewBox": root.attrib["viewBox"], "role": "img", "aria-label": label}
    return ElementTree.tostring(root, encoding="unicode", short_empty_elements=False)


_LONG_NUMBER = re.compile(r"-?\d+\.\d{3,}")
"""In a path: hundredths of a point are finer than any screen or printer."""


def _local(name: str) -> str:
    return name.rpartition("}")[2]


def _renamed(key: str, value: str, name: str) -> str:
    if key == "id":
        return f"{name}-{value}"
    if key == "d":
        return _LONG_NUMBER.sub(lambda found: f"{float(found[0]):.2f}", value)
    if key == "href":
        return value.replace("#", f"#{name}-", 1)
    return value.replace("url(#", f"url(#{name}-")
