"""Coils that are not as they should be, and what the current sense reads of them."""

import math
from dataclasses import replace

import numpy as np
import pytest
from plant.flight import batch, digest
from plant.tern_mission import FREE_BODY, IDEAL, MISSION, ideal_with

from pyharness.mission import CurrentSense
from pyharness.plant import CoilHealth, ConstantField, Plant
from pyharness.plant.coils import Coils

FIELD = np.array((20e-6, -30e-6, 10e-6))[:, None]
ALIGNED = np.array((1.0, 0.0, 0.0, 0.0))[:, None]
STILL = np.zeros((3, 1))
SENSED = replace(IDEAL, current_sense=CurrentSense(2000, 0.0, 100, 50.0))
LONG = (1000, -500, 700)


def column(*values) -> np.ndarray:
    return np.array(values)[:, None]


def health(**changes) -> CoilHealth:
    """Of one spacecraft, with some of its arrays replaced."""
    return replace(CoilHealth.nominal(1), **{name: column(*values) for name, values in changes.items()})


def drive(mission, ticks, sick=None, state=None):
    coils = Coils([mission])
    return coils.drive(state or coils.at_rest(), column(*ticks), health=sick)


def mean(cubic: np.ndarray) -> np.ndarray:
    return sum(cubic[i] / (i + 1) for i in range(4))[:, 0]


def readings(mission, ticks, sick=None, supply_v=None) -> tuple[list[int], list[int]]:
    """Driven and sampled counts after one cycle."""
    plant = Plant([mission], [3], field=ConstantField(FIELD), attitude=ALIGNED, rate_rad_s=STILL, supply_v=supply_v)
    plant.drive(column(*ticks), health=sick)
    sample = plant.sample()
    return sample.driven_counts[:, 0].tolist(), sample.sampled_counts[:, 0].tolist()


def fly(plant: Plant, cycles: int, sick: CoilHealth | None) -> list[np.ndarray]:
    log = []
    for _ in range(cycles):
        sample = plant.sample()
        ticks = sample.mag_counts.astype(np.int64) * 7 % 3001 - 1500
        ticks[np.abs(ticks) < 200] = 0
        log += [sample.mag_counts, sample.driven_counts, sample.sampled_counts]
        log += [plant.drive(ticks, np.where(sample.gyro_counts % 5 == 0, 3, 0), sick), plant.attitude, plant.rate]
    return log


def test_healthy_coils_fly_as_without_a_word_of_health():
    """To the last bit, the sign of a zero included."""
    assert digest(fly(Plant(**batch()), 60, CoilHealth.nominal(4))) == digest(fly(Plant(**batch()), 60, None))


def test_the_sick_do_not_infect_the_others():
    sick = CoilHealth.nominal(4)
    sick.held[:, 1], sick.current[1, 2], sick.wiring[:, 3] = (1.0, 0.0, -0.5), 0.0, (2, 0, 1)
    together, alone = fly(Plant(**batch()), 30, sick), fly(Plant(**batch()), 30, None)
    assert all(np.array_equal(a[..., 0], b[..., 0]) for a, b in zip(together, alone, strict=True))
    assert not any(np.array_equal(together[-1][:, i], alone[-1][:, i]) for i in (1, 2, 3))


def test_a_weak_coil_makes_its_share():
    weak = drive(MISSION, LONG, health(current=(0.35, 1.0, 1.0)))
    well = drive(MISSION, LONG)
    assert weak.cubic[:, 0] == pytest.approx(0.35 * well.cubic[:, 0], rel=1e-15)
    assert weak.state.remanence[0] == pytest.approx(0.35 * well.state.remanence[0], rel=1e-15)
    assert weak.state.remaining[0] == pytest.approx(0.35 * well.state.remaining[0], rel=1e-15)
    assert np.array_equal(weak.cubic[:, 1:], well.cubic[:, 1:])
    assert np.array_equal(weak.switch_off_us, well.switch_off_us), "the driver switches off what it does not carry, too"


def test_an_open_coil_does_nothing_and_keeps_its_remanence():
    before = drive(MISSION, (-2000, 0, 0)).state
    after = drive(MISSION, (2000, 0, 0), health(current=(0.0, 1.0, 1.0)), before)
    assert after.state.remanence[0, 0] == before.remanence[0, 0] < 0.0
    assert mean(after.cubic)[0] == pytest.approx(before.remanence[0, 0], rel=1e-12)
    assert after.state.remaining[0, 0] == 0.0
    assert after.switch_off_us[0, 0] == 200_000


@pytest.mark.parametrize("fault", [{"leads": (1, -1, 1)}, {"current": (1, -1, 1)}])
def test_a_reversed_coil_reverses_its_dipole(fault):
    turned, well = drive(MISSION, LONG, health(**fault)), drive(MISSION, LONG)
    assert np.array_equal(turned.cubic[:, 1], -well.cubic[:, 1])
    assert np.array_equal(turned.state.remanence[1], -well.state.remanence[1])
    assert np.array_equal(turned.cubic[:, 0], well.cubic[:, 0])


def test_swapped_coils_make_each_others_dipole():
    """Each with the strength, lag and polarity of the coil that it is."""
    swapped = drive(MISSION, LONG, health(wiring=(2, 1, 0)))
    by_hand = drive(MISSION, LONG[::-1])
    assert np.array_equal(swapped.cubic, by_hand.cubic)
    assert np.array_equal(swapped.state.remaining, by_hand.state.remaining)
    assert swapped.switch_off_us[:, 0].tolist() == [100_000, 50_000, 70_000], "the stamps are those of the channels"


def test_a_driver_takes_its_fault_to_the_coil_that_it_drives():
    """Channel 0 drives y, 1 drives z, 2 drives x; the driver of channel 0 is weak, the leads of coil z are reversed."""
    mixed = drive(IDEAL, LONG, health(wiring=(1, 2, 0), current=(0.5, 1, 1), leads=(1, 1, -1)))
    # Mean dipole: 0.2 A m² × pulse / 500 ms, of 70 ms, half of 100 ms, and 50 ms that are negative twice.
    assert mean(mixed.cubic) == pytest.approx((0.028, 0.02, 0.02), rel=1e-9)


def test_a_coil_that_is_shorted_on_acts_all_the_time_and_heeds_no_pulse():
    for ticks in ((0, 0, 0), (2000, 0, 0), (-2000, 0, 0)):
        on = drive(MISSION, ticks, health(held=(0.5, 0, 0)))
        assert on.cubic[:, 0, 0].tolist() == [0.5 * 0.24, 0.0, 0.0, 0.0]
    assert (on.state.remaining + on.state.remanence)[0, 0] == pytest.approx(0.12, rel=1e-15)
    assert drive(MISSION, (0, 0, 0), health(held=(0, 1, 0))).cubic[0, 1, 0] == -0.24, "of positive current, by polarity −1"
    released = drive(MISSION, (0, 0, 0), None, on.state)
    assert mean(released.cubic)[0] == pytest.approx(0.004 * 0.12, rel=1e-12), "what its core keeps"


def test_a_held_dipole_turns_the_body_like_a_compass():
    """Small swings about the field: ω² = m B / J, so a quarter of a swing takes π/2 √(J / (m B))."""
    j = 0.01
    body = replace(FREE_BODY, inertia_kg_m2=((j, 0, 0), (0, j, 0), (0, 0, j)), tip_off_deg_s=(0.0, 0.0, 0.0))
    field = np.array((math.cos(0.05), math.sin(0.05), 0.0))[:, None] * 40e-6  # 0.05 rad off x
    plant = Plant([replace(IDEAL, body=body)], [0], field=ConstantField(field), attitude=ALIGNED, rate_rad_s=STILL)
    quarter_s = math.pi / 2 * math.sqrt(j / (0.2 * 40e-6))
    cycles = round(quarter_s / 0.5)
    first = None
    for _ in range(cycles):
        plant.drive(column(0, 0, 0), health=health(held=(1, 0, 0)))
        first = plant.rate[:, 0] if first is None else first
    # Torque m × B = 0.2 × 40e-6 × sin 0.05 about z.
    assert first == pytest.approx((0.0, 0.0, 0.2 * 40e-6 * math.sin(0.05) / j * 0.5), rel=1e-3, abs=1e-12)
    angle = math.atan2(plant.field_body[1, 0], plant.field_body[0, 0])
    assert angle == pytest.approx(0.05 * math.cos(math.pi / 2 * cycles * 0.5 / quarter_s), abs=2e-5)
    assert plant.rate[2, 0] == pytest.approx(0.05 * math.sqrt(0.2 * 40e-6 / j), rel=1e-3)


def test_a_held_dipole_reaches_the_magnetometer():
    stray = ((100.0, 0.0, 0.0), (30.0, 0.0, 0.0), (0.0, 0.0, 0.0))
    plant = Plant([ideal_with(stray_ut_per_a_m2=stray)], [0], field=ConstantField(0.0 * FIELD), rate_rad_s=STILL)
    plant.drive(column(0, 0, 0), health=health(held=(-1, 0, 0)))
    assert plant.sample().mag_counts[:, 0].tolist() == [-1600, -480, 0]  # 0.2 A m², 80 counts/µT
    plant.drive(column(0, 0, 0))
    assert plant.sample().mag_counts[:, 0].tolist() == [0, 0, 0]


def test_all_leads_reversed_put_energy_in():
    """m = −k dB/dt damps; with every coil the wrong way round the same pulses spin the body up."""
    for leads, sign in ((1, 1), (-1, -1)):
        plant = Plant([IDEAL], [6], field=ConstantField(FIELD), rate_rad_s=np.radians(column(0.5, -0.4, 0.3)))
        before = plant.energy()
        for _ in range(20):
            derivative = -np.cross(plant.rate[:, 0], plant.field_body[:, 0])[:, None]
            plant.drive(np.rint(-2e9 * derivative).astype(int), health=health(leads=(leads,) * 3))
        assert np.sign(before - plant.energy()) == sign
        assert abs(before - plant.energy()) > 1e-3 * before


def test_a_wiring_that_leaves_a_coil_out_is_refused():
    with pytest.raises(ValueError, match=r"wiring: \[0, 0, 2\] of spacecraft 0, must be a permutation"):
        drive(IDEAL, LONG, health(wiring=(0, 0, 2)))


def test_current_at_the_end_of_a_pulse():
    """Full counts × (1 − exp(−width/τ)) × supply / nominal, with the sign of the ticks whatever the polarity."""
    driven, sampled = readings(replace(SENSED, coil=MISSION.coil), (60, -120, 0))  # x, y: 6 ms and 12 ms with τ 6 ms
    assert driven == [round(2000 * (1 - math.exp(-1))), round(-2000 * (1 - math.exp(-2))), 0]
    assert sampled == [0, 0, 0]
    full = 2000 * 8.4 / 7.4
    assert readings(SENSED, (60, 0, 0), supply_v=np.array((8.4,)))[0] == [round(full * (1 - math.exp(-1))), 0, 0]
    assert readings(SENSED, (0, 0, 0), health(held=(0, -1, 0)), np.array((8.4,))) == ([0, -round(full), 0],) * 2


@pytest.mark.parametrize(
    ("fault", "driven", "sampled"),
    [
        ({"current": (0.0, 1, 1)}, (0, -2000, 2000), (0, 0, 0)),
        ({"current": (0.35, 1, 1)}, (700, -2000, 2000), (0, 0, 0)),
        ({"current": (-1, -1, 1)}, (-2000, 2000, 2000), (0, 0, 0)),
        ({"leads": (-1, -1, 1)}, (2000, -2000, 2000), (0, 0, 0)),  # behind the sense
        ({"wiring": (1, 0, 2)}, (2000, -2000, 2000), (0, 0, 0)),
        ({"held": (0, 0.8, -1)}, (2000, 1600, -2000), (0, 1600, -2000)),
        ({"current": (0.35, 1, 0), "wiring": (1, 2, 0)}, (700, -2000, 0), (0, 0, 0)),
        ({"held": (0.5, 0, 0), "wiring": (1, 2, 0)}, (1000, -2000, 2000), (1000, 0, 0)),  # the channel's, not the coil's
    ],
)
def test_what_the_current_sense_sees_of_a_fault(fault, driven, sampled):
    assert readings(SENSED, (3000, -3000, 3000), health(**fault)) == (list(driven), list(sampled))


def test_current_left_during_the_sample():
    """Closed form: a pulse of the whole window ends 70 ms before a sample of 20 ms; τ = 30 ms."""
    slow = replace(SENSED, coil=tuple(replace(c, time_constant_ms=30.0) for c in SENSED.coil))
    left = 2000 * math.exp(-70 / 30) * 30 / 20 * (1 - math.exp(-20 / 30))
    assert readings(slow, (4000, -4000, 0))[1] == [round(left), -round(left), 0]


def test_noise_of_the_current_sense():
    noisy = replace(SENSED, current_sense=replace(SENSED.current_sense, noise_counts=50.0))
    noisy = replace(noisy, magnetometer=replace(noisy.magnetometer, noise_nt=1000.0))
    missions = [noisy, SENSED, replace(noisy, current_sense=None)]
    plant = Plant(missions, [5, 5, 5], field=ConstantField(np.repeat(FIELD, 3, axis=1)), rate_rad_s=np.zeros((3, 3)))
    assert plant.current_fitted.tolist() == [True, True, False]
    seen = []
    for _ in range(600):
        sample = plant.sample()
        seen.append(np.concatenate((sample.driven_counts, sample.sampled_counts, sample.mag_counts)))
        assert np.array_equal(sample.mag_counts[:, 0], sample.mag_counts[:, 2]), "it leaves the others as they are"
        plant.drive(np.zeros((3, 3), int))
    seen = np.array(seen)
    assert seen[:, :6, 0].std(axis=0) == pytest.approx(np.full(6, 50.0), rel=0.1)
    correlation = np.corrcoef(seen[:, :, 0].T) - np.eye(9)
    assert np.abs(correlation).max() < 0.2
    assert not seen[:, :6, 1:].any()
