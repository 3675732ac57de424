"""The mission file: read, checked completely, and handed on as frozen data."""

from pyharness.mission.errors import MissionError
from pyharness.mission.load import demo_path, load_mission, mission_path
from pyharness.mission.model import (
    AXES,
    Body,
    Coil,
    Control,
    CurrentSense,
    Cycle,
    Defence,
    Gyro,
    Magnetometer,
    Matrix,
    Mission,
    Orbit,
    Supply,
    Vector,
    Winding,
)

__all__ = [
    "AXES",
    "Body",
    "Coil",
    "Control",
    "CurrentSense",
    "Cycle",
    "Defence",
    "Gyro",
    "Magnetometer",
    "Matrix",
    "Mission",
    "MissionError",
    "Orbit",
    "Supply",
    "Vector",
    "Winding",
    "demo_path",
    "load_mission",
    "mission_path",
]
