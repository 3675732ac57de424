"""A short flight of a mixed batch under pulses made up from the samples; as a script it prints the flight's
digest."""

import hashlib
from dataclasses import replace

import numpy as np
from plant.tern_mission import IDEAL, MISSION

from pyharness.plant import Plant


def batch() -> dict:
    """Arguments of a plant whose four spacecraft differ in everything they may differ in."""
    equatorial = replace(MISSION, orbit=replace(MISSION.orbit, inclination_deg=4.0, altitude_km=410.0))
    no_gyro = replace(
        MISSION, gyro=None,
        cycle=replace(MISSION.cycle, blanking_ms=40.0, drive_window_ms=380.0, pulse_tick_us=250),
        coil=tuple(replace(c, time_constant_ms=4.0 + c.time_constant_ms) for c in MISSION.coil))
    return {
        "missions": [MISSION, equatorial, no_gyro, IDEAL],
        "seeds": [11, 12, 13, 14],
        "rate_rad_s": np.radians(
            ((12.0, 0.2, -80.0, 1.0), (-11.0, 0.1, 40.0, 30.0), (13.0, 0.0, 10.0, -45.0))),
        "supply_v": np.array((7.4, 6.6, 8.4, 7.0)),
        "start_s": np.array((0.0, 1000.0, 250.5, 0.0)),
        "duration_s": 200.0,
    }


def alone(index: int) -> dict:
    """The arguments of one spacecraft of the batch."""
    arguments = batch()
    del arguments["duration_s"]
    return {name: value[..., index:index + 1] if isinstance(value, np.ndarray) else value[index:index + 1]
            for name, value in arguments.items()} | {"duration_s": 200.0}


def fly(plant: Plant, cycles: int) -> list[np.ndarray]:
    """Pulses from the counts, some late, some none: every state and every count on the way."""
    log = []
    for _ in range(cycles):
        sample = plant.sample()
        ticks = sample.mag_counts.astype(np.int64) * 7 % 3001 - 1500
        ticks[np.abs(ticks) < 200] = 0
        late = np.where(sample.gyro_counts % 5 == 0, 3, 0)
        switch_off = plant.drive(ticks, late)
        log += [sample.mag_counts, sample.gyro_counts, switch_off]
        log += [plant.attitude, plant.rate, plant.field_body]
    return log


def digest(log: list[np.ndarray]) -> str:
    """SHA-256 of the log's bytes."""
    sha = hashlib.sha256()
    for entry in log:
        sha.update(np.ascontiguousarray(entry).tobytes())
    return sha.hexdigest()


if __name__ == "__main__":
    print(digest(fly(Plant(**batch()), 300)))
