"""What must hold whatever the host, the radiation or the operator does: on the C, in sequences that once went wrong."""

from __future__ import annotations

import numpy as np
import pytest
from fsw_c.runs import Bank
from fsw_c.sequences import KEY, PERIOD, PHASE, START, config_of, cycle, driven, end_of_pulses, has, redigested, trusted

from pyharness.exact import constants as mrd


@pytest.fixture(scope="module")
def rate_law() -> dict:
    return config_of()


def test_the_sequence_is_trusted_when_all_is_well(library, rate_law):
    outputs = Bank(library, rate_law).run([cycle(n, end_of_pulses(n - 1)) for n in range(6)])
    assert trusted(outputs) == [0, 1, 1, 1, 1, 1] and driven(outputs) == [False, True, True, True, True, True]


def test_a_stamp_from_before_the_pulse_does_not_clear_it(library, rate_law):
    """The host hands in the stamps of two cycles ago: they are new, and old enough, and of another pulse."""
    late = [cycle(n, end_of_pulses(n - 2)) for n in range(8)]
    outputs = Bank(library, rate_law).run(late)
    first = driven(outputs).index(True)
    assert trusted(outputs)[first + 1] == 0 and has(outputs, "SWITCH_OFF_UNSTAMPED")[first + 1]
    # The right stamp arrives one cycle later, without a pulse in between, and is taken.
    assert trusted(outputs)[first + 2] == 1


def test_a_pulse_that_is_never_stamped_blocks_for_ever(library, rate_law):
    outputs = Bank(library, rate_law).run([cycle(n, end_of_pulses(-3)) for n in range(40)])
    assert sum(driven(outputs)) == 1
    first = driven(outputs).index(True)
    assert not any(trusted(outputs)[first + 1 :]) and all(has(outputs, "SWITCH_OFF_UNSTAMPED")[first + 1 :])


def test_a_stamp_set_anew_while_the_coil_is_off_unblocks(library, rate_law):
    sequence = [cycle(n, end_of_pulses(-3)) for n in range(5)] + [cycle(5)] + [cycle(6, end_of_pulses(5))]
    outputs = Bank(library, rate_law).run(sequence)
    assert trusted(outputs)[3:] == [0, 0, 1, 1]


@pytest.mark.parametrize("spoilt", [{"sample_us": START + 4 * PERIOD + PHASE + 300_000}, {"mag_valid": 0, "cycle_start_us": START + 4 * PERIOD + 200_000}],
                         ids=["off its time", "missing, clock ahead"])  # fmt: skip
def test_a_rejected_time_does_not_make_a_switch_off_old(library, rate_law, spoilt):
    """The pulses end 20 ms late: 50 ms before the sample. A cycle with wrong times must not make that enough."""
    late = tuple(stamp + 20_000 for stamp in end_of_pulses(3))
    sequence = [cycle(n, end_of_pulses(n - 1)) for n in range(4)]
    plain = Bank(library, rate_law).run([*sequence, cycle(4, late)])
    assert driven(plain)[3] and trusted(plain)[4] == 0  # the control: too young
    again = cycle(4, late)
    outputs = Bank(library, rate_law).run([*sequence, cycle(4, late, **spoilt), again])
    assert trusted(outputs)[4:] == [0, 0] and has(outputs, "BLANKED")[5]


def test_a_coil_at_rest_stays_old_when_its_stamp_wraps(library, rate_law):
    """The same stamp for more than a wrap: trusted throughout, but for the one sample at which it looks young again."""
    hold = redigested({**rate_law, "supervisor": {**rate_law["supervisor"], "hold_off_s": 2**32 - 1}})
    n = 2**32 // PERIOD + 20
    outputs = Bank(library, hold).run([cycle(i, (START - PERIOD,) * 3) | wrapped(i) for i in range(n)])
    rejected = np.flatnonzero(np.array(trusted(outputs)) == 0)
    assert rejected[0] == 0 and len(rejected) <= 2


def wrapped(n: int) -> dict:
    """The path's inputs of cycle n with a clock that wraps."""
    start = (START + n * PERIOD) % 2**32
    return {"path": {**cycle(n)["path"], "switch_off_us": (START - PERIOD,) * 3, "cycle_start_us": start,
                     "sample_us": (start + PHASE) % 2**32}}  # fmt: skip


MODES = {mrd.MRD_MODE_HOLD_OFF: mrd.MRD_MODE_DAMPING, mrd.MRD_MODE_DAMPING: mrd.MRD_MODE_DAMPING, mrd.MRD_MODE_SETTLED: mrd.MRD_MODE_DAMPING,
         mrd.MRD_MODE_SAFE: mrd.MRD_MODE_SAFE, mrd.MRD_MODE_BENCH: mrd.MRD_MODE_SAFE, mrd.MRD_MODE_PAUSE: mrd.MRD_MODE_PAUSE}  # fmt: skip


@pytest.mark.parametrize("mode", [*MODES, *(m ^ 1 << bit for m in MODES for bit in range(16))])
def test_a_corrupt_state_keeps_coils_off_where_they_were(library, rate_law, mode):
    """SAFE, BENCH, and any value that is no mode (a flipped bit never makes another mode) restart as SAFE; PAUSE stays."""
    wanted = MODES.get(mode, mrd.MRD_MODE_SAFE)
    bank = Bank(library, rate_law)
    bank.run([cycle(0), cycle(1)])
    bank.state["mode"] = mode
    bank.state["path"]["field"][0, 0] ^= 4
    outputs = bank.run([cycle(n, end_of_pulses(n - 1)) for n in range(2, 8)])
    assert has(outputs, "STATE_RESTARTED") == [True] + [False] * 5
    damps = wanted == mrd.MRD_MODE_DAMPING
    assert outputs["mode"].tolist() == [mrd.MRD_MODE_HOLD_OFF if damps else wanted] + [wanted] * 5
    assert any(driven(outputs)) == damps


def test_a_corrupt_state_stays_inhibited(library, rate_law):
    bank = Bank(library, rate_law)
    bank.run([cycle(0), cycle(1), cycle(2, command=mrd.MRD_COMMAND_INHIBIT)])
    bank.state["counters"]["trusted"] ^= 1
    outputs = bank.run([cycle(n) for n in range(3, 8)])
    assert set(outputs["mode"].tolist()) == {mrd.MRD_MODE_INHIBIT} and not any(driven(outputs))


def test_a_corrupt_state_in_low_power_goes_on_by_itself(library, rate_law):
    """Only a commanded inhibit waits for resume."""
    bank = Bank(library, rate_law)
    bank.run([cycle(0), cycle(1), cycle(2, low_power=1)])
    assert bank.state["mode"] == mrd.MRD_MODE_INHIBIT
    bank.state["counters"]["trusted"] ^= 1
    assert set(bank.run([cycle(3, low_power=1)])["mode"].tolist()) == {mrd.MRD_MODE_INHIBIT}
    bank.state["counters"]["trusted"] ^= 1
    assert bank.run([cycle(n) for n in (4, 5)])["mode"].tolist() == [mrd.MRD_MODE_HOLD_OFF, mrd.MRD_MODE_DAMPING]


def test_every_single_flipped_bit_of_the_state_is_seen_at_once(library, rate_law):
    bank = Bank(library, rate_law)
    bank.run([cycle(n, end_of_pulses(n - 1)) for n in range(5)])
    sound = bank.state.copy()
    raw = np.frombuffer(sound.tobytes(), np.uint8)
    for offset in range(len(raw)):
        for bit in range(8):
            flipped = raw.copy()
            flipped[offset] ^= 1 << bit
            bank.state[...] = np.frombuffer(flipped.tobytes(), bank.state.dtype)
            if bank.state == sound:  # padding
                continue
            outputs = bank.run([cycle(5, end_of_pulses(4))])
            assert has(outputs, "STATE_RESTARTED") == [True] and driven(outputs) == [False]


def test_every_single_flipped_bit_of_the_configuration_leads_to_safe(library, rate_law):
    bank = Bank(library, rate_law)
    bank.run([cycle(n, end_of_pulses(n - 1)) for n in range(5)])
    state, sound = bank.state.copy(), bank.config.copy()
    raw = np.frombuffer(sound.tobytes(), np.uint8)
    for offset in range(len(raw)):
        for bit in range(8):
            flipped = raw.copy()
            flipped[offset] ^= 1 << bit
            bank.config[...] = np.frombuffer(flipped.tobytes(), bank.config.dtype)
            if bank.config == sound:  # padding
                continue
            bank.state[...] = state
            outputs = bank.run([cycle(5, end_of_pulses(4))])
            assert has(outputs, "CONFIG_CORRUPT") == [True] and driven(outputs) == [False]
            assert outputs["mode"].tolist() == [mrd.MRD_MODE_SAFE]


def test_two_flipped_high_bits_do_not_cancel(library, rate_law):
    """The product of the fold alone never moves bit 31: two such flips would cancel."""
    bank = Bank(library, rate_law)
    bank.run([cycle(n) for n in range(3)])
    bank.state["path"]["filter"][0, :2] ^= np.int32(-(2**31))
    assert has(bank.run([cycle(3)]), "STATE_RESTARTED") == [True]


BRIGHT = (4500, -4500, 4500)
"""Raw counts of a field beyond the plausible norm, as a magnet on the bench makes it."""


def test_what_was_measured_on_the_bench_is_not_used_after_it(library):
    for law in ("rate", "derivative"):
        config = config_of(law)
        sequence = [cycle(0), cycle(1, command=mrd.MRD_COMMAND_SAFE), cycle(2, command=mrd.MRD_COMMAND_ARM, command_key=KEY)]
        sequence += [cycle(n, mag_raw=BRIGHT) for n in (3, 4)]
        sequence += [cycle(5, mag_raw=BRIGHT, command=mrd.MRD_COMMAND_RESUME), cycle(6), cycle(7, mag_raw=(2000, -1500, 900))]
        outputs = Bank(library, config).run(sequence)
        assert outputs["mode"].tolist()[3:6] == [mrd.MRD_MODE_BENCH, mrd.MRD_MODE_BENCH, mrd.MRD_MODE_HOLD_OFF]
        assert trusted(outputs)[3:6] == [1, 1, 0]  # waived on the bench, not in the step that leaves it
        assert not any(driven(outputs)[:6])
        assert has(outputs, "NO_PREVIOUS")[6]


def test_a_lost_gyro_does_not_complete_a_dwell(library):
    """The field sees only the rate across it: it may end a dwell that was begun with the gyro, not complete it."""
    config = config_of("derivative", control={"dwell_s": 5.0})
    slow = {"mag_raw": (2000, -1500, 1000), "gyro_raw": (84, -48, 36)}
    with_gyro = Bank(library, config).run([cycle(n, **slow) for n in range(30)])
    without = Bank(library, config).run([cycle(n, gyro_valid=int(n < 6), **slow) for n in range(200)])
    assert mrd.MRD_MODE_SETTLED in with_gyro["mode"] and mrd.MRD_MODE_SETTLED not in without["mode"]
    assert without["rate_valid"][-1] == 1 and without["rate"][-1] == 0


def test_a_dwell_is_completed_by_a_valid_rate_only(library):
    """A dwell beyond its length, as a changed configuration may leave it, is no reason to settle blind."""
    config = config_of("derivative", control={"dwell_s": 100.0})
    bank = Bank(library, config)
    bank.run([cycle(n, gyro_raw=(84, -48, 36)) for n in range(60)])
    shorter = redigested({**config, "supervisor": {**config["supervisor"], "settle_dwell": 3}})
    bank.config = Bank(library, shorter).config
    blind = bank.run([cycle(n, gyro_valid=0, mag_valid=0) for n in range(60, 70)])
    assert set(blind["mode"].tolist()) == {mrd.MRD_MODE_DAMPING}
    assert bank.run([cycle(70, gyro_raw=(84, -48, 36))])["mode"].tolist() == [mrd.MRD_MODE_SETTLED]


def test_a_saturated_estimate_is_never_slow(library, demo_scaling):
    config = demo_scaling.config
    for wake, answer in ((65534, 0), (65535, mrd.MRD_E_SETTLE)):
        other = redigested({**config, "supervisor": {**config["supervisor"], "wake_rate": wake}})
        assert library.init(Bank(library, other).config[0]) == answer
