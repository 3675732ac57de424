"""The detumble in numbers: one column for each flight."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from pyharness.mission import AXES
from pyharness.review.flown import Flown
from pyharness.review.wording import percent

NEVER = "not in this flight"


def numbers(flights: Sequence[Flown]) -> list[tuple[str, list[str]]]:
    """(what, its value in each flight) in the order of the page. All flights are of one mission."""
    slow = f"{flights[0].slow_deg_s:g} °/s"
    return [(label.format(slow=slow), [value(flown) for flown in flights]) for label, value in _ROWS]


def _length(flown: Flown) -> str:
    return f"{flown.cycles} cycles, {flown.cycles * flown.scaling.period_s:.0f} s"


def _start(flown: Flown) -> str:
    axes = ", ".join(f"{v:.2f}" for v in np.degrees(flown.record.rate_rad_s[0]))
    return f"{flown.record.true_rate_deg_s[0]:.2f} °/s ({axes})"


def _slow(flown: Flown) -> str:
    index = flown.slow_at
    return NEVER if index is None else _moment(flown, index)


def _settled(flown: Flown) -> str:
    index = flown.settled_at
    return (
        NEVER
        if index is None
        else f"{_moment(flown, index)}; true ‖ω‖ then {flown.record.true_rate_deg_s[index]:.3f} °/s"
    )


def _moment(flown: Flown, index: int) -> str:
    return f"{flown.record.time_s[index]:.1f} s"


def _final(flown: Flown) -> str:
    return f"{flown.record.true_rate_deg_s[-1]:.3f} °/s"


def _saturated(flown: Flown) -> str:
    return _by_axis(flown.saturated.mean(axis=0))


def _duty(flown: Flown) -> str:
    return _by_axis(flown.duty.mean(axis=0))


def _by_axis(shares: np.ndarray) -> str:
    return ", ".join(f"{axis} {percent(share)}" for axis, share in zip(AXES, shares, strict=True))


def _headroom(flown: Flown) -> str:
    """Part of the cycles that are driven in which no axis was saturated."""
    driven = flown.driven
    if not driven.any():
        return "never driven"
    return percent((~flown.saturated[driven].any(axis=1)).mean())


def _dropped(flown: Flown) -> str:
    counts = flown.dropped.sum(axis=0)
    return ", ".join(f"{axis} {count}" for axis, count in zip(AXES, counts, strict=True))


def _rejected(flown: Flown) -> str:
    return f"{int((~flown.trusted).sum())}"


def _blanked(flown: Flown) -> str:
    return f"{int(flown.bit('BLANKED').sum())}"


def _error(flown: Flown) -> str:
    comparison = flown.comparison
    error = comparison.command_error_a_m2 * 1e3
    where = np.unravel_index(np.argmax(error), error.shape)
    bound = comparison.command_bound_a_m2[where] * 1e3
    return f"{error[where]:.3f} mA m² where {bound:.3f} are allowed (axis {AXES[where[1]]}, cycle {where[0]})"


def _ticks_error(flown: Flown) -> str:
    comparison = flown.comparison
    where = np.unravel_index(np.argmax(comparison.ticks_error), comparison.ticks_error.shape)
    return f"{comparison.ticks_error[where]:.2f} ticks where {comparison.ticks_bound[where]:.2f} are allowed"


def _used(flown: Flown) -> str:
    comparison = flown.comparison
    return f"{percent(comparison.used)} of the dipole's, {percent(comparison.used_ticks)} of the pulse's"


_ROWS: tuple[tuple[str, Callable[[Flown], str]], ...] = (
    ("Length of the flight", _length),
    ("True ‖ω‖ at the start (x, y, z)", _start),
    ("True ‖ω‖ first below {slow}", _slow),
    ("Settled (handover flag)", _settled),
    ("True ‖ω‖ at the end", _final),
    ("Cycles saturated, of all", _saturated),
    ("Damping cycles without any saturation", _headroom),
    ("Mean duty", _duty),
    ("Samples rejected", _rejected),
    ("of these blanked (also the first after a reset)", _blanked),
    ("Short pulses dropped while damping", _dropped),
    ("Largest error of the mean dipole against truth", _error),
    ("Largest error of a pulse width against truth", _ticks_error),
    ("Largest share of the bound used", _used),
)
