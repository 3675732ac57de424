"""The list of faults: the C's and Python's are the same, and the golden vectors show what it says."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from pyharness.faults.catalogue import BY_NAME, FAULTS, Setting
from pyharness.flight import Interface, find_sources
from pyharness.mission import demo_path
from pyharness.scenarios import FAULT_FIRST, FAULTY
from pyharness.vectors import read_vector

LOOP = Path(__file__).parents[2] / "vectors" / "loop"
INTERFACE = Interface(find_sources())

WITHOUT_VECTOR = {
    "COIL_REVERSED": "shows in the motion only, over orbits",
    "COILS_SWAPPED": "shows in the motion only, over orbits",
    "TIME_WRAP": "needs no defence: loop/stamp-wrap",
    "FLIP_STATE": "in memory, not in inputs",
    "FLIP_CONFIG": "in memory, not in inputs",
    "RESTART": "in memory, not in inputs",
    "MODE_ILLEGAL": "in memory, not in inputs",
}


def test_the_faults_are_those_of_the_header_in_its_order():
    named = INTERFACE.header.named("MRD_F_")
    assert [fault.name for fault in FAULTS] == [named[number] for number in range(len(named))]
    assert all(INTERFACE.header.texts[f"MRD_F_{fault.name}"] for fault in FAULTS)


def test_each_fault_shows_by_the_same_bits_in_the_c(library):
    count = library.interface.header.constants["MRD_F_COUNT"]
    assert count == len(FAULTS)
    c = {fault.name: library.lib.mrd_fault_status[i] for i, fault in enumerate(FAULTS)}
    assert c == {fault.name: fault.mask for fault in FAULTS}


def test_each_fault_is_told_by_a_counter_that_exists():
    counters = INTERFACE.outputs["counters"].names
    for fault in FAULTS:
        assert fault.counter in ("", *counters), fault.name
        assert fault.passing or fault.lasting, f"{fault.name} has no declared outcome"


def test_each_fault_that_shows_in_inputs_has_a_golden_vector():
    with_vector = {scenario.fault for scenario in FAULTY}
    assert not with_vector & set(WITHOUT_VECTOR)
    assert with_vector | set(WITHOUT_VECTOR) == set(BY_NAME)
    assert all((LOOP / f"{scenario.name}.csv").is_file() for scenario in FAULTY)


@pytest.mark.parametrize("scenario", FAULTY, ids=lambda s: s.name)
def test_its_golden_vector_shows_it_in_time(scenario):
    """By one of its bits, which none had before; within what the list says; and a fault that holds has no pulse meanwhile."""
    fault, vector = BY_NAME[scenario.fault], read_vector(LOOP / f"{scenario.name}.csv", INTERFACE)
    status, counters = vector.outputs["status"], vector.outputs["counters"]
    shows = np.flatnonzero(status & np.uint32(fault.mask))
    shows = shows[shows >= 2]  # nothing is known of the coils in the first cycle, and there is no sample before the second
    if not fault.mask:
        pytest.skip("need not show")
    from_the_start = scenario.fault == "TIP_OFF"
    assert shows.size and (from_the_start or shows[0] >= FAULT_FIRST)
    within = fault.within.cycles(Setting(scenario.scaling(str(demo_path())), FAULT_FIRST, FAULT_FIRST + scenario.fault_lasts))
    assert within is None or shows[0] - FAULT_FIRST + 1 <= within
    assert not fault.counter or counters[fault.counter][-1] > counters[fault.counter][0 if from_the_start else FAULT_FIRST - 1]
    assert not (fault.holds and (vector.outputs["ticks"][shows] != 0).any())
