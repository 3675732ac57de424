"""The closed-loop scenarios of the golden vectors: one thing to exercise each, on the demo mission with its overrides."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from pyharness.events import (
    Command,
    DropGyro,
    DropSample,
    Event,
    Jitter,
    Kick,
    LateStamps,
    LateSwitchOff,
    LoseStamps,
    LowPower,
)
from pyharness.exact import constants as mrd
from pyharness.faults.catalogue import BY_NAME, Setting
from pyharness.loop import Flight, long_cycles
from pyharness.mission import load_mission
from pyharness.mission.model import Vector
from pyharness.scaling import Scaling, scale


@dataclass(frozen=True)
class Scenario:
    """A flight by name: what it is for, and how it departs from the mission."""

    name: str
    purpose: str
    cycles: int | None  # None: as long as `long_cycles` says
    seed: int
    overrides: dict[str, Any] = field(default_factory=dict)
    rate_deg_s: Vector | None = None
    along_field: bool = False
    start_us: int = 1_000_000
    separation_s: int = 60
    orbit_s: float = 0.0
    events: tuple[Event, ...] = ()
    fault: str = ""  # name of a fault of the list, which strikes at `FAULT_FIRST`
    fault_lasts: int = 1  # cycles
    title: str = ""  # for the reviewer

    def scaling(self, mission_path: str) -> Scaling:
        """The integers of this scenario's mission. Raises MissionError."""
        return scale(load_mission(mission_path, self.overrides or None))

    def flight(self, mission_path: str) -> Flight:
        """The flight of this scenario. Raises MissionError."""
        scaling = self.scaling(mission_path)
        flight = Flight(
            scaling=scaling, cycles=long_cycles(scaling) if self.cycles is None else self.cycles, seed=self.seed, rate_deg_s=self.rate_deg_s,
            along_field=self.along_field, start_us=self.start_us, separation_s=self.separation_s, orbit_s=self.orbit_s,
            events=self.events,
        )  # fmt: skip
        if not self.fault:
            return flight
        return BY_NAME[self.fault].flight(flight, Setting(scaling, FAULT_FIRST, FAULT_FIRST + self.fault_lasts))


def _control(**keys: Any) -> dict[str, Any]:
    return {"control": keys}


_RATE_LAW = _control(law="rate")

LOOP = (
    Scenario("nominal", "the mission as it stands, from hold-off into the saturated part of the detumble", 1500, 1, separation_s=0),
    Scenario("fast-tumble", "60 °/s: large derivatives, every axis in saturation, phase lag of the sampling", 500, 2,
             {"body": {"tip_off_deg_s": [36.0, -30.0, 37.0]}}, rate_deg_s=(36.0, -30.0, 37.0)),
    Scenario("along-field", "spin along the field: a small derivative at first, which grows as the spin axis drifts off", 700, 3,
             along_field=True),
    Scenario("slow-end", "the last degree per second: a small derivative against noise and quantisation, pulses far below the limit", 800, 4,
             rate_deg_s=(0.5, -0.4, 0.3)),
    Scenario("per-axis", "saturation axis by axis in place of keeping the direction", 600, 5, _control(saturation="per-axis")),
    Scenario("blanked", "coils that switch off late: samples inside the blanking time are rejected, then trusted again", 400, 6,
             events=(LateSwitchOff(40, 120, coil=0, ticks=500), LateSwitchOff(100, 200, every=5, coil=1, ticks=300),
                     LateSwitchOff(220, 300, every=3, coil=2, ticks=101), LateSwitchOff(300, 340, coil=2, ticks=100))),
    Scenario("stamps", "switch-offs that are stamped late, or not at all until the host knows the coils to be off", 300, 20, _RATE_LAW,
             events=(LateStamps(60, 70), LoseStamps(120, 150), LateStamps(200, 201), LoseStamps(240, 241))),
    Scenario("dropped-samples", "field samples missing, singly and in runs: no derivative across a gap, no pulse", 400, 7,
             events=(DropSample(50, 51), DropSample(80, 120, every=2), DropSample(150, 180))),
    Scenario("stamp-wrap", "the host's clock wraps through 2^32 µs during the flight", 300, 8, start_us=2**32 - 70_000_000),
    Scenario("jitter", "samples off their time by up to the tolerance: derivative over the measured interval", 400, 9,
             events=(Jitter(20, 300, us=2000), Jitter(320, 360, us=3000))),
    Scenario("gyro-loss", "rate-damping law; the gyro is lost and returns, the derivative law takes over between", 600, 10, _RATE_LAW,
             events=(DropGyro(100, 220), DropGyro(300, 340, every=2), DropSample(330, 350, every=3))),
    Scenario("rate-normalised", "rate-damping law with its gain normalised by the field", 500, 11,
             _control(law="rate", gain_scaling="normalised"), rate_deg_s=(3.0, -2.0, 2.5)),
    Scenario("low-pass", "low-pass on the derivative, gain normalised by the field", 600, 12,
             _control(low_pass_s=2.0, gain_scaling="normalised"), rate_deg_s=(4.0, 3.0, -3.5), events=(DropSample(200, 205),)),
    Scenario("gain-least", "a gain some thousand times smaller: short pulses, dropped pulses", 300, 13,
             _control(K_n_m_s=None, k_am2_s_per_t=60.0)),
    Scenario("gain-greatest", "a gain near the largest that the integers carry: always saturated", 300, 14,
             _control(K_n_m_s=None, k_am2_s_per_t=2.2e7)),
    Scenario("settled-and-woken", "settled after a short dwell, coils off, kicked, damping again, settled again", 900, 15,
             _control(dwell_s=60.0), rate_deg_s=(0.2, -0.1, 0.1),
             events=(Kick(300, (1.5, -1.0, 0.5)), Kick(420, (0.1, 0.1, -0.1)))),
    Scenario("settled-by-field", "settled by the field alone, without a gyro", 500, 16,
             {"gyro": None, "control": {"settle_by": "field", "dwell_s": 90.0}}, rate_deg_s=(0.15, -0.2, 0.1),
             events=(DropSample(60, 90, every=4), Kick(350, (2.0, 1.5, -1.0)))),
    Scenario("equatorial", "equatorial orbit: the field hardly turns, one axis stays undamped", 600, 17,
             {"orbit": {"inclination_deg": 0.5}}, rate_deg_s=(4.0, -3.0, 3.0)),
    Scenario("polar-north", "past the north pole of the orbit, in a strong field", 400, 18, orbit_s=1400.0),
    Scenario("commands", "hold-off, low power, inhibit, safe, bench and resume, and commands that are refused", 420, 19, separation_s=10,
             events=(LowPower(20, 30), LowPower(80, 100), Command(120, mrd.MRD_COMMAND_INHIBIT), Command(140, mrd.MRD_COMMAND_RESUME),
                     Command(150, mrd.MRD_COMMAND_RESUME), Command(160, mrd.MRD_COMMAND_ARM, key=0x5AA5),
                     Command(180, mrd.MRD_COMMAND_SAFE), Command(200, mrd.MRD_COMMAND_ARM, key=1),
                     Command(210, mrd.MRD_COMMAND_ARM, key=0x5AA5), Command(215, mrd.MRD_COMMAND_BENCH, coil=0, ticks=1000),
                     Command(220, mrd.MRD_COMMAND_BENCH, coil=1, ticks=-400), Command(225, mrd.MRD_COMMAND_BENCH, coil=2, ticks=1001),
                     Command(230, mrd.MRD_COMMAND_BENCH, coil=3, ticks=10), Command(235, mrd.MRD_COMMAND_INHIBIT),
                     Command(240, mrd.MRD_COMMAND_RESUME), Command(260, 1))),
)  # fmt: skip

FAULT_FIRST = 40
_SENSE = {"current_sense": {"counts_at_full": 2000, "noise_counts": 2.0}}
_SHORT_WINDOWS = {"defence": {"window_s": 20.0, "pause_s": 10.0, "retries": 1, "growth_percent": 0.4}}


def _fault(name: str, lasts: int, after: int, overrides: dict[str, Any] | None = None, **keys: Any) -> Scenario:
    """A fault of the list that lasts some cycles, and what follows."""
    return Scenario(
        f"fault-{name.lower().replace('_', '-')}", f"a fault; the controller {BY_NAME[name].does}", FAULT_FIRST + lasts + after, 31,
        overrides or {}, fault=name, fault_lasts=lasts, **keys,
    )  # fmt: skip


FAULTY = (
    _fault("MAG_MISSING", 20, 10), _fault("MAG_FROZEN", 40, 10), _fault("MAG_OUT_OF_RANGE", 10, 10), _fault("MAG_IMPLAUSIBLE", 20, 10),
    _fault("MAG_JUMP", 60, 10), _fault("MAG_DEAD_AXIS", 150, 10, rate_deg_s=(0.5, -0.4, 6.0)), _fault("MAG_SATURATED", 20, 10),
    _fault("MAG_NOISY", 60, 90), _fault("MAG_BYTES_SWAPPED", 40, 80), _fault("GYRO_MISSING", 30, 10, _RATE_LAW),
    _fault("GYRO_FROZEN", 50, 10, _RATE_LAW), _fault("GYRO_RAILED", 20, 10, _RATE_LAW), _fault("GYRO_DRIFT", 400, 90, _RATE_LAW),
    _fault("COIL_OPEN", 70, 90, _SENSE), _fault("COIL_SHORTED_ON", 30, 60, _SENSE), _fault("COIL_WEAK", 70, 90, _SENSE),
    _fault("COIL_BACKWARD", 60, 20, _SENSE), _fault("COIL_STAYS_ON", 30, 20), _fault("TIME_LATE", 10, 10), _fault("TIME_EARLY", 10, 10),
    _fault("TIME_REPEATED", 30, 10), _fault("TIME_FORWARD", 1, 20), _fault("TIME_BACKWARD", 1, 100), _fault("FLIP_INPUT", 1, 20),
    _fault("COMMAND_ILLEGAL", 1, 20), _fault("WRONG_SIGN", 400, 60, _SHORT_WINDOWS, rate_deg_s=(14.0, -13.0, 15.0)),
    _fault("TOO_FAST", 160, 10, _SHORT_WINDOWS), _fault("TIP_OFF", 60, 10, orbit_s=1400.0),
)  # fmt: skip
"""The faults that show in inputs, passing where they can."""

LONG = (
    Scenario("detumble", "the mission as it stands, until it has settled", None, 1, separation_s=0, title="nominal tip-off"),
    Scenario("detumble-along-field", "the same, starting with the spin along the field", None, 2, along_field=True, separation_s=0,
             title="spin along the field at the start"),
)  # fmt: skip
