"""The integer configuration in words: what each field holds, and the physical value of its integers."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from pyharness.flight import Interface
from pyharness.scaling import FULL_SCALE, NEVER_A_JUMP, Q15, Scaling


@dataclass(frozen=True)
class Row:
    """One field of the configuration."""

    name: str  # "path.mag.matrix"
    integers: tuple[int, ...]
    value: str  # what they stand for, with unit; "" where they stand for themselves


def describe_config(scaling: Scaling, interface: Interface) -> list[Row]:
    """Every field, in the order of mrd.h."""
    return [Row(name, integers, _value(name, integers, scaling, interface)) for name, integers in flatten(scaling.config)]


def describe_resolution(scaling: Scaling) -> list[tuple[str, str]]:
    """What one count is worth, and how far the counts reach: (quantity, text)."""
    s, deg = scaling, math.degrees
    rows = [
        ("field", f"{s.field_t * 1e9:.4g} nT a count, up to {s.field_t * 32767e6:.4g} µT"),
        ("derivative of the field", f"{s.field_t / s.period_s * 1e9:.4g} nT/s a count, up to {s.field_t / s.period_s * 32767e6:.4g} µT/s"),
        ("rate", f"{deg(s.rate_rad_s):.4g} °/s a count, up to {deg(s.rate_rad_s) * 32767:.4g} °/s"),
    ]  # fmt: skip
    for axis, limit in zip("xyz", s.dipole_a_m2, strict=True):
        rows.append((f"command on {axis}", f"{limit / Q15 * 1e6:.4g} µA m² a count, up to {limit:.4g} A m² over the cycle"))
    tick = s.timeline.tick_us
    rows.append(("pulse", f"{tick} µs a tick, up to {s.config['path']['window_ticks']} ticks"))
    rows.append(("gain", f"k = {s.gain.k_am2_s_per_t:.4g} A m² s/T, K = {s.gain.K_n_m_s:.4g} N m s at the rms field of "
                         f"{s.gain.rms_field_t * 1e6:.4g} µT, from {s.gain.origin}"))  # fmt: skip
    return rows


def flatten(config: dict, prefix: str = "") -> Iterator[tuple[str, tuple[int, ...]]]:
    """(name, integers) of every field of a nested configuration."""
    for key, value in config.items():
        if isinstance(value, dict):
            yield from flatten(value, f"{prefix}{key}.")
        else:
            yield f"{prefix}{key}", value if isinstance(value, tuple) else (value,)


_CHOICES = {"law": "MRD_LAW_", "gain_scaling": "MRD_GAIN_", "saturation": "MRD_SATURATE_", "settle_by": "MRD_SETTLE_BY_"}
"""Fields that hold a named constant, and how its name begins."""


def _value(name: str, integers: tuple[int, ...], s: Scaling, interface: Interface) -> str:
    leaf = name.rpartition(".")[2]
    number = integers[0]
    if leaf.startswith("current_"):
        return _current(leaf, integers, s)
    if leaf.endswith("_us"):
        return _all(integers, 1e-3, "ms")
    if leaf.endswith("_ticks"):
        return _all(integers, s.timeline.tick_us * 1e-3, "ms")
    if leaf in _CHOICES:
        return interface.header.named(_CHOICES[leaf])[number].lower().replace("_", " ")
    if leaf in _DEFENCES:
        return _defence(leaf, number, s)
    if leaf in ("settled_rate", "wake_rate"):
        return _all(integers, math.degrees(s.rate_rad_s), "°/s")
    if leaf in ("settle_dwell", "wake_dwell", "window_cycles", "pause_cycles"):
        return _all(integers, s.period_s, "s")
    if leaf in ("norm_min_sq", "norm_max_sq"):
        return f"{math.sqrt(number) * s.field_t * 1e6:.4g} µT"
    if leaf == "filter_gain":
        return "no low-pass" if number == Q15 else f"pole {1 - number / Q15:.4g}"
    if leaf == "hold_off_s":
        return f"{number} s"
    if name.startswith("path.mag."):
        return _sensor(leaf, integers, s.config["path"]["mag"]["shift"], s.raw_field_t * 1e9, s.field_t * 1e9, "nT")
    if name.startswith("path.gyro."):
        if s.raw_rate_rad_s is None:
            return "not fitted"
        raw, count = math.degrees(s.raw_rate_rad_s), math.degrees(s.rate_rad_s)
        return _sensor(leaf, integers, s.config["path"]["gyro"]["shift"], raw, count, "°/s")
    if name.startswith("path.rate_gain.") and s.mission.control.law != "rate":
        return "not used by this law"
    if leaf == "mantissa" and "_gain." in name:
        shifts = s.config["path"][name.split(".")[1]]["shift"]
        return "  ".join(f"{m / 2.0**h:.5g}" for m, h in zip(integers, shifts, strict=True)) + " in counts"
    if leaf == "digest":
        return f"0x{number:08x}"
    return ""


_OFF = {
    "jump_max_sq": NEVER_A_JUMP, "noise_limit": 65535, "frozen_limit": 0, "dead_limit": 0, "gyro_frozen_limit": 0,
    "agree_limit": 0, "guard_turn": 65535,
}  # fmt: skip
"""Defences, and the value that switches each off."""
_DEFENCES = (*_OFF, "agree_mantissa", "agree_shift", "agree_rate_max", "growth", "progress", "stall_turn")


def _defence(leaf: str, number: int, s: Scaling) -> str:
    if number == _OFF.get(leaf):
        return "off"
    if leaf in ("guard_turn", "stall_turn"):
        return f"{math.degrees(2.0 * math.asin(number / 65536.0)) / s.period_s:.4g} °/s"
    if leaf.endswith(("frozen_limit", "dead_limit")):
        return f"{number * s.period_s:.5g} s"
    if leaf == "jump_max_sq":
        return f"{math.sqrt(number) * s.field_t * 1e6:.4g} µT"
    if leaf == "noise_limit":
        return f"{number * s.field_t * 1e6:.4g} µT"
    if leaf == "growth":
        return f"diverging at {100 * (number / 256 - 1):.4g} % more than a window before"
    if leaf == "progress":
        return f"no progress at less than {100 * (1 - number / 256):.4g} % below two windows before"
    return _agreement(leaf, number, s)


def _agreement(leaf: str, number: int, s: Scaling) -> str:
    path = s.config["path"]
    if not path["agree_limit"]:
        return "not compared"
    if leaf == "agree_limit":
        return f"{math.degrees(number / FULL_SCALE / s.period_s):.4g} °/s in the greatest plausible field"
    if leaf == "agree_rate_max":
        return f"{math.degrees(number * s.rate_rad_s):.5g} °/s"
    return f"{number / 2.0 ** path['agree_shift']:.5g} in counts" if leaf == "agree_mantissa" else ""


def _current(leaf: str, integers: tuple[int, ...], s: Scaling) -> str:
    sense = s.mission.current_sense
    if sense is None:
        return "not fitted"
    if leaf == "current_fitted":
        return "fitted"
    if leaf == "current_ticks":
        return _all(integers, s.timeline.tick_us * 1e-3, "ms")
    return _all(integers, 100.0 / sense.counts_at_full, "% of full current")


def _sensor(leaf: str, integers: tuple[int, ...], shift: int, raw: float, count: float, unit: str) -> str:
    if leaf == "matrix":
        return "  ".join(f"{m / 2**shift * count / raw:.4f}" for m in integers)
    if leaf == "offset":
        return _all(integers, count, unit)
    return f"{integers[0] * raw:.6g} {unit}" if leaf == "limit" else ""


def _all(integers: tuple[int, ...], step: float, unit: str) -> str:
    return "  ".join(f"{i * step:.5g}" for i in integers) + f" {unit}"


def c_header(scaling: Scaling, interface: Interface) -> str:
    """A C header that defines `mission_config`, with the physical value beside each integer."""
    rows = {row.name: row for row in describe_config(scaling, interface)}
    lines = [
        "/*",
        f" * Integer configuration of the mission {_comment(scaling.mission.name)},",
        f" * written by `slackwater scale --header` from mission file {scaling.mission.digest}. Do not edit: change the mission and write anew.",
        " * A reference, not flight-qualified; show the polarity of every coil and sensor axis on the hardware.",
        " */",
        "#ifndef MISSION_CONFIG_H",
        "#define MISSION_CONFIG_H",
        "",
        '#include "mrd.h"',
        "",
        *(f"/* {what}: {_comment(text)} */" for what, text in describe_resolution(scaling)),
        "",
        "static const mrd_config mission_config = {",
        *_initialiser(scaling.config, rows, interface),
        "};",
        "",
        "#endif",
        "",
    ]
    return "\n".join(lines)


def _initialiser(config: dict, rows: dict[str, Row], interface: Interface, prefix: str = "") -> Iterator[str]:
    indent = "    " * (prefix.count(".") + 1)
    for key, value in config.items():
        name = f"{prefix}{key}"
        if isinstance(value, dict):
            yield f"{indent}.{key} = {{"
            yield from _initialiser(value, rows, interface, f"{name}.")
            yield f"{indent}}},"
        elif key in _CHOICES:
            yield f"{indent}.{key} = {_CHOICES[key]}{interface.header.named(_CHOICES[key])[value]},"
        else:
            integers = [_literal(i) for i in (value if isinstance(value, tuple) else (value,))]
            body = f"{{{', '.join(integers)}}}" if isinstance(value, tuple) else integers[0]
            comment = f" /* {_comment(rows[name].value)} */" if rows[name].value else ""
            yield f"{indent}.{key} = {body},{comment}"


def _literal(value: int) -> str:
    return f"{value}u" if value > 32767 else str(value)  # only unsigned fields hold more


_ASCII = str.maketrans({"µ": "u", "°": "deg", "²": "^2", "·": "*", "–": "-", "−": "-"})


def _comment(text: str) -> str:
    """Text that may stand in a C comment: ASCII, on one line, without an end of comment."""
    return text.translate(_ASCII).encode("ascii", "replace").decode().replace("*/", "* /").replace("\n", " ")
