"""Digests: a fold over fields instead of bytes, so that byte order and padding do not matter."""

from __future__ import annotations

from collections.abc import Iterable

from pyharness.exact.fields import CONFIG, STATE, Nested, Struct
from pyharness.exact.num import Record

BASIS = 2166136261
PRIME = 16777619
_MASK = 2**32 - 1


def fnv1a(h: int, word: int) -> int:
    """One step of FNV-1a (Fowler, Noll, Vo), 32 bits: the word, unsigned, into the hash."""
    return ((h ^ word) * PRIME) & _MASK


def fold(words: Iterable[int]) -> int:
    """The digest of a chain of words, each unsigned.

    The shift spreads the high bits, which the product alone never moves.
    """
    h = BASIS
    for word in words:
        h = fnv1a(h, word)
        h ^= h >> 15
    return h


def _plan(struct: Struct) -> tuple[tuple[str, int, tuple | None, bool], ...]:
    """What the walk needs of each entry: name, mask of its width, plan of a nested struct, array or not."""
    return tuple(
        (entry.name, 0, _plan(entry.struct), entry.count > 1) if isinstance(entry, Nested)
        else (entry.name, (1 << entry.bits) - 1, None, entry.count > 1)
        for entry in struct if entry.name != "digest"
    )


def _collect(words: list[int], record: Record, plan: tuple) -> None:
    for name, mask, nested, is_array in plan:
        value = record[name]
        if nested is not None:
            for element in value if is_array else (value,):
                _collect(words, element, nested)
        elif is_array:
            words += [element & mask for element in value]
        else:
            words.append(value & mask)


_CONFIG_PLAN = _plan(CONFIG)
_STATE_PLAN = _plan(STATE)


def config_digest(config: Record) -> int:
    """The digest of all fields of a configuration but `digest` itself, which may be absent."""
    words: list[int] = []
    _collect(words, config, _CONFIG_PLAN)
    return fold(words)


def state_digest(state: Record) -> int:
    """The digest of all fields of a state but `digest` itself, which may be absent."""
    words: list[int] = []
    _collect(words, state, _STATE_PLAN)
    return fold(words)
