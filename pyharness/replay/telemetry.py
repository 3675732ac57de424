"""Telemetry frames, unpacked. Their layout is the table *Telemetry* in fsw_c/README.md; only the controller packs them."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from pyharness.exact.integrity import fold
from pyharness.flight import Interface
from pyharness.flight.records import columns, to_columns
from pyharness.replay.recording import MOST_PROBLEMS, RecordingError, content_of

_WRAP = 2**16


def frame_dtype(interface: Interface) -> np.dtype:
    """What a frame holds, under the names that `mrd_outputs` has for it."""
    outputs = interface.outputs
    return np.dtype(
        [
            *((name, outputs[name]) for name in ("mode", "status", "rate", "rate_valid", "handover")),
            ("fault", outputs["trace"]["currents"]["fault"]),
            ("active", outputs["trace"]["law"]["active"]),
            ("trusted", outputs["trace"]["gate"]["trusted"]),
            *((name, outputs[name]) for name in ("cycle", "digest", "ticks", "counters")),
        ]
    )


def _layout(interface: Interface) -> np.dtype:
    """The bytes of a frame."""
    counters = len(columns(interface.outputs["counters"]))
    return np.dtype(
        [
            ("version", "u1"), ("mode", "u1"), ("status", ">u4"), ("rate", ">u2"), ("flags", "u1"), ("decisions", "u1"),
            ("cycle", ">u2"), ("digest", ">u4"), ("ticks", ">i2", 3), ("counters", ">u2", counters), ("check", ">u4"),
        ]
    )  # fmt: skip


def read_telemetry(path: Path, interface: Interface) -> np.ndarray:
    """The frames of a file, one after the other without anything between them. Raises RecordingError."""
    return unpack_telemetry(content_of(path), interface, path)


def unpack_telemetry(data: bytes, interface: Interface, source: object = "telemetry") -> np.ndarray:
    """Frames as records (n,) of `frame_dtype`; `interface.mode_name` and `.status_texts` put mode and status into words.

    Raises RecordingError with frame, byte offset and reason for each frame that is not whole or not as it was sent.
    """
    layout = _layout(interface)
    size = layout.itemsize
    whole = len(data) // size
    raw = np.frombuffer(data, layout, whole)
    problems = []
    for index in range(whole):
        if found := _problem(data[index * size : (index + 1) * size], raw[index], layout, interface):
            byte, reason = found
            problems.append(f"frame {index}, byte {index * size + byte}: {reason}")
            if len(problems) == MOST_PROBLEMS:
                break
    if not data:
        problems.append("no frames: it is empty")
    elif len(data) % size and len(problems) < MOST_PROBLEMS:
        problems.append(
            f"frame {whole}, byte {whole * size}: ends after {len(data) % size} bytes, must have {size}"
        )
    if problems:
        raise RecordingError(source, problems)
    return _frames(raw, interface)


def _problem(data: bytes, frame: np.void, layout: np.dtype, interface: Interface) -> tuple[int, str] | None:
    """(byte within the frame, what is wrong with it), if anything is."""
    constants = interface.header.constants
    body = layout.fields["check"][1]
    if (check := fold(data[:body])) != frame["check"]:
        return body, f"check word is 0x{frame['check']:08x}, that of bytes 0 to {body - 1} is 0x{check:08x}"
    if frame["version"] != constants["MRD_VERSION"]:
        return 0, f"version {frame['version']}, must be {constants['MRD_VERSION']}, that of this mrd.h"
    if int(frame["mode"]) not in interface.header.named("MRD_MODE_"):
        return layout.fields["mode"][1], f"mode {frame['mode']} is none of MRD_MODE_*"
    decisions = int(frame["decisions"])
    if decisions >> 3 or decisions & 3 not in interface.header.named("MRD_LAW_"):
        return layout.fields["decisions"][
            1
        ], f"0x{decisions:02x}: bits 0 and 1 must be one of MRD_LAW_*, bits 3 to 7 zero"
    return None


def _frames(raw: np.ndarray, interface: Interface) -> np.ndarray:
    frames = np.zeros(len(raw), frame_dtype(interface))
    for name in ("mode", "status", "rate", "cycle", "digest", "ticks"):
        frames[name] = raw[name]
    flags, decisions = raw["flags"], raw["decisions"]
    frames["rate_valid"], frames["handover"] = flags & 1, flags >> 1 & 1
    frames["fault"] = flags[:, None] >> np.array([2, 4, 6], np.uint8) & 3
    frames["active"], frames["trusted"] = decisions & 3, decisions >> 2 & 1
    for i, name in enumerate(frames["counters"].dtype.names):
        frames["counters"][name] = raw["counters"][:, i]
    return frames


def restarts(frames: np.ndarray) -> np.ndarray:
    """(n,) bool: the controller was reset before this frame, for a counter is lower than in the frame before."""
    counters = to_columns(frames["counters"])
    return np.concatenate(([False], (np.diff(counters, axis=0) < 0).any(axis=1)))


def cycles_without(frames: np.ndarray) -> np.ndarray:
    """(n,) cycles between a frame and the one before of which there is none; 0 where the controller was reset in between.

    The counter of cycles wraps: of 65536 lost in a row nothing is seen.
    """
    lost = np.concatenate(([0], (np.diff(frames["cycle"].astype(np.int64)) - 1) % _WRAP))
    return np.where(restarts(frames), 0, lost)


def first_difference(frames: np.ndarray, outputs: np.ndarray) -> str | None:
    """The first frame that is not what a controller answered in that cycle since reset, in words; None if there is none.

    `outputs` (rows,) are records mrd_outputs. The first frame is of one of the first 65536 cycles.
    """
    steps = cycles_without(frames) + 1
    rows = int(frames["cycle"][0]) + np.concatenate(([0], np.cumsum(steps[1:])))
    for index, row in enumerate(rows.tolist()):
        if row >= len(outputs):
            return f"frame {index} is of cycle {row}, there are {len(outputs)} to compare with"
        if found := _difference(frames[index : index + 1], outputs[row : row + 1]):
            return f"frame {index}, cycle {row}: {found}"
    return None


def _difference(frame: np.ndarray, output: np.ndarray) -> str | None:
    trace = output["trace"]
    inside = {"fault": trace["currents"], "active": trace["law"], "trusted": trace["gate"]}
    want = np.zeros(1, frame.dtype)
    for name in frame.dtype.names:
        want[name] = inside.get(name, output)[name]
    for name, have, expected in zip(
        columns(frame.dtype), to_columns(frame)[0], to_columns(want)[0], strict=True
    ):
        if have != expected:
            return f"{name} is {have}, the replay has {expected}"
    return None
