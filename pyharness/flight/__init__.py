"""The C controller on this machine: its sources, builds of them, and the header as Python sees it."""

from pyharness.flight.build import PLAIN, BuildError, Variant
from pyharness.flight.library import Interface, LayoutError, Library
from pyharness.flight.sources import Sources, SourcesError, find_sources

__all__ = [
    "PLAIN", "BuildError", "Interface", "LayoutError", "Library", "Sources", "SourcesError", "Variant", "find_sources",
]
