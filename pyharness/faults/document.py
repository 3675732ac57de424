"""The list of faults as the table in fsw_c/README.md: `python -m pyharness.faults.document` prints it."""

from __future__ import annotations

from pyharness.faults.catalogue import FAULTS, Fault, Outcome
from pyharness.flight import Interface, find_sources
from pyharness.flight.header import Header

HEAD = ("fault", "shows by", "within cycles", "the controller", "goes on", "counter", "comes of it")


def markdown_table(header: Header) -> str:
    """The table, texts from the header."""
    rows = [HEAD, ("---",) * len(HEAD), *(_row(fault, header) for fault in FAULTS)]
    return "\n".join(f"| {' | '.join(row)} |" for row in rows)


def _row(fault: Fault, header: Header) -> tuple[str, ...]:
    shows = " or ".join(f"`{name}`" for name in fault.shows.split()) or "-"
    counter = f"`{fault.counter}`" if fault.counter else "-"
    ends = [f"{when}: {', '.join(o.value for o in Outcome if o in outcomes)}" for when, outcomes in
            (("passing", fault.passing), ("for good", fault.lasting)) if outcomes]  # fmt: skip
    return header.texts[f"MRD_F_{fault.name}"], shows, fault.within.text, fault.does, fault.recovers, counter, "; ".join(ends)


if __name__ == "__main__":
    print(markdown_table(Interface(find_sources()).header))
