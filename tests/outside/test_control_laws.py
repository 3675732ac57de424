"""The laws against closed forms, with the real C controller in the loop, in a field that is fixed in space.

Sphere in a constant field: the rate across the field decays as exp(−k B² t / J), the rate along it stays (closed form). No
authority along the field, and unequal axes or products of inertia that move the rate off it: common practice.
"""

from __future__ import annotations

import numpy as np
import pytest

from pyharness.controllers import load_controller
from pyharness.loop import Flight, Record, fly
from pyharness.mission import demo_path, load_mission
from pyharness.plant import ConstantField
from pyharness.scaling import scale

FIELD_T = 30e-6
INERTIA = 0.02
GAIN = 2e4
SECONDS = 1000


def mission(law: str, **inertia: float):
    """The demo's parts without errors or disturbances, and a body of one's own."""
    ideal = dict.fromkeys(("bias_ut", "bias_error_ut", "misalignment_deg", "misalignment_error_deg"), (0.0, 0.0, 0.0))
    gyro = dict.fromkeys(("bias_deg_s", "bias_error_deg_s", "misalignment_deg", "misalignment_error_deg"), (0.0, 0.0, 0.0))
    tensor = {"xx": INERTIA, "yy": INERTIA, "zz": INERTIA, "xy": 0.0, "xz": 0.0, "yz": 0.0} | inertia
    return scale(load_mission(demo_path(), {
        "body": {"inertia_kg_m2": tensor, "residual_dipole_a_m2": [0.0, 0.0, 0.0], "drag_force_n": 0.0, "tip_off_deg_s": [2.0, 1.0, 1.0]},
        "coil": {"x": {"remanence_fraction": 0.0}, "y": {"remanence_fraction": 0.0}},
        "magnetometer": {key: list(value) for key, value in ideal.items()} | {"noise_nt": 0.0},
        "gyro": {key: list(value) for key, value in gyro.items()} | {"noise_deg_s": 0.0},
        "cycle": {"shortest_pulse_ms": 0.0},
        "control": {"law": law, "K_n_m_s": None, "k_am2_s_per_t": GAIN, "settled_deg_s": 0.02, "wake_deg_s": 1.0, "hold_off_s": 0},
    }))  # fmt: skip


def flown(scaling, **keys) -> tuple[Record, np.ndarray, np.ndarray]:
    """A flight in the constant field; its record, and the rate along and across the field, rad/s."""
    flight = Flight(scaling, int(SECONDS / scaling.period_s), **keys)
    field = ConstantField(np.array([[0.3], [-0.5], [0.8]]) * FIELD_T / np.sqrt(0.98))
    (record,) = fly([flight], load_controller("c"), environment=field)
    direction = record.field_t / np.linalg.norm(record.field_t, axis=1, keepdims=True)
    along = (record.rate_rad_s * direction).sum(axis=1)
    across = np.linalg.norm(record.rate_rad_s - along[:, None] * direction, axis=1)
    return record, along, across


@pytest.mark.parametrize("law", ["derivative", "rate"])
def test_a_sphere_is_damped_across_the_field_and_not_along_it(law):
    scaling = mission(law)
    record, along, across = flown(scaling, rate_deg_s=(2.0, 1.0, 1.0))
    # Not yet before the third sample: the first is not trusted, the second has no derivative.
    seconds = record.time_s[-1] - record.time_s[3]
    expected = across[3] * np.exp(-GAIN * FIELD_T**2 * seconds / INERTIA)
    assert across[-1] == pytest.approx(expected, rel=0.01)
    assert across[-1] < 0.45 * across[0]
    np.testing.assert_allclose(along, along[0], rtol=2e-3)
    assert not (record.outputs["status"] >> 13 & 7).any()  # never saturated: the closed form is for a linear law


@pytest.mark.parametrize("law", ["derivative", "rate"])
def test_a_spin_along_the_field_is_out_of_reach(law):
    """ω ∥ B: a sphere keeps its spin, and the law asks for nothing beyond its resolution."""
    record, along, across = flown(mission(law), rate_deg_s=(2.0, 1.0, 1.0), along_field=True)
    np.testing.assert_allclose(along, along[0], rtol=1e-4)
    assert np.degrees(across).max() < 0.05
    command = np.abs(record.outputs["trace"]["saturation"]["command"]).max()
    assert command < 0.005 * 32768


@pytest.mark.parametrize("inertia", [{"xx": 0.012, "zz": 0.025}, {"xy": 0.003, "xz": -0.002}], ids=["unequal axes", "products"])
def test_an_uneven_body_moves_the_rate_off_the_field(inertia):
    record, along, _ = flown(mission("derivative", **inertia), rate_deg_s=(2.0, 1.0, 1.0), along_field=True)
    assert along[-1] < 0.97 * along[0]
    assert record.true_rate_deg_s[-1] < 0.97 * record.true_rate_deg_s[0]
