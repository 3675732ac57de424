"""The faults on the page: every cell, figure and verdict is that of the results, made up here so that none is like another."""

from dataclasses import replace

import numpy as np
import pytest
from review.test_page import COMMAND, Reader, rows

from pyharness.exact import constants as mrd
from pyharness.faults import Case, Matrix, Outcome, Result, Watched
from pyharness.faults.bits import Tally
from pyharness.faults.catalogue import BY_NAME, Setting
from pyharness.faults.moments import Moment
from pyharness.loop import Flight
from pyharness.review import FaultsFlown, page, render, review_data
from pyharness.review.fault_checks import fault_checks

EARLY, SETTLED, FOR_GOOD = Moment("early", 62), Moment("settled", 4000), Moment("half-way, for good", 900, stays=True)
SETTLED_AT = 2400
CAUGHT, FORGOTTEN, WILD = "caught in the same cycle", "inputs forgotten", "beyond a limit"


@pytest.fixture(scope="module")
def scaling(flights):
    return flights[0].scaling


@pytest.fixture(scope="module")
def results(scaling):
    def result(name, moment, outcome, later_s=None, shown_after=1, worst_a_m2=0.0, final_deg_s=0.25, problems=()):
        fault, setting = BY_NAME[name], Setting(scaling, moment.cycle, 2**31)
        case = Case(fault, moment, setting, Flight(scaling, 5000))
        return Result(case, shown_after, worst_a_m2, outcome, later_s, final_deg_s, tuple(problems))

    return (
        result("MAG_MISSING", EARLY, Outcome.LATER, 88.4),
        result("MAG_MISSING", SETTLED, Outcome.AS_WITHOUT, 0.0),
        result("MAG_MISSING", FOR_GOOD, Outcome.HELD, final_deg_s=9.87),
        result("MAG_FROZEN", EARLY, Outcome.LATER, 31.0, shown_after=17),
        result("MAG_FROZEN", SETTLED, Outcome.LATER, 412.0, shown_after=19),
        result("GYRO_FROZEN", FOR_GOOD, Outcome.DAMPED, shown_after=41, worst_a_m2=0.0873),
        result("COIL_OPEN", FOR_GOOD, Outcome.TOLD, shown_after=7, worst_a_m2=0.2),
        result("COIL_REVERSED", FOR_GOOD, Outcome.UNSEEN, shown_after=None, final_deg_s=3.21),
        result("TIME_WRAP", EARLY, Outcome.AS_WITHOUT, -3.0, shown_after=None),
        result("FLIP_CONFIG", EARLY, Outcome.SAFE, 3.2),
    )


def tally(moment, part, tried, wild=0, examples=(), **counts):
    return Tally(moment, part, tried, **{"caught": 0, "unchanged": 0, "forgotten": 0, "lasting": 0, "longest": 0, **counts}, wild=wild, examples=examples)


TALLIES = (
    tally("hold-off", "state", 1001, caught=1001, unchanged=1001),
    tally("hold-off", "config", 503, caught=503, lasting=503),
    tally("hold-off", "inputs", 307, unchanged=300, forgotten=7, longest=2),
    tally("damping", "state", 1001, caught=1001, forgotten=1001, longest=5),
    tally("damping", "config", 503, caught=503, lasting=503),
    tally("damping", "inputs", 307, unchanged=200, forgotten=107, longest=3),
)


@pytest.fixture(scope="module")
def faults(flights, scaling, results):
    mode = np.full(5000, mrd.MRD_MODE_DAMPING, np.uint16)
    mode[SETTLED_AT:] = mrd.MRD_MODE_SETTLED
    nominal = Watched(Flight(scaling, 5000), np.zeros(5000, np.uint32), mode, np.zeros((5000, 3), np.int16), np.ones(5000, np.float32))
    return FaultsFlown(Matrix(nominal, results), TALLIES, flights[0].interface.header)


@pytest.fixture
def shown(flights, vectors, monkeypatch):
    """Read the page of these faults; figures do not matter here."""
    monkeypatch.setattr(page, "PLOTS", [])
    return lambda faults: Reader(render(review_data(flights, vectors, COMMAND, faults=faults)))


def with_results(faults, *results):
    return replace(faults, matrix=replace(faults.matrix, results=results))


def with_problem(faults, index, *problems):
    results = list(faults.matrix.results)
    results[index] = replace(results[index], problems=problems)
    return with_results(faults, *results)


def check(faults, part):
    (found,) = [check for check in fault_checks(faults) if part in check.name]
    return found


def test_without_faults_the_page_claims_nothing_of_them(shown):
    reader = shown(None)
    section, verdict = rows(reader, "faults"), rows(reader, "verdict")
    assert f"{COMMAND} --faults" in section and "PASS" not in section and "FAIL" not in section
    assert "Nothing is said here about faults" in verdict
    assert not any(words in verdict for words in ("ended as declared", "flip", "a limit"))
    assert "phasing" not in rows(reader, "caution")


def test_matrix_has_a_short_outcome_in_each_place(shown, faults):
    section = rows(shown(faults), "faults")
    matrix, declared = section.split("What is declared of each fault")
    assert "early at 31 s settled at 2000 s half-way, for good at 450 s" in matrix
    for row in (
        "magnetometer no sample +88 s as without held ",
        "the same counts again and again +31 s +412 s gyro ",
        "coils open circuit, no current told ",
        "leads reversed, dipole the wrong way round not seen ",
        "time clock wraps as without ",
        "computer flipped bit in the configuration safe in 3 s ",
    ):
        assert row in matrix
    assert "FAIL" not in matrix
    assert "Without a fault the mission settles 1200 s after" in matrix
    assert "settled 412 s later" in declared


def test_cells_stand_under_their_moment(faults):
    by_name = {row.fault.name: row for row in faults.rows}
    cells = [by_name["MAG_FROZEN"].cell(moment) for moment in faults.moments]
    assert [cell and cell.text for cell in cells] == ["+31 s", "+412 s", None]
    safe = next(r for r in faults.matrix.results if r.outcome is Outcome.SAFE)
    assert with_results(faults, replace(safe, later_s=0.0)).rows[0].cell("early").text == "safe at once"
    assert by_name["COIL_REVERSED"].cell("half-way, for good").style == "unseen"
    assert [part for part, _ in faults.groups] == ["magnetometer", "gyro", "coils", "time", "computer"]


def test_a_fault_that_is_not_as_declared_is_called_out_everywhere(shown, faults):
    reader = shown(with_problem(faults, 1, "showed after 3 cycles, declared: within 1"))
    section, verdict = rows(reader, "faults"), rows(reader, "verdict")
    assert "FAIL Not as declared: magnetometer: no sample, settled: showed after 3 cycles, declared: within 1" in section
    assert "no sample +88 s FAIL as without held " in section
    assert "FAIL Every fault ended as declared 9 of 10 flights with 7 faults" in verdict


def test_declared_stands_beside_measured(shown, faults):
    section = rows(shown(faults), "faults")
    frozen, limit = BY_NAME["MAG_FROZEN"], faults.matrix.scaling.config["path"]["frozen_limit"]
    assert (
        f"the same counts again and again MAG_FROZEN counter mag_faults {limit}: frozen_limit {frozen.does} Recovery: {frozen.recovers} "
        "passing: as without, later; for good: held 19 0 settled 412 s later 0.25 "
    ) in section
    assert " 41 87.3 damped, not handed over 0.25 " in section
    assert " as without, later; for good: held 1 0 settled as without the fault; settled 88 s later; coils off while it lasts 9.87 " in section
    assert "clock wraps no bit no counter does not show" in section and "not told – not stopped, not seen in flight 3.21 " in section


def test_shown_in_some_flights_only_is_said(faults, results):
    silent = with_results(faults, results[3], replace(results[4], shown_after=None))
    assert silent.rows[0].shown_after == "17; not told in 1 of 2 flights"
    by_name = {row.fault.name: row for row in faults.rows}
    assert by_name["COIL_REVERSED"].shown_after == "not told" and by_name["TIME_WRAP"].shown_after == "–"  # has no bit


def test_what_may_go_unseen_is_a_caution(shown, faults):
    caution = rows(shown(faults), "caution")
    assert (
        "only the phasing test on the hardware is sure to show them: leads reversed, dipole the wrong way round (coils, not told in any flight here); "
        "open circuit, no current (coils)."
    ) in caution


def test_without_a_fault_that_may_go_unseen_there_is_no_such_caution(shown, faults, results):
    assert "phasing" not in rows(shown(with_results(faults, *results[:5])), "caution")


def test_faults_of_what_the_mission_lacks_are_named(shown, faults, results):
    without_gyro = with_results(faults, *(r for r in results if not r.case.fault.name.startswith("GYRO")))
    section = rows(shown(without_gyro), "faults")
    assert "gyro: the same counts again and again" in section.split("Not flown")[1].split("What is declared")[0]


def test_flips_have_their_table_and_totals(shown, faults):
    section = rows(shown(faults), "faults").split("Every single bit flipped")[1]
    assert (
        "3622 flips at 2 moments: of 3008 in state and configuration 3008 were caught in the same cycle with all coils off; "
        "of 614 in the inputs 500 had no effect, 114 were forgotten after at most 3 cycles and 0 differed to the end; 0 led to a pulse"
    ) in section
    assert "hold-off state 1001 1001 1001 0 – 0 0 PASS configuration 503 503 0 0 – 503 0 PASS inputs 307 – 300 7 2 0 0 PASS damping state" in section


def test_checks_of_faults_hold_with_their_figures(faults):
    assert [check.passed for check in fault_checks(faults)] == [True] * 4
    assert check(faults, "as declared").figure == "10 of 10 flights with 7 faults"
    assert check(faults, CAUGHT).figure == "3008 of 3008"
    assert check(faults, FORGOTTEN).figure == "614 of 614, after at most 3 cycles"
    assert check(faults, WILD).figure == "0 in 3622 flips"


@pytest.mark.parametrize(
    ("index", "wrong", "fails", "figure"),
    [
        (3, {"caught": 1000, "examples": ("path.field[0] bit 9",)}, {CAUGHT}, "3007 of 3008; damping, state, path.field[0] bit 9"),
        (1, {"examples": ("law bit 0",)}, {CAUGHT}, "3008 of 3008; hold-off, config, law bit 0"),  # caught, but not safe for good
        (5, {"forgotten": 106, "lasting": 1, "examples": ("command bit 1",)}, {FORGOTTEN}, "613 of 614, after at most 3 cycles; damping, inputs, command bit 1"),
        (5, {"wild": 2, "examples": ("path.mag_raw[1] bit 7",)}, {FORGOTTEN, WILD}, "2 in 3622 flips"),
    ],
)
def test_a_flip_that_is_not_answered_fails_its_check(faults, index, wrong, fails, figure):
    tallies = list(TALLIES)
    tallies[index] = replace(tallies[index], **wrong)
    bad = replace(faults, tallies=tuple(tallies))
    failed = {part: check(bad, part) for part in (CAUGHT, FORGOTTEN, WILD) if not check(bad, part).passed}
    assert set(failed) == fails and figure in [check.figure for check in failed.values()]


def test_nothing_flown_or_flipped_shows_nothing(faults):
    empty = replace(with_results(faults), tallies=())
    assert not any(check.passed for check in fault_checks(empty))


def test_verdict_counts_the_checks_of_faults(shown, faults):
    assert "4 of 14 checks do not hold" in rows(shown(faults), "verdict")
    assert "4 of 10 checks do not hold" in rows(shown(None), "verdict")
