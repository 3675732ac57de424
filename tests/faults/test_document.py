"""The table of faults in the arithmetic document is the list."""

from __future__ import annotations

from pathlib import Path

from pyharness.faults.document import markdown_table
from pyharness.flight import Interface, find_sources

DOCUMENT = Path(__file__).parents[2] / "fsw_c" / "README.md"


def test_the_table_is_that_of_the_list():
    """Print it anew with `python -m pyharness.faults.document`."""
    text = DOCUMENT.read_text(encoding="utf-8")
    begin, end = text.index("<!-- faults -->\n"), text.index("<!-- end of faults -->")
    assert text[begin:end].partition("\n")[2].strip() == markdown_table(Interface(find_sources()).header)
