"""The cycle's timeline."""

from dataclasses import replace

import pytest
from plant.tern_mission import MISSION

from pyharness.mission.model import Cycle
from pyharness.plant import Timeline


def test_the_demo_cycle():
    t = Timeline.of(MISSION)
    assert (t.period_us, t.blanking_us, t.sample_us, t.compute_delay_us) == (500_000, 60_000, 20_000, 10_000)
    assert (t.drive_window_us, t.tick_us, t.shortest_pulse_us) == (400_000, 100, 800)
    assert (t.sample_start_us, t.mid_sample_us) == (60_000, 70_000)
    assert (t.drive_start_us, t.drive_end_us, t.delay_us) == (90_000, 490_000, 20_000)
    assert (t.window_ticks, t.ticks_to_next_sample) == (4000, 4700)


def test_age_runs_from_switch_off_to_the_next_sample():
    t = Timeline.of(MISSION)
    assert t.age_at_next_sample_us(4000) == 500_000 + 60_000 - 490_000
    assert t.age_at_next_sample_us(t.ticks_to_next_sample) == 0
    assert t.age_at_next_sample_us(1) == t.age_at_next_sample_us(0) - t.tick_us


def test_an_odd_sample_leaves_no_microsecond_out():
    t = Timeline.of(replace(MISSION, cycle=Cycle(100.0, 5.0, 3.001, 0.333, 60.0, 7, 0.1, 1.0)))
    assert t.mid_sample_us + t.delay_us == t.drive_start_us
    assert t.mid_sample_us - t.sample_start_us == 1500
    assert t.age_at_next_sample_us(0) + t.sample_us + t.compute_delay_us == t.period_us
    assert t.window_ticks == 60_000 // 7


def test_milliseconds_become_whole_microseconds():
    # 0.29 ms is 289.99999999999994 µs in binary.
    cycle = Cycle(100.0, 5.0, 3.0, 0.29, 60.0, 10, 0.1, 1.0)
    assert Timeline.of(replace(MISSION, cycle=cycle)).compute_delay_us == 290


def test_it_cannot_be_changed():
    with pytest.raises(AttributeError):
        Timeline.of(MISSION).period_us = 1
