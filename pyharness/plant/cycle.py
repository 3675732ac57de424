"""The timeline of one control cycle, in integer microseconds: the only place where it is worked out.

    0            blanking         sample     delay   drive window                       period
    |-- coils off, currents decay ---|-- field --|-----|== pulses start together, own widths ==|

The sample is stamped at its middle; all pulses of a cycle start together when its drive window opens.
"""

from __future__ import annotations

from dataclasses import dataclass

from pyharness.mission.model import Mission


def _microseconds(ms: float) -> int:
    return round(ms * 1000.0)


@dataclass(frozen=True)
class Timeline:
    """Lengths and instants of a cycle, µs. Instants count from the start of the cycle unless they say
    otherwise."""

    period_us: int
    blanking_us: int
    sample_us: int
    compute_delay_us: int
    drive_window_us: int
    tick_us: int
    shortest_pulse_us: int

    @classmethod
    def of(cls, mission: Mission) -> Timeline:
        """The timeline of a checked mission, its milliseconds rounded to whole microseconds."""
        cycle = mission.cycle
        return cls(
            period_us=_microseconds(cycle.period_ms),
            blanking_us=_microseconds(cycle.blanking_ms),
            sample_us=_microseconds(cycle.sample_ms),
            compute_delay_us=_microseconds(cycle.compute_delay_ms),
            drive_window_us=_microseconds(cycle.drive_window_ms),
            tick_us=cycle.pulse_tick_us,
            shortest_pulse_us=_microseconds(cycle.shortest_pulse_ms),
        )

    @property
    def sample_start_us(self) -> int:
        """Start of the sample."""
        return self.blanking_us

    @property
    def mid_sample_us(self) -> int:
        """Middle of the sample, which its stamp names; of an odd length the odd microsecond comes after
        it."""
        return self.blanking_us + self.sample_us // 2

    @property
    def delay_us(self) -> int:
        """From mid-sample to the start of the drive window."""
        return self.drive_start_us - self.mid_sample_us

    @property
    def drive_start_us(self) -> int:
        """Start of the drive window, and of every pulse."""
        return self.blanking_us + self.sample_us + self.compute_delay_us

    @property
    def drive_end_us(self) -> int:
        """End of the drive window."""
        return self.drive_start_us + self.drive_window_us

    @property
    def window_ticks(self) -> int:
        """Longest pulse that fits the drive window, in timer ticks."""
        return self.drive_window_us // self.tick_us

    @property
    def ticks_to_next_sample(self) -> int:
        """Last tick at which a coil can be switched off before the next sample starts."""
        return self.age_at_next_sample_us(0) // self.tick_us

    def age_at_next_sample_us(self, ticks: int) -> int:
        """Age, at the start of the next sample, of a pulse switched off `ticks` after the drive window
        opened."""
        return self.period_us + self.sample_start_us - self.drive_start_us - ticks * self.tick_us
