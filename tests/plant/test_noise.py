"""Noise by integer arithmetic."""

import numpy as np
import pytest

from pyharness.plant.noise import SIGMA, NoiseStream, bell


def test_first_values_are_pinned():
    """They are part of every golden vector: a change of numpy's raw stream or of the sum must be seen."""
    assert np.random.PCG64(0).random_raw(2).tolist() == [11749869230777074271, 4976686463289251617]
    assert NoiseStream([0], 3).at(0)[:, 0].tolist() == [51122.0, -66102.0, 36802.0]


def test_bell_sums_twelve_quarters():
    assert bell(np.zeros(3, np.uint64)) == -6 * 65535
    assert bell(np.full(3, 2**64 - 1, np.uint64)) == 6 * 65535
    assert bell(np.array([1 + (2 << 16) + (3 << 32) + (4 << 48), 0, 0], np.uint64)) == 10 - 6 * 65535


def test_moments():
    x = bell(np.random.PCG64(5).random_raw(3 * 400_000).reshape(-1, 3)) / SIGMA
    n = x.size
    assert abs(x.mean()) < 4.0 / np.sqrt(n)
    assert x.var() == pytest.approx(1.0, abs=4.0 * np.sqrt(1.9 / n))
    # Irwin–Hall of twelve: −6/(5 · 12).
    assert (x**4).mean() - 3.0 * x.var() ** 2 == pytest.approx(-0.1, abs=0.03)


def test_each_cycle_and_channel_has_values_of_its_own():
    stream = NoiseStream([1], 2)
    values = np.concatenate([stream.at(cycle)[:, 0] for cycle in range(1000)])
    assert np.unique(values).size > 1990
    assert abs(np.corrcoef(values[:-1], values[1:])[0, 1]) < 0.1


def test_it_depends_on_seed_and_cycle_alone():
    together, alone = NoiseStream([3, 8], 6), NoiseStream([8], 6)
    forwards = [together.at(cycle)[:, 1].copy() for cycle in range(600)]
    backwards = [alone.at(cycle)[:, 0].copy() for cycle in reversed(range(600))][::-1]
    assert np.array_equal(forwards, backwards)
    assert not np.array_equal(together.at(0)[:, 0], together.at(0)[:, 1])
