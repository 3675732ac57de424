"""The exact model: the controller in unbounded Python integers, written from the arithmetic document alone.

Records are plain dicts with the field names of mrd.h, arrays are tuples of ints; nothing is changed in
place. Every named value passes through its declared range (`ranges`), and leaving it raises `RangeError`.
"""

from pyharness.exact.fields import FIELDS, Field
from pyharness.exact.init import init, path_check
from pyharness.exact.integrity import config_digest, state_digest
from pyharness.exact.path import (
    path_commit,
    path_drive,
    path_reset,
    path_restore,
    path_sense,
    path_withhold,
)
from pyharness.exact.ranges import RANGES, Range, RangeError
from pyharness.exact.step import reset, step
from pyharness.exact.telemetry import telemetry

__all__ = [
    "FIELDS", "Field", "RANGES", "Range", "RangeError", "config_digest", "init", "path_check", "path_commit",
    "path_drive", "path_reset", "path_restore", "path_sense", "path_withhold", "reset", "state_digest",
    "step", "telemetry",
]
