"""Geomagnetic field against published models and points, and its path through axes and interpolation."""

import math
from datetime import UTC, datetime
from functools import partial

import numpy as np
import ppigrf
import pytest
from pygeomag import GeoMag

from pyharness.mission.model import Orbit
from pyharness.plant import field as field_module
from pyharness.plant.field import FIELD, FLIGHT, GRADIENT, _hermite, _knots, geomagnetic_field
from pyharness.plant.orbit import EARTH_MU, EARTH_RADIUS_M, Trajectory, orbital_period

DATE = datetime(2027, 3, 14, 9, 30)
EPOCH = DATE.replace(tzinfo=UTC)
WGS84_FLATTENING = 1.0 / 298.257223563


def circular(altitude_km, inclination_deg, node_deg=40.0) -> Orbit:
    return Orbit(EPOCH, altitude_km, inclination_deg, node_deg, 0.0, None)


def test_igrf_14_coefficients():
    """IAGA, IGRF-14 (2024), epoch 2025.0: main field in nT, and the secular variation to 2030."""
    g, h = ppigrf.ppigrf.read_shc()
    now, later = datetime(2025, 1, 1), datetime(2030, 1, 1)
    terms = ((g, (1, 0), -29350.0, 12.6), (g, (1, 1), -1410.3, 10.0), (h, (1, 1), 4545.5, -21.5))
    for table, term, value, per_year in terms:
        assert table.loc[now, term] == value
        assert (table.loc[later, term] - table.loc[now, term]) / 5.0 == pytest.approx(per_year, abs=1e-9)


class PlaceOverEarth:
    """A trajectory that stands still over one geodetic place, with a sidereal angle of its own choice."""

    def __init__(self, height_km, latitude_deg, longitude_deg, sidereal_deg):
        e2 = WGS84_FLATTENING * (2.0 - WGS84_FLATTENING)
        lat, right_ascension = math.radians(latitude_deg), math.radians(longitude_deg + sidereal_deg)
        curvature = EARTH_RADIUS_M / math.sqrt(1.0 - e2 * math.sin(lat) ** 2)
        rho = (curvature + height_km * 1e3) * math.cos(lat)
        z = (curvature * (1.0 - e2) + height_km * 1e3) * math.sin(lat)
        c, s = math.cos(right_ascension), math.sin(right_ascension)
        self.position = np.array((rho * c, rho * s, z))[:, None]
        self.sidereal = math.radians(sidereal_deg)
        north, east = (-math.sin(lat) * c, -math.sin(lat) * s, math.cos(lat)), (-s, c, 0.0)
        self.north_east_down = np.array((north, east, np.cross(north, east)))

    def state(self, seconds):
        return self.position, np.zeros((3, 1))

    def sidereal_angle(self, seconds):
        return np.array([self.sidereal])


@pytest.mark.parametrize("sidereal_deg", [0.0, 77.0, 200.0])
@pytest.mark.parametrize(
    ("date", "place", "xyz", "total"),
    [
        (datetime(2025, 1, 1), (0.0, 80.0, 0.0), (6521.6, 145.9, 54791.5), 55178.5),
        (datetime(2027, 7, 2, 12), (100.0, -80.0, 240.0), (5984.0, 14760.1, -49317.7), 51825.7),
    ],
)
def test_world_magnetic_model_points(date, place, xyz, total, sidereal_deg):
    """NOAA/BGS, World Magnetic Model 2025, test points; the two models differ by up to ~0.2 %."""
    there = PlaceOverEarth(*place, sidereal_deg)
    field = geomagnetic_field(there, np.zeros(1), date)[:, 0] * 1e9
    assert there.north_east_down @ field == pytest.approx(xyz, abs=0.002 * total)
    assert np.linalg.norm(field) == pytest.approx(total, rel=0.002)


def test_all_around_the_earth_against_the_world_magnetic_model():
    """WMM2025 itself, evaluated by pygeomag, at 550 km."""
    model = GeoMag(coefficients_file="wmm/WMM_2025.COF")
    for latitude in (-75.0, -40.0, -5.0, 30.0, 65.0):
        for longitude in (-150.0, -60.0, 20.0, 110.0):
            there = PlaceOverEarth(550.0, latitude, longitude, 123.0)
            field = geomagnetic_field(there, np.zeros(1), datetime(2026, 1, 1))[:, 0] * 1e9
            wmm = model.calculate(glat=latitude, glon=longitude, alt=550.0, time=2026.0)
            assert there.north_east_down @ field == pytest.approx((wmm.x, wmm.y, wmm.z), abs=0.002 * wmm.f)


@pytest.mark.parametrize(
    ("altitude_km", "equator", "pole"), [(400, 24769, 49538), (550, 23193, 46387), (700, 21748, 43497)])
def test_centred_dipole(altitude_km, equator, pole, monkeypatch):
    """B0 (a/r)³ √(1 + 3 sin²λ), figures derived; Wertz (ed.) 1978, App. H, from memory."""
    monkeypatch.setattr(field_module.ppigrf, "igrf_gc", partial(ppigrf.igrf_gc, max_degree=1))
    g10, g11, h11 = -29350.0, -1410.3, 4545.5
    b0 = math.hypot(g10, g11, h11)
    assert b0 == pytest.approx(29733.37, abs=0.005)
    axis = -np.array((g11, h11, g10)) / b0  # of the dipole's northern end, Earth-fixed
    across = np.cross(axis, (0.0, 0.0, 1.0))
    across /= np.linalg.norm(across)
    r = (6371.2 + altitude_km) * 1e3

    def strength(direction):
        there = PlaceOverEarth(0.0, 0.0, 0.0, 0.0)
        there.position = r * direction[:, None]
        return np.linalg.norm(geomagnetic_field(there, np.zeros(1), datetime(2025, 1, 1))) * 1e9

    assert strength(across) == pytest.approx(equator, abs=0.6)
    assert strength(axis) == pytest.approx(pole, abs=0.6)
    assert strength(axis) == pytest.approx(2.0 * strength(across), rel=1e-9)


@pytest.mark.parametrize(("altitude_km", "inclination_deg"), [(400.0, 51.6), (550.0, 97.6), (700.0, 5.0)])
def test_interpolation_stays_close_to_the_model(altitude_km, inclination_deg):
    orbit = circular(altitude_km, inclination_deg)
    spacing_s, intervals = 30.0, int(orbital_period(orbit) / 30.0)
    cubics = _hermite(orbit, 1_000_000, 30_000_000, intervals)
    u = np.array((0.0, 0.2, 0.5, 0.77, 1.0))
    at = sum(cubics[:, None, power] * u[:, None, None] ** power for power in range(4))
    seconds = 1.0 + (np.arange(intervals)[:, None] + u) * spacing_s
    trajectory = Trajectory(orbit)
    exact = geomagnetic_field(trajectory, seconds.ravel(), DATE).T.reshape(*seconds.shape, 3)
    assert np.abs(at[..., FIELD] - exact).max() <= 0.014e-9

    position, velocity = (v.T.reshape(*seconds.shape, 3) for v in trajectory.state(seconds.ravel()))
    r = np.linalg.norm(position, axis=-1, keepdims=True)
    gradient = position / r * np.sqrt(3.0 * EARTH_MU / r**3)
    flight = velocity / np.linalg.norm(velocity, axis=-1, keepdims=True)
    assert np.abs(at[..., GRADIENT] - gradient).max() <= 2e-9
    assert np.abs(at[..., FLIGHT] - flight).max() <= 1e-7


def test_the_table_lies_on_its_grid():
    knots = _knots(Trajectory(circular(550.0, 97.6)), np.arange(5) * 30.0, DATE)
    for vector, bits in ((FIELD, 37), (FLIGHT, 24), (GRADIENT, 33)):
        scaled = knots[..., vector] * 2.0**bits
        assert (scaled == np.rint(scaled)).all()


def test_a_date_without_coefficients_is_refused():
    with pytest.raises(ValueError, match="epoch 2031-01-01 UTC"):
        geomagnetic_field(PlaceOverEarth(0.0, 0.0, 0.0, 0.0), np.zeros(1), datetime(2031, 1, 1))
