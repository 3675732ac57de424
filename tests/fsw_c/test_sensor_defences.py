"""Magnetometer and gyro that stand still, jump, tremble or contradict each other: on the C, cycle by cycle.

When each shows, and what it costs, is worked out from fsw_c/README.md, stages 5 and 8. The first sample is never trusted
(nothing is known of the coils yet), so that a norm has one to be compared with from cycle 2 on, and so has a derivative.
"""

from __future__ import annotations

import numpy as np
import pytest
from fsw_c.runs import Bank
from fsw_c.sequences import FIELD, RATE, config_of, driven, has, stamped, trusted, turning

from pyharness.exact import constants as mrd


def when(flags: list[bool]) -> list[int]:
    """The cycles in which something holds."""
    return [n for n, flag in enumerate(flags) if flag]


def moved(n: int, step: int = 20) -> tuple[int, ...]:
    """A field that asks for pulses under the derivative law."""
    return (FIELD[0] + step * n, FIELD[1], FIELD[2])


def active(outputs: np.ndarray) -> list[int]:
    return outputs["trace"]["law"]["active"].tolist()


@pytest.mark.parametrize("axis", range(3))
def test_frozen_shows_at_its_limit_and_ends_with_the_first_changed_count(library, axis):
    changed = tuple(count + (i == axis) for i, count in enumerate(FIELD))
    sequence = [stamped(n) for n in range(10)] + [stamped(10, mag_raw=changed)]
    outputs = Bank(library, config_of(path={"frozen_limit": 5})).run(sequence)
    assert when(has(outputs, "MAG_FROZEN")) == [5, 6, 7, 8, 9]
    assert not any(has(outputs, "MAG_DEAD_AXIS"))
    assert when(driven(outputs)) == [1, 2, 3, 4, 10] == when(trusted(outputs))
    assert outputs["counters"]["mag_faults"][-1] == 5


@pytest.mark.parametrize("axis", range(3))
def test_a_dead_axis_shows_at_its_limit_and_ends_with_its_first_changed_count(library, axis):
    def raw(n):
        return tuple(count + (n if i != axis else n == 9) for i, count in enumerate(FIELD))

    sequence = [stamped(n, mag_raw=raw(n)) for n in range(10)]
    outputs = Bank(library, config_of(path={"frozen_limit": 3, "dead_limit": 6})).run(sequence)
    assert when(has(outputs, "MAG_DEAD_AXIS")) == [6, 7, 8]
    assert not any(has(outputs, "MAG_FROZEN"))
    assert when(driven(outputs)) == [1, 2, 3, 4, 5, 9] == when(trusted(outputs))


@pytest.mark.parametrize("lasts", [1, 10], ids=["a single sample", "a step"])
def test_a_jump_costs_two_cycles(library, lasts):
    """Derivative law: the sample is rejected, and the next one has none before it."""
    leapt = range(6, 6 + lasts)
    sequence = [stamped(n, mag_raw=moved(n + (30 if n in leapt else 0))) for n in range(12)]
    outputs = Bank(library, config_of("derivative", path={"jump_max_sq": 1000**2})).run(sequence)
    assert when(has(outputs, "MAG_JUMP")) == [6]
    assert when(trusted(outputs)) == [n for n in range(1, 12) if n != 6]
    assert when(driven(outputs)) == [n for n in range(2, 12) if n not in (6, 7)]


def test_a_jump_is_more_than_its_limit(library):
    sequence = [stamped(n, mag_raw=(moved(0), moved(0), (2100, -1400, 900))[n]) for n in range(3)]
    square = int(Bank(library, config_of()).run(sequence)["trace"]["continuity"]["jump_sq"][2])
    assert square > 0
    for limit, jumps in ((square, False), (square - 1, True)):
        outputs = Bank(library, config_of(path={"jump_max_sq": limit})).run(sequence)
        assert has(outputs, "MAG_JUMP")[2] is jumps and trusted(outputs)[2] == (not jumps)


def test_a_field_that_jumps_in_every_sample_is_believed_at_the_sixteenth_vote(library):
    """Every other sample is rejected, and leaves the next one nothing to jump from: votes in cycles 2, 4, ..., 32. From then on
    jumps only tell, until 64 samples have not jumped."""
    turn = [30.0] * 40 + [3.0] * 70
    outputs = Bank(library, config_of("derivative", path={"jump_max_sq": 4000**2})).run(turning(turn))
    assert when(has(outputs, "MAG_JUMP")) == [*range(2, 32, 2), *range(32, 40)]
    assert [n for n, used in enumerate(trusted(outputs)) if not used] == [0, *range(2, 32, 2)]
    assert when(driven(outputs)) == list(range(32, 110))
    for calm, used in ((63, [1] * 6), (64, [0, 1] * 3)):
        again = [30.0] * 40 + [3.0] * calm + [30.0] * 6
        assert trusted(Bank(library, config_of("derivative", path={"jump_max_sq": 4000**2})).run(turning(again)))[-6:] == used


def test_single_jumps_are_not_believed(library):
    """Each is a vote against, and nine for it follow."""
    leapt = range(6, 400, 11)
    sequence = [stamped(n, mag_raw=(2000 + 400 * (n in leapt), -1500, 1000)) for n in range(400)]
    outputs = Bank(library, config_of(path={"jump_max_sq": 1000**2})).run(sequence)
    assert [n for n, used in enumerate(trusted(outputs)) if not used] == [0, *leapt]


def test_noise_trips_at_the_sixteenth_vote_and_clears_at_the_sixty_fourth(library):
    """Votes against in cycles 2 to 20, for in 21 to 84."""
    raws = [(2000 + 100 * (min(n, 20) % 2), -1500, 1000) for n in range(90)]
    outputs = Bank(library, config_of(path={"noise_limit": 50})).run([stamped(n, mag_raw=raw) for n, raw in enumerate(raws)])
    assert when(has(outputs, "MAG_NOISY")) == list(range(17, 84))
    assert when(driven(outputs)) == [*range(1, 17), *range(84, 90)]


def test_single_wild_samples_are_not_noise(library):
    """Two votes in eleven are less than one in five."""
    sequence = [stamped(n, mag_raw=(2000 + 100 * (n % 11 == 0), -1500, 1000)) for n in range(400)]
    outputs = Bank(library, config_of(path={"noise_limit": 50})).run(sequence)
    assert (outputs["trace"]["continuity"]["norm_change"] > 50).sum() == 2 * len(range(11, 400, 11))
    assert not any(has(outputs, "MAG_NOISY"))


@pytest.mark.parametrize("axis", range(3))
def test_a_frozen_gyro_is_not_used_until_a_count_changes(library, axis):
    changed = tuple(count + (i == axis) for i, count in enumerate(RATE))
    sequence = [stamped(n, mag_raw=moved(n), gyro_raw=RATE if n < 9 else changed) for n in range(11)]
    outputs = Bank(library, config_of(path={"gyro_frozen_limit": 4})).run(sequence)
    assert when(has(outputs, "GYRO_FROZEN")) == [4, 5, 6, 7, 8]
    assert active(outputs) == [0, 2, 2, 2, 1, 1, 1, 1, 1, 2, 2]
    assert when(has(outputs, "FELL_BACK")) == [4, 5, 6, 7, 8] and all(driven(outputs)[1:])
    assert outputs["counters"]["gyro_faults"][-1] == 5


def test_a_gyro_with_its_sign_wrong_is_found_out_and_given_another_chance(library):
    """6 °/s against −6 °/s: votes against in cycles 2 to 20 (the mean with the wrong sample before), for in 21 to 84."""
    config = config_of(defence={"gyro_error_deg_s": 1.2})
    healthy = Bank(library, config).run(turning([3.0] * 90))
    assert not any(has(healthy, "GYRO_DISAGREES")) and healthy["trace"]["agreement"]["judged"][2:].all()
    outputs = Bank(library, config).run(turning([3.0] * 90, gyro_sign=lambda n: -1 if n < 20 else 1))
    assert when(has(outputs, "GYRO_DISAGREES")) == list(range(17, 84))
    assert active(outputs) == [0] + [mrd.MRD_LAW_RATE] * 16 + [mrd.MRD_LAW_DERIVATIVE] * 67 + [mrd.MRD_LAW_RATE] * 6
    assert when(has(outputs, "FELL_BACK")) == list(range(17, 84)) == when(has(outputs, "ESTIMATE_FELL_BACK"))


def test_a_gyro_is_not_held_against_a_field_that_is_not_trusted(library):
    config = config_of(defence={"gyro_error_deg_s": 1.2})
    sequence = turning([3.0] * 60, gyro_sign=lambda n: -1)
    for n in range(0, 60, 2):  # no two good samples in a row
        sequence[n]["path"]["mag_valid"] = 0
    outputs = Bank(library, config).run(sequence)
    assert not outputs["trace"]["agreement"]["judged"].any() and not any(has(outputs, "GYRO_DISAGREES"))
