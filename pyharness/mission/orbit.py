"""What the mission file needs to know of its orbit: how long it takes, and between which radii it lies."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

from sgp4.api import SGP4_ERRORS, Satrec
from sgp4.io import compute_checksum

from pyharness.mission.schema import BY_PATH
from pyharness.mission.wording import rounded, shown

MU_KM3_S2 = 398600.4418
EQUATORIAL_RADIUS_KM = 6378.137
"""Of the Earth, like its gravitational parameter above: WGS-84 (from memory)."""

FIELD_RADIUS_KM = 6371.2
FIELD_EQUATOR_UT = 29.73337
"""Field of the centred dipole at its equator and the radius above (IGRF-14, epoch 2025)."""

_ANGLE = r"(?:[0-9]{3}| [0-9]{2}|  [0-9])\.[0-9]{4}"
_POWER = r"[ +-][0-9]{5}[ +-][0-9]"
_LINES = (
    re.compile(
        r"1 [0-9A-Z][0-9]{4}[A-Z ] [ -~]{8} (?P<year>[0-9]{2})(?P<day>[0-9]{3}\.[0-9]{8}) [ +-]\.[0-9]{8} "
        rf"{_POWER} {_POWER} [ 0-9] [ 0-9]{{4}}[0-9]"
    ),
    re.compile(
        rf"2 [0-9A-Z][0-9]{{4}} {_ANGLE} {_ANGLE} [0-9]{{7}} {_ANGLE} {_ANGLE} "
        r"[ 0-9][0-9]\.[0-9]{8}[ 0-9]{5}[0-9]"
    ),
)
"""Column by column what two-line elements consist of."""


@dataclass(frozen=True)
class Extent:
    """Period, and least and greatest distance from the centre of the Earth."""

    period_s: float
    lowest_km: float
    highest_km: float


def circular_extent(altitude_km: float) -> Extent:
    """A circular orbit: T = 2π √(a³/μ)."""
    radius = EQUATORIAL_RADIUS_KM + altitude_km
    return Extent(2.0 * math.pi * math.sqrt(radius * radius * radius / MU_KM3_S2), radius, radius)


def elements_extent(lines: tuple[str, str]) -> Extent:
    """The orbit of legal two-line elements at their epoch."""
    satellite = Satrec.twoline2rv(*lines)
    return Extent(
        2.0 * math.pi / satellite.no_kozai * 60.0,
        (1.0 + satellite.altp) * satellite.radiusearthkm,
        (1.0 + satellite.alta) * satellite.radiusearthkm,
    )


def elements_problems(lines: tuple[str, str], path: str) -> list[str]:
    """What keeps two-line elements from being flown; `path` is the name of their key."""
    faults = (_line_fault(line, pattern) for line, pattern in zip(lines, _LINES, strict=True))
    if problems := [f"{path}[{i}]: {fault}" for i, fault in enumerate(faults) if fault]:
        return problems
    if lines[0][2:7] != lines[1][2:7]:
        told = f"{shown(lines[0][2:7])} and {shown(lines[1][2:7])}"
        return [f"{path}: the lines are of different satellites, {told}"]
    legal = BY_PATH["orbit.epoch_utc"].limits
    if (epoch := _epoch(lines[0])) not in legal:
        return [f"{path}[0]: epoch {shown(epoch)}, must be in {legal}"]
    satellite = Satrec.twoline2rv(*lines)
    error, _, _ = satellite.sgp4(satellite.jdsatepoch, satellite.jdsatepochF)
    if error:
        reason = "it meets the Earth" if error == 6 else SGP4_ERRORS[error]
        return [f"{path}: the orbit cannot be propagated: {reason} (SGP4 error {error})"]
    return _height_problems(elements_extent(lines), path)


def equatorial_field_ut(radius_km: float) -> float:
    """Centred dipole above its equator: B0 (a/r)³, µT."""
    ratio = FIELD_RADIUS_KM / radius_km
    return FIELD_EQUATOR_UT * ratio * ratio * ratio


def field_bounds_ut(extent: Extent) -> tuple[float, float]:
    """Least and greatest plausible field on the orbit, µT.

    Those of the centred dipole, at its poles twice that at its equator, with margins for the real field and
    the sensor. Rounded to 0.1 µT.
    """
    least = equatorial_field_ut(extent.highest_km)
    greatest = 2.0 * equatorial_field_ut(extent.lowest_km)
    return round(0.6 * least, 1), round(1.35 * greatest, 1)


def _line_fault(line: str, pattern: re.Pattern[str]) -> str:
    if len(line) != 69:
        return f"has {len(line)} characters, must have 69"
    if not pattern.fullmatch(line):
        return f"{shown(line)} does not have the columns of line {pattern.pattern[0]} of two-line elements"
    if int(line[68]) != compute_checksum(line):
        return f"checksum {line[68]} in the last column, must be {compute_checksum(line)} as the line stands"
    return ""


def _epoch(line: str) -> datetime:
    """Epoch of the first line; two-digit years from 57 on are of the twentieth century."""
    found = _LINES[0].fullmatch(line)
    year = int(found["year"])
    start = datetime(1900 + year if year >= 57 else 2000 + year, 1, 1, tzinfo=UTC)
    return start + timedelta(days=float(found["day"]) - 1.0)


def _height_problems(extent: Extent, path: str) -> list[str]:
    legal = BY_PATH["orbit.altitude_km"].limits
    heights = {"lowest": extent.lowest_km, "highest": extent.highest_km}
    return [
        f"{path}: {name} altitude {rounded(radius - EQUATORIAL_RADIUS_KM, 'km')}, must be in {legal}"
        for name, radius in heights.items()
        if radius - EQUATORIAL_RADIUS_KM not in legal
    ]
