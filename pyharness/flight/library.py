"""A build of the controller, loaded: checked layout, records, and calls on them."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import cffi
import numpy as np

from pyharness.flight import build
from pyharness.flight.header import Header, read_header
from pyharness.flight.records import dtype_of
from pyharness.flight.sources import Sources, find_sources

LAYOUT_END = 65535
_HOST = Path(__file__).with_name("host.c")
_HOST_DECLARATIONS = """
void host_step_many(void (*step)(mrd_state *, const mrd_config *, const mrd_inputs *, mrd_outputs *), mrd_state *states,
                    const mrd_config *configs, const mrd_inputs *inputs, mrd_outputs *outputs, size_t n);
void host_run(void (*step)(mrd_state *, const mrd_config *, const mrd_inputs *, mrd_outputs *), mrd_state *state,
              const mrd_config *config, const mrd_inputs *inputs, mrd_outputs *outputs, size_t n);
"""


class LayoutError(Exception):
    """A library was built from another header, or with another layout."""


class Interface:
    """The header of one set of sources: constants and records. Needs a compiler, but no library."""

    def __init__(self, sources: Sources):
        self.sources = sources
        self.header: Header = read_header(sources.header)
        self.ffi = cffi.FFI()
        self.ffi.cdef(self.header.declarations)
        self.ffi.cdef(_HOST_DECLARATIONS)
        self.config = dtype_of(self.ffi, "mrd_config")
        self.inputs = dtype_of(self.ffi, "mrd_inputs")
        self.outputs = dtype_of(self.ffi, "mrd_outputs")
        self.state = dtype_of(self.ffi, "mrd_state")

    def layout(self) -> list[tuple[str, int]]:
        """What mrd_layout must hold: (meaning, value), in order. From cffi, which computes layouts as the C compiler does."""
        table = [("version", self.header.constants["MRD_VERSION"])]
        for name in re.findall(r"^\}\s*(mrd_\w+);", self.header.declarations, re.MULTILINE):
            ctype = self.ffi.typeof(name)
            table.append((f"size of {name}", self.ffi.sizeof(ctype)))
            table += [(f"offset of {name}.{field}", info.offset) for field, info in ctype.fields]
        return table

    def status_texts(self, status: int) -> list[str]:
        """The texts of the bits that are set in a status word, lowest bit first."""
        names = self.header.named("MRD_S_")
        return [self.header.texts[f"MRD_S_{names[bit]}"] for bit in sorted(names) if status >> bit & 1]

    def mode_name(self, mode: int) -> str:
        """The name of a mode as people write it: "hold-off"."""
        return self.header.named("MRD_MODE_").get(mode, f"illegal ({mode})").lower().replace("_", "-")

    def refusal(self, code: int) -> str:
        """The text of an MRD_E_ code."""
        names = self.header.named("MRD_E_")
        return self.header.texts[f"MRD_E_{names[code]}"] if code in names else f"unknown refusal {code}"


class Library:
    """A loaded build of the controller.

    Raises BuildError if it does not compile, LayoutError if a library that was built elsewhere does not have the layout of
    this header (structures would be misread), OSError if it cannot be loaded.
    """

    def __init__(
        self, path: str | Path | None = None, sources: Sources | None = None, variant: build.Variant = build.PLAIN
    ):
        self.sources = sources or find_sources()
        self.interface = Interface(self.sources)
        self.path = Path(path) if path is not None else self._built(variant)
        self.ffi = self.interface.ffi
        self.lib: Any = self.ffi.dlopen(str(self.path.resolve()))
        self._check_layout()
        host = build.build("host", [_HOST], [self.sources.include], [self.sources.header])
        self.host: Any = self.ffi.dlopen(str(host))
        self._step = self.ffi.addressof(self.lib, "mrd_step")

    def _built(self, variant: build.Variant) -> Path:
        units = self.sources.c_files
        headers = [path for path in self.sources.all_files if path not in units]
        return build.build("mrd", units, [self.sources.include], headers, variant)

    def _check_layout(self) -> None:
        try:
            table = self.lib.mrd_layout
        except (AttributeError, KeyError):  # which of them depends on the version of cffi
            raise LayoutError(f"{self.path}: exports no layout table; build it with src/layout.c") from None
        for i, (meaning, want) in enumerate([*self.interface.layout(), ("end of the layout table", LAYOUT_END)]):
            if table[i] != want:
                have = "missing" if table[i] == LAYOUT_END else table[i]
                raise LayoutError(f"{self.path}: {meaning} is {have}, this header has {want}; build it from this header")

    def pointer(self, ctype: str, array: np.ndarray) -> Any:
        """A C pointer to the memory of a contiguous array of records."""
        return self.ffi.from_buffer(ctype, array)

    def init(self, config: np.ndarray) -> int:
        """mrd_init on one record."""
        return self.lib.mrd_init(self.ffi.addressof(self.pointer("mrd_config[]", config.reshape(1)), 0))

    def reset(self, states: np.ndarray) -> None:
        """mrd_reset on every record."""
        pointer = self.pointer("mrd_state[]", states)
        for i in range(len(states)):
            self.lib.mrd_reset(self.ffi.addressof(pointer, i))

    def step_many(self, states: np.ndarray, configs: np.ndarray, inputs: np.ndarray, outputs: np.ndarray) -> None:
        """mrd_step once on each of n controllers; all arguments are contiguous record arrays (n,)."""
        self.host.host_step_many(
            self._step,
            self.pointer("mrd_state[]", states),
            self.pointer("mrd_config[]", configs),
            self.pointer("mrd_inputs[]", inputs),
            self.pointer("mrd_outputs[]", outputs),
            len(states),
        )

    def run(self, state: np.ndarray, config: np.ndarray, inputs: np.ndarray, outputs: np.ndarray) -> None:
        """mrd_step n times on one controller: state, config (1,), inputs and outputs (n,)."""
        self.host.host_run(
            self._step,
            self.pointer("mrd_state[]", state),
            self.pointer("mrd_config[]", config),
            self.pointer("mrd_inputs[]", inputs),
            self.pointer("mrd_outputs[]", outputs),
            len(inputs),
        )

    def telemetry(self, outputs: np.ndarray) -> bytes:
        """mrd_telemetry of every record (n,): n frames, one after the other."""
        size = self.lib.MRD_TELEMETRY_BYTES
        frames = self.ffi.new("uint8_t[]", size * len(outputs))
        pointer = self.pointer("mrd_outputs[]", np.ascontiguousarray(outputs))
        for i in range(len(outputs)):
            self.lib.mrd_telemetry(self.ffi.addressof(pointer, i), frames + i * size)
        return bytes(self.ffi.buffer(frames))
