"""Orbits from either kind of key, against published and derived figures."""

from __future__ import annotations

from pathlib import Path

import pytest
from sgp4.io import fix_checksum

from pyharness.mission import load_mission
from pyharness.mission.orbit import (
    FIELD_RADIUS_KM,
    Extent,
    circular_extent,
    elements_extent,
    equatorial_field_ut,
    field_bounds_ut,
)

BASE = Path(__file__).with_name("base.toml")

# An invented satellite: 15.05 turns a day, nearly circular, 97.6° inclination.
LINES = (
    fix_checksum("1 99999U 27001A   27073.39583333  .00000000  00000-0  10000-4 0  9990"),
    fix_checksum("2 99999  97.6000  40.0000 0010000  90.0000 270.0000 15.05000000    10"),
)
CIRCULAR = ("epoch_utc", "altitude_km", "inclination_deg", "node_deg", "argument_of_latitude_deg")


def elements(*lines: str) -> dict[str, object]:
    """Overrides that put two-line elements in the place of the file's circular orbit."""
    return {"orbit": {**dict.fromkeys(CIRCULAR), "two_line_elements": list(lines)}}


@pytest.mark.parametrize(("altitude_km", "period_s"), [(400, 5553.62), (550, 5738.99), (700, 5926.38)])
def test_period_of_a_circular_orbit(altitude_km, period_s):
    # Derived from μ = 398600.4418 km³/s², Re = 6378.137 km, T = 2π √(a³/μ) as in any text on astrodynamics.
    assert circular_extent(altitude_km).period_s == pytest.approx(period_s, abs=0.005)


@pytest.mark.parametrize(
    ("altitude_km", "equator_nt", "pole_nt"), [(400, 24769, 49538), (550, 23193, 46387), (700, 21748, 43497)]
)
def test_field_of_the_centred_dipole(altitude_km, equator_nt, pole_nt):
    # B0 = 29733.37 nT at a = 6371.2 km (degree-1 terms of IGRF-14, IAGA 2024; formula of Wertz (ed.),
    # Spacecraft Attitude Determination and Control, 1978, App. H, from memory). Altitudes are above a here.
    radius_km = FIELD_RADIUS_KM + altitude_km
    assert 1e3 * equatorial_field_ut(radius_km) == pytest.approx(equator_nt, abs=0.6)
    least, greatest = field_bounds_ut(Extent(0.0, radius_km, radius_km))
    assert least == pytest.approx(0.6e-3 * equator_nt, abs=0.051)
    assert greatest == pytest.approx(1.35e-3 * pole_nt, abs=0.051)


def test_an_eccentric_orbit_is_bounded_by_its_ends():
    least, greatest = field_bounds_ut(Extent(0.0, 6600.0, 8300.0))
    assert least == field_bounds_ut(Extent(0.0, 8300.0, 8300.0))[0]
    assert greatest == field_bounds_ut(Extent(0.0, 6600.0, 6600.0))[1]


def test_two_line_elements_load():
    mission = load_mission(BASE, elements(*LINES))
    assert mission.orbit.two_line_elements == LINES
    assert all(getattr(mission.orbit, name) is None for name in CIRCULAR)
    # A quarter of a day over 15.05 turns: 1435.2 s. The mean radius follows from Kepler's third law.
    assert mission.control.dwell_s == 1435.2
    extent = elements_extent(LINES)
    mean_km = 0.5 * (extent.lowest_km + extent.highest_km)
    assert mean_km == pytest.approx((398600.4418 * (86400 / 15.05 / 6.283185307) ** 2) ** (1 / 3), abs=10.0)
    assert extent.highest_km - extent.lowest_km == pytest.approx(2 * 0.001 * mean_km, rel=0.01)


def changed(line: int, start: int, text: str) -> tuple[str, str]:
    """The lines with columns replaced and the checksum put right."""
    lines = list(LINES)
    lines[line] = fix_checksum(lines[line][:start] + text + lines[line][start + len(text) :])
    return lines[0], lines[1]


@pytest.mark.parametrize(
    ("lines", "fragments"),
    [
        ((LINES[0], LINES[1][:68]), ["two_line_elements[1]: has 68 characters, must have 69"]),
        ((LINES[1], LINES[0]), ["[0]: ", "have the columns of line 1", "[1]: ", "columns of line 2"]),
        ((LINES[0][:68] + "x", LINES[1]), ["[0]: ", "columns of line 1"]),
        ((LINES[0], LINES[1][:67] + "3" + LINES[1][68]), ["[1]: checksum ", f"{LINES[1][68]} in the last"]),
        (changed(1, 2, "99998"), ["different satellites", '"99999"', '"99998"']),
        (changed(0, 18, "79"), ["[0]: epoch 1979-03-14T09:29:59.999712Z", "must be in [1980"]),
        (changed(0, 18, "30"), ["[0]: epoch 2030-03-14T09:29:59.999712Z", "2030-01-01T00:00:00Z)"]),
        (changed(1, 26, "9999999"), ["the orbit cannot be propagated: semilatus rectum is less than zero (SGP4 error 4)"]),
        (changed(1, 52, "00.00000000"), ["cannot be propagated: nm is less than zero (SGP4 error 2)"]),
        (changed(1, 52, " 9.00000000"), ["lowest altitude", "highest altitude", "must be in [200, 2000]"]),
        (("1 \u0663" + LINES[0][3:], LINES[1]), ["[0]: ", "columns of line 1"]),
    ],
)
def test_two_line_elements_that_cannot_be_flown(problems, lines, fragments):
    found = "\n".join(p for p in problems(elements(*lines)) if p.startswith("orbit.two_line_elements"))
    for fragment in fragments:
        assert fragment in found


def test_either_elements_or_a_circular_orbit(problems):
    (problem,) = problems({"orbit": {"two_line_elements": list(LINES), "node_deg": None}})
    assert problem.startswith("orbit.two_line_elements: excludes orbit.epoch_utc, orbit.altitude_km, ")
    assert problems({"orbit": {"node_deg": None, "altitude_km": None}}) == [
        "orbit.altitude_km: missing, must be a number in [200, 2000] km (or give orbit.two_line_elements)",
        "orbit.node_deg: missing, must be a number in [-360, 360] ° (or give orbit.two_line_elements)",
    ]
    without = load_mission(BASE, {"orbit": {"argument_of_latitude_deg": None}})
    assert without.orbit.argument_of_latitude_deg == 0.0
