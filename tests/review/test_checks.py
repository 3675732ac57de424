"""Each check decides by what flew: it holds for a good flight and falls for the one thing that is wrong."""

from dataclasses import replace

import numpy as np
import pytest
from review.conftest import LATE, with_mission

from pyharness.review import checks
from pyharness.review.checks import sample_gaps_us
from pyharness.review.numbers import NEVER, numbers


def found(part, flights, vectors, **options):
    """The one check whose name holds the part."""
    (check,) = [c for c in checks(flights, vectors, **options) if part in c.name]
    return check


def with_record(flown, **changes):
    return replace(flown, record=replace(flown.record, **changes))


def with_outputs(flown, change):
    outputs = flown.record.outputs.copy()
    change(outputs)
    return with_record(flown, outputs=outputs)


def blanked_late(flown):
    """Cycles with a blanked sample but for the first, in which nothing is known of the coils."""
    return 1 + np.flatnonzero(flown.bit("BLANKED")[1:])


def test_every_flight_and_every_promise_has_its_check(flights, vectors):
    names = [check.name for check in checks(flights, vectors)]
    assert len(set(names)) == len(names) == 3 * len(flights) + 4
    for flown in flights:
        assert sum(flown.title in name for name in names) == 3


def test_detumbled_looks_at_the_last_true_rate(flown, vectors):
    assert not found("Detumbled", [flown], vectors).passed  # 450 s are not enough
    rate = flown.record.rate_rad_s.copy()
    rate[-1] = np.radians((0.3, 0.0, 0.39))  # ‖ω‖ = 0.492 °/s
    check = found("Detumbled", [with_record(flown, rate_rad_s=rate)], vectors)
    assert check.passed and "19.10 to 0.492 °/s in 450 s" in check.figure
    rate[-1] = np.radians((0.3, 0.0, 0.41))  # ‖ω‖ = 0.508 °/s
    assert not found("Detumbled", [with_record(flown, rate_rad_s=rate)], vectors).passed


def test_how_slow_is_slow_enough_is_the_mission_s_to_say(flown, vectors):
    rate = flown.record.rate_rad_s.copy()
    rate[-1] = np.radians((1.5, 0.0, 0.0))
    flown = with_record(flown, rate_rad_s=rate)
    for settled_deg_s, passed in ((2.0, True), (1.4, False)):
        other = with_mission(flown, control={"settled_deg_s": settled_deg_s})
        check = found(f"ends below {settled_deg_s:g} °/s", [other], vectors)
        assert check.passed is passed
        row = dict(numbers([other]))[f"True ‖ω‖ first below {settled_deg_s:g} °/s"]
        assert row == ["449.5 s" if passed else NEVER]


def test_settled_needs_the_flag_in_time(flown, vectors):
    assert found("Settled", [flown], vectors).passed is False

    def settle(outputs):
        outputs["handover"][700:] = 1

    settled = with_outputs(flown, settle)
    assert found("Settled", [settled], vectors, settle_within_s=350.0).passed
    assert not found("Settled", [settled], vectors, settle_within_s=349.0).passed
    assert "at 350 s" in found("Settled", [settled], vectors).figure


def test_controller_beyond_its_bound(flown, vectors):
    assert found("within its bound", [flown], vectors).passed
    error = flown.comparison.command_error.copy()
    error[500, 1] = flown.comparison.command_bound[500, 1] * 1.01
    wrong = replace(flown, comparison=replace(flown.comparison, command_error=error))
    check = found("within its bound", [wrong], vectors)
    assert not check.passed and "101.0 %" in check.figure


def test_a_comparison_in_which_no_law_acted_proves_nothing(flown, vectors):
    idle = replace(flown, comparison=replace(flown.comparison, active=np.zeros(flown.cycles, dtype=bool)))
    assert not found("within its bound", [idle], vectors).passed


def test_late_switch_off_leads_to_blanked_samples_that_are_not_used(flown, vectors):
    blanked = blanked_late(flown)
    assert len(blanked) > 5 and set(blanked) <= set(range(LATE.start + 1, LATE.stop + 1))
    assert found("blanking", [flown], vectors).passed


@pytest.mark.parametrize("gate_lies", [False, True])
def test_a_blanked_sample_that_is_used_is_found_also_when_the_gate_reports_it_as_old(
    flown, vectors, gate_lies
):
    cycle = blanked_late(flown)[0]

    def trust(outputs):
        outputs["trace"]["gate"]["trusted"][cycle] = 1
        if gate_lies:
            outputs["trace"]["gate"]["age_us"][cycle] = 10**6

    check = found("blanking", [with_outputs(flown, trust)], vectors)
    assert not check.passed and check.figure.startswith("1 trusted")


def test_pulse_into_the_next_sample(flown, vectors):
    assert found("during a sample", [flown], vectors).passed
    # From the drive window to the next sample: 500 + 60 - 90 ms, 4700 ticks.
    for ticks, passed in ((4700, True), (4701, False)):
        applied = flown.record.applied_ticks.copy()
        applied[400] = (0, -ticks, 0)
        assert found("during a sample", [with_record(flown, applied_ticks=applied)], vectors).passed is passed


def test_gaps_follow_the_stamp_of_the_sample(flown):
    inputs = flown.record.inputs.copy()
    inputs["path"]["sample_us"][500] += 1500
    late = with_record(flown, inputs=inputs)
    on = flown.record.applied_ticks[499] != 0
    before, after = (a - b for a, b in zip(sample_gaps_us(late), sample_gaps_us(flown), strict=True))
    assert np.array_equal(before[499], np.where(on, 1500, 0)) and after[500] == -1500
    assert np.count_nonzero(before) == on.sum() > 0 and np.count_nonzero(after) == 1


def test_another_configuration_or_an_integrity_fault(flown, vectors):
    assert found("configuration", [flown], vectors).passed

    def other(outputs):
        outputs["digest"][10] ^= 1

    def corrupt(outputs):
        outputs["status"][10] |= np.uint32(1 << flown.constant("S_CONFIG_CORRUPT"))

    for change in (other, corrupt):
        assert not found("configuration", [with_outputs(flown, change)], vectors).passed


def test_vectors_must_be_there_and_pass(flown, vectors):
    check = found("Golden vectors", [flown], vectors)
    assert check.passed and check.figure == "2 of 2 files, 1237 rows"
    assert not found("Golden vectors", [flown], []).passed
    check = found("Golden vectors", [flown], [vectors[0], replace(vectors[1], passed=False)])
    assert not check.passed and check.figure.endswith("failed: unit/gate")
