"""The figures of a flight by name, with what to look for in each.

Each is drawn from a `Flown` by a function of its own, and can stand alone. Flights of thousands of cycles are
drawn as bands from the smallest to the largest value of some hundred runs of cycles: no peak is lost.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from matplotlib.figure import Figure

from pyharness.review.dipole import dipole_figure, duty_figure
from pyharness.review.error import error_figure
from pyharness.review.flown import Flown
from pyharness.review.magnifier import cycle_figure
from pyharness.review.rates import rates_figure
from pyharness.review.samples import samples_figure
from pyharness.review.style import save
from pyharness.whole_files import replacing


@dataclass(frozen=True)
class Plot:
    """One kind of figure."""

    name: str
    title: str
    caption: str  # what to look for; {estimate} stands for what to expect of the estimate on board
    draw: Callable[[Flown], Figure]

    def caption_of(self, flown: Flown) -> str:
        """The caption under the figure of this flight."""
        return self.caption.format(estimate=_ESTIMATE[flown.scaling.mission.control.settle_by])


_ESTIMATE = {
    "gyro": "The estimate should stay around it.",
    "field": "The estimate sees only the rate across the field: it may lie below the true rate while the "
    "spin is along the field; the dwell is there for that.",
}
"""By control.settle_by."""


PLOTS = (
    Plot(
        "rates",
        "Rates and field",
        "The true rate should fall without rising for long. {estimate} The rate along the field cannot be "
        "damped at that moment: it falls only as the field turns in the body.",
        rates_figure,
    ),
    Plot(
        "dipole",
        "Dipole, commanded and applied",
        "Applied should cover commanded while damping, and be zero in every other mode. Strips and "
        "triangles show the cycles in which the demand was beyond the limit; when the direction is kept, an "
        "axis may be reduced without being at its own limit.",
        dipole_figure,
    ),
    Plot(
        "cycle",
        "One cycle under the magnifier",
        "The tails of the last pulses must fall below one magnetometer count before the sample begins. What "
        "a core keeps of a pulse (dotted) does not decay: blanking does not help against it, and the law "
        "sees it change when a pulse changes sign.",
        cycle_figure,
    ),
    Plot(
        "duty",
        "Duty and saturation",
        "Headroom is the distance from the drive window and from 100 % saturated cycles. Duty that stays "
        "high after the rate is low is not spent on the tumble: look for noise, or for remanence that the "
        "law chases.",
        duty_figure,
    ),
    Plot(
        "samples",
        "Samples and faults",
        "Every cycle without a trusted sample is one without a pulse of the law. The first sample after a "
        "reset counts as blanked, because nothing is known of the coils yet.",
        samples_figure,
    ),
    Plot(
        "error",
        "Controller against truth",
        "The largest error must stay below the bound, which is derived from the rounding of each stage, not "
        "fitted. A pulse that is dropped because it is too short is outside the bound and has its own line.",
        error_figure,
    ),
)
"""In the order in which a reviewer reads them."""


def save_figures(flown: Flown, folder: Path, kind: str = "svg") -> list[Path]:
    """Save every figure of a flight as folder/<name>.<kind>, "svg" or "png"; returns the paths.

    Makes the folder, replaces files.
    """
    folder.mkdir(parents=True, exist_ok=True)
    paths = [folder / f"{plot.name}.{kind}" for plot in PLOTS]
    for plot, path in zip(PLOTS, paths, strict=True):
        with replacing(path) as new:
            save(plot.draw(flown), new, kind)
    return paths
