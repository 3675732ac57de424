"""How long a coil needs to decay, and what its core keeps."""

from dataclasses import replace

import numpy as np
import pytest

from pyharness.mission import demo_path, load_mission
from pyharness.review.blanking import blanking_margins, blanking_needed_ms, chased_remanence
from pyharness.scaling import scale
from pyharness.truth import derivative_law


@pytest.fixture(scope="module")
def scaling():
    return scale(load_mission(demo_path()))


def test_time_constants_to_a_hundredth_and_a_thousandth():
    """I0 exp(-t R/L) is 1 % after ln 100 = 4.605 and 0.1 % after 6.908 L/R: closed form, derived here."""
    assert blanking_needed_ms(1.0, 100.0, 1.0) == pytest.approx(4.605, abs=5e-4)
    assert blanking_needed_ms(2.0, 1000.0, 1.0) == pytest.approx(2 * 6.908, abs=1e-3)
    assert blanking_needed_ms(5.0, 1.0, 2.0) == 0.0


def test_after_the_needed_time_one_count_is_left_of_the_worst_axis(scaling):
    stray = np.abs(np.array(scaling.mission.magnetometer.stray_ut_per_a_m2))
    for axis, margin in enumerate(blanking_margins(scaling)):
        coil = scaling.mission.coil[axis]
        at_start_nt = stray[:, axis].max() * coil.dipole_a_m2 * (8.4 / 7.4) * 1e3
        left_nt = at_start_nt * np.exp(-margin.needed_ms / coil.time_constant_ms)
        assert left_nt == pytest.approx(1e3 / scaling.mission.magnetometer.counts_per_ut)
        assert margin.margin_ms == pytest.approx(60.0 - margin.needed_ms)
        assert margin.given_ms == pytest.approx(500.0 - 490.0 + 60.0)


@pytest.mark.parametrize("coil", range(3))
def test_chased_remanence_is_what_the_law_makes_of_a_reversal(scaling, coil):
    part = scaling.mission.coil[coil]
    stray_t = scaling.mission.magnetometer.stray_ut_per_a_m2[coil][coil] * 1e-6
    kept = part.remanence_fraction * part.dipole_a_m2
    before, after = kept * stray_t, -kept * stray_t  # a pulse along -, after one along +
    demand = derivative_law(scaling.gain.k_am2_s_per_t, (after - before) / 0.5)
    assert chased_remanence(scaling, coil) == pytest.approx(demand / scaling.dipole_a_m2[coil])


def test_low_pass_lessens_the_chase(scaling):
    half = {**scaling.config, "path": {**scaling.config["path"], "filter_gain": 16384}}
    assert chased_remanence(replace(scaling, config=half), 0) == pytest.approx(
        chased_remanence(scaling, 0) / 2
    )
