"""What was recorded on a bench or in flight: logs of inputs, replayed through any controller, and telemetry."""

from pyharness.replay.columns import FIELDS, Field
from pyharness.replay.log import Log, read_log, write_log
from pyharness.replay.recording import RecordingError
from pyharness.replay.replayed import Replayed, replay
from pyharness.replay.telemetry import (
    first_difference,
    read_telemetry,
    unpack_telemetry,
)

__all__ = [
    "FIELDS",
    "Field",
    "Log",
    "RecordingError",
    "Replayed",
    "first_difference",
    "read_log",
    "read_telemetry",
    "replay",
    "unpack_telemetry",
    "write_log",
]
