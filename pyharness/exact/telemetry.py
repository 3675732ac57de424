"""Telemetry: the outputs of one cycle as bytes, most significant first."""

from __future__ import annotations

from pyharness.exact.constants import MRD_VERSION
from pyharness.exact.fields import COUNTERS
from pyharness.exact.integrity import fold
from pyharness.exact.num import Record

_STATUS, _RATE, _CYCLE, _DIGEST, _TICKS, _COUNTER, _CHECK = 4, 2, 2, 4, 2, 2, 4  # bytes


def telemetry(outputs: Record) -> bytes:
    """Status, mode, rate, counters, coils and pulses in MRD_TELEMETRY_BYTES bytes.

    The layout is the table of the arithmetic document. Cannot overflow: every field has at least the width
    of its integer.
    """
    trace = outputs["trace"]
    x, y, z = trace["currents"]["fault"]
    frame = bytes((
        MRD_VERSION,
        outputs["mode"],
        *outputs["status"].to_bytes(_STATUS, "big"),
        *outputs["rate"].to_bytes(_RATE, "big"),
        outputs["rate_valid"] | outputs["handover"] << 1 | x << 2 | y << 4 | z << 6,
        trace["law"]["active"] | trace["gate"]["trusted"] << 2,
        *outputs["cycle"].to_bytes(_CYCLE, "big"),
        *outputs["digest"].to_bytes(_DIGEST, "big"),
    ))
    frame += b"".join(ticks.to_bytes(_TICKS, "big", signed=True) for ticks in outputs["ticks"])
    frame += b"".join(outputs["counters"][field.name].to_bytes(_COUNTER, "big") for field in COUNTERS)
    return frame + fold(frame).to_bytes(_CHECK, "big")
