"""Telemetry: C, exact model and unpacking agree on every frame, and no flipped bit passes."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pyharness import exact
from pyharness.exact.integrity import fold
from pyharness.flight.records import columns, from_columns, to_columns, to_dict
from pyharness.replay import RecordingError, first_difference, unpack_telemetry
from pyharness.replay.columns import limits_of
from pyharness.replay.telemetry import cycles_without, restarts

SIZE = 50
_CODES: dict[str, Callable[[dict[str, int]], list[int]]] = {
    "mode": lambda constants: [value for name, value in constants.items() if name.startswith("MRD_MODE_")],
    "rate_valid": lambda constants: [0, 1],
    "handover": lambda constants: [0, 1],
    "trusted": lambda constants: [0, 1],
    "active": lambda constants: [0, 1, 2],
    "fault": lambda constants: [0, 1, 2, 3],
}
"""Fields that hold codes, by their last name; all others hold any integer of their width."""


@cache
def _rows(interface):
    """Any outputs that a controller may give, as far as telemetry sees them."""
    cells = []
    for name, (low, high) in limits_of(interface.outputs).items():
        top, leaf = name.partition(".")[0], name.partition("[")[0].rpartition(".")[2]
        code = leaf in _CODES and top != "counters"
        cells.append(
            st.sampled_from(_CODES[leaf](interface.header.constants)) if code else st.integers(low, high)
        )
    return st.lists(st.tuples(*cells), min_size=1, max_size=4)


@given(st.data())
@settings(max_examples=60)
def test_c_exact_model_and_unpacking_agree(library, data):
    interface = library.interface
    outputs = from_columns(interface.outputs, np.array(data.draw(_rows(interface)), np.int64))
    frames = library.telemetry(outputs)
    assert len(frames) == SIZE * len(outputs)
    assert frames == b"".join(exact.telemetry(to_dict(record)) for record in outputs)
    unpacked = unpack_telemetry(frames, interface)
    trace = outputs["trace"]
    for name in ("mode", "status", "rate", "rate_valid", "handover", "cycle", "digest", "ticks", "counters"):
        assert (unpacked[name] == outputs[name]).all(), name
    assert (unpacked["fault"] == trace["currents"]["fault"]).all()
    assert (unpacked["active"] == trace["law"]["active"]).all()
    assert (unpacked["trusted"] == trace["gate"]["trusted"]).all()


@pytest.fixture
def outputs(library):
    """Three frames' worth, on cycles 65534 to 0."""
    outputs = np.zeros(3, library.interface.outputs)
    outputs["mode"], outputs["cycle"], outputs["ticks"] = 5, (65534, 65535, 0), (1, -2, -32768)
    outputs["counters"]["trusted"] = (7, 8, 8)
    return outputs


def problems(data: bytes, interface) -> list[str]:
    with pytest.raises(RecordingError) as caught:
        unpack_telemetry(data, interface)
    return caught.value.problems


def test_every_flipped_bit_is_caught_and_its_frame_named(library, outputs):
    frames = library.telemetry(outputs)
    for bit in range(8 * SIZE):
        flipped = bytearray(frames)
        flipped[SIZE + bit // 8] ^= 1 << bit % 8
        (told,) = problems(bytes(flipped), library.interface)
        assert told.startswith("frame 1, byte 96: check word is 0x"), told


@pytest.mark.parametrize(
    ("byte", "value", "told"),
    [
        (0, 1, "frame 0, byte 0: version 1, must be 2, that of this mrd.h"),
        (1, 4, "frame 0, byte 1: mode 4 is none of MRD_MODE_*"),
        (9, 3, "frame 0, byte 9: 0x03: bits 0 and 1 must be one of MRD_LAW_*, bits 3 to 7 zero"),
        (9, 8, "frame 0, byte 9: 0x08: bits 0 and 1 must be one of MRD_LAW_*, bits 3 to 7 zero"),
    ],
)
def test_what_no_controller_sends_is_named_under_a_right_check_word(library, outputs, byte, value, told):
    frame = bytearray(library.telemetry(outputs)[: SIZE - 4])
    frame[byte] = value
    assert problems(bytes(frame) + fold(frame).to_bytes(4, "big"), library.interface) == [told]


def test_lengths_that_are_no_frames(library, outputs):
    frames = library.telemetry(outputs)
    assert problems(b"", library.interface) == ["no frames: it is empty"]
    assert problems(frames[:-1], library.interface) == [
        "frame 2, byte 100: ends after 49 bytes, must have 50"
    ]
    assert len(problems(bytes(50 * SIZE), library.interface)) == 20


def test_lost_frames_are_counted_through_the_wrap_and_resets_are_told(library, outputs):
    outputs["counters"]["trusted"] = (7, 8, 2)
    frames = unpack_telemetry(library.telemetry(outputs), library.interface)
    assert cycles_without(frames).tolist() == [0, 0, 0] and restarts(frames).tolist() == [False, False, True]
    outputs["counters"]["trusted"] = 8
    outputs["cycle"] = 65534, 2, 2
    frames = unpack_telemetry(library.telemetry(outputs), library.interface)
    assert cycles_without(frames).tolist() == [0, 3, 65535] and not restarts(frames).any()


def test_a_difference_from_a_replay_is_named_by_frame_and_cycle(library):
    outputs = np.zeros(6, library.interface.outputs)
    outputs["mode"], outputs["cycle"] = 3, range(6)
    outputs["ticks"][4] = 1, 2, 3
    sent = outputs[[1, 4, 5]].copy()
    assert first_difference(unpack_telemetry(library.telemetry(sent), library.interface), outputs) is None
    sent["ticks"][1, 2] = -3
    frames = unpack_telemetry(library.telemetry(sent), library.interface)
    assert first_difference(frames, outputs) == "frame 1, cycle 4: ticks[2] is -3, the replay has 3"
    assert first_difference(frames[:1], outputs[:1]) == "frame 0 is of cycle 1, there are 1 to compare with"


def test_a_difference_in_any_field_is_seen(library):
    outputs = np.zeros(1, library.interface.outputs)
    outputs["mode"] = 3
    frames = unpack_telemetry(library.telemetry(outputs), library.interface)
    for i, name in enumerate(columns(frames.dtype)):
        if name == "cycle":  # it says with which row to compare
            continue
        table = to_columns(frames)
        table[0, i] ^= 1
        assert first_difference(from_columns(frames.dtype, table), outputs).startswith(
            f"frame 0, cycle 0: {name} is "
        )
