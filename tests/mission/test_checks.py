"""Every check across keys, made to fail on purpose; and missions just on the other side."""

from __future__ import annotations

import pytest

WINDINGS = "turns, area_m2, resistance_ohm, resistance_temperature_c and temperature_c"
FIELD = {"settle_by": "field"}


def inertia(xx: float, yy: float, zz: float, xy: float) -> dict[str, object]:
    return {"body": {"inertia_kg_m2": {"xx": xx, "yy": yy, "zz": zz, "xy": xy, "xz": 0, "yz": 0}}}


# 2 × 62.4 µT × sin 7.81226°, that is half of 1.5 × 20.8327 °/s × 0.5 s.
TURNED = (
    "16.9637 µT, by which control.field_max_ut 62.4 µT turns in cycle.period_ms 500 ms at 1.5 × the norm of "
    "body.tip_off_deg_s [12, -11, 13] °/s"
)
# In 0.5 s the field turns by 2π / 5738.99 s × 0.5 s; 13.9 µT × 80 counts/µT then move by 0.608703 counts, by 10 in 16.4 cycles.
STANDS = (
    "must be 0 (off) or at least 8.5 s, 17 × cycle.period_ms 500 ms: with magnetometer.counts_per_ut 80 counts/µT, "
    "control.field_min_ut 13.9 µT that turns once in orbital period 5738.99 s may take as long to move by 10 counts"
)

REFUSED = {
    "no tumble": (
        {"body": {"tip_off_deg_s": [0.0, 0.006, 0.007]}},
        "body.tip_off_deg_s [0, 0.006, 0.007] °/s, must have a norm of at least 0.01 °/s",
    ),
    "a tumble that is a jump": (
        {"defence": {"jump_ut": 16.963}},
        f"defence.jump_ut 16.963 µT, must be at least {TURNED}",
    ),
    # From half a turn on the chord is twice the field. 6 s × 31.249 °/s are 187.5°.
    "a tumble of more than half a turn": (
        {"defence": {"jump_ut": 124.0}, "cycle": {"period_ms": 6000.0, "timing_tolerance_ms": 0.0}},
        "defence.jump_ut 124 µT, must be at least 124.8 µT, by which control.field_max_ut 62.4 µT turns in "
        "cycle.period_ms 6000 ms at 1.5 × the norm of body.tip_off_deg_s [12, -11, 13] °/s",
    ),
    # 6 √2 × 18 nT
    "noise that is noisy": (
        {"defence": {"noise_ut": 0.1527}},
        "defence.noise_ut 0.1527 µT, must be at least 0.152735 µT, 6 √2 × magnetometer.noise_nt 18 nT",
    ),
    "frozen too soon": ({"defence": {"frozen_s": 8.4, "dead_axis_s": 9.0}}, f"defence.frozen_s 8.4 s, {STANDS}"),
    "a dead axis too soon": (
        {"defence": {"frozen_s": 0, "dead_axis_s": 8.4}},
        f"defence.dead_axis_s 8.4 s, {STANDS}",
    ),
    "an axis before all": (
        {"defence": {"frozen_s": 10, "dead_axis_s": 9}},
        "defence.dead_axis_s 9 s, must be 0 (off) or at least defence.frozen_s 10 s",
    ),
    "still for too many cycles": (
        {"defence": {"dead_axis_s": 32767.6}},
        "defence.dead_axis_s 32767.6 s, must be at most 32767.5 s, 65535 × cycle.period_ms 500 ms",
    ),
    "still for too few cycles": (
        {"defence": {"gyro_frozen_s": 1.9}},
        "defence.gyro_frozen_s 1.9 s, must be 0 (off) or at least 2 s, 4 × cycle.period_ms 500 ms",
    ),
    "no gyro to freeze": (
        {"gyro": None, "control": {"settle_by": "field"}, "defence": {"gyro_frozen_s": 10}},
        "defence.gyro_frozen_s 10 s needs a gyro, but there is no table [gyro]",
    ),
    "no gyro to disagree": (
        {"gyro": None, "control": {"settle_by": "field"}, "defence": {"gyro_error_deg_s": 1}},
        "defence.gyro_error_deg_s 1 °/s needs a gyro, but there is no table [gyro]",
    ),
    # √2 × 18 nT / (38.15 µT × 0.5 s) are 0.0764621 °/s.
    "a gyro that is told from noise": (
        {"defence": {"gyro_error_deg_s": 0.229}},
        "defence.gyro_error_deg_s 0.229 °/s, must be 0 (off) or at least 0.229386 °/s, three times the noise "
        "of a rate from two samples: with magnetometer.noise_nt 18 nT, cycle.period_ms 500 ms and a field "
        "halfway between control.field_min_ut 13.9 µT and control.field_max_ut 62.4 µT",
    ),
    "a gyro beyond comparison": (
        {"defence": {"gyro_error_deg_s": 57.3}},
        "defence.gyro_error_deg_s 57.3 °/s, must be at most 57.2958 °/s, 0.5 rad in cycle.period_ms 500 ms: "
        "gyro and field are not compared beyond it",
    ),
    "a window without a peak": (
        {"defence": {"window_s": 1.9}},
        "defence.window_s 1.9 s, must be at least 2 s, 4 × cycle.period_ms 500 ms: a peak is taken from that "
        "many",
    ),
    # 6 × 14.983 + 1800 × 8.4 / 7.4 × e^(−60/6.1) = 89.898 + 0.1093; on y, with 6 ms, it is just below 90.
    "off is noise": (
        {"current_sense": {"noise_counts": 14.983}, "coil": {"x": {"time_constant_ms": 6.1}}},
        "current_sense.off_counts 90 counts, must exceed 90.0073 counts: 6 × current_sense.noise_counts "
        "14.983 counts, and what current_sense.counts_at_full 1800 counts at supply.max_v 8.4 V "
        "(supply.nominal_v 7.4 V) leave after coil.x.blanking_ms 60 ms with coil.x.time_constant_ms 6.1 ms",
    ),
    # 1800 × 6.6 / 7.4 × (1 − e^−3) = 1525.48; a tenth of it is 152.5.
    "weak is off": (
        {"current_sense": {"weak_percent": 10.0, "off_counts": 153}},
        "current_sense.weak_percent 10 % of the 1525.48 counts that current_sense.counts_at_full 1800 counts "
        "become in a pulse of 3 L/R at supply.min_v 6.6 V (supply.nominal_v 7.4 V) must exceed "
        "current_sense.off_counts 153 counts: raise it to 10.0952 %, or lower current_sense.off_counts",
    ),
    "a coil too slow to be judged": (
        {
            "cycle": {"drive_window_ms": 17.0, "shortest_pulse_ms": 0.8},
            "control": {"bench_limit_ms": 10.0},
            "coil": {"y": {"time_constant_ms": 5.0}, "x": {"time_constant_ms": 5.7}},
        },
        "coil.x.time_constant_ms 5.7 ms, must be at most 5.66667 ms with a table [current_sense], a third of "
        "cycle.drive_window_ms 17 ms: no pulse reaches a current that can be judged",
    ),
    "windows": (
        {"cycle": {"drive_window_ms": 410.1}},
        "cycle.blanking_ms 60 ms + cycle.sample_ms 20 ms + cycle.compute_delay_ms 10 ms + "
        "cycle.drive_window_ms 410.1 ms = 500.1 ms, must be at most cycle.period_ms 500 ms",
    ),
    # 500 − 20 − 10 − 400 ms after the end of the latest pulse, the next sample starts.
    "coil blanking": (
        {"coil": {"y": {"blanking_ms": 70.001}}},
        "coil.y.blanking_ms 70.001 ms, must be at most 70 ms, the age of the latest pulse's end at the next "
        "sample: cycle.period_ms 500 ms less cycle.sample_ms 20 ms, cycle.compute_delay_ms 10 ms, "
        "cycle.drive_window_ms 400 ms",
    ),
    "shortest pulse": (
        {"cycle": {"shortest_pulse_ms": 400.1}},
        "cycle.shortest_pulse_ms 400.1 ms, must be at most cycle.drive_window_ms 400 ms: no pulse would be "
        "left",
    ),
    "bench limit above": (
        {"control": {"bench_limit_ms": 400.1}},
        "control.bench_limit_ms 400.1 ms, must be between cycle.shortest_pulse_ms 0.8 ms and "
        "cycle.drive_window_ms 400 ms",
    ),
    "bench limit below": (
        {"control": {"bench_limit_ms": 0.7}},
        "control.bench_limit_ms 0.7 ms, must be between cycle.shortest_pulse_ms 0.8 ms and "
        "cycle.drive_window_ms 400 ms",
    ),
    "fraction of a tick": (
        {"cycle": {"drive_window_ms": 399.95}},
        "cycle.drive_window_ms 399.95 ms is 3999.5 ticks of cycle.pulse_tick_us 100 µs, must be a whole "
        "number in [16, 16384]",
    ),
    "too many ticks": (
        {"cycle": {"pulse_tick_us": 20}},
        "cycle.drive_window_ms 400 ms is 20000 ticks of cycle.pulse_tick_us 20 µs, must be a whole number in "
        "[16, 16384]",
    ),
    "too few ticks": (
        {"cycle": {"drive_window_ms": 1.5}, "current_sense": None, "control": {"bench_limit_ms": 1.0}},
        "cycle.drive_window_ms 1.5 ms is 15 ticks of cycle.pulse_tick_us 100 µs, must be a whole number in "
        "[16, 16384]",
    ),
    "whole µs": (
        {"cycle": {"period_ms": 500.0005}},
        "cycle.period_ms 500.0005 ms, must be a whole number of µs",
    ),
    "whole µs of a coil": (
        {"coil": {"z": {"blanking_ms": 50.0003}}},
        "coil.z.blanking_ms 50.0003 ms, must be a whole number of µs",
    ),
    "even sample": (
        {"cycle": {"sample_ms": 19.999}},
        "cycle.sample_ms 19.999 ms, must be an even number of µs",
    ),
    # 10 ms are free before the sample: 70 less the 60 that every coil asks for.
    "tolerance before": (
        {"cycle": {"timing_tolerance_ms": 2.0}, "coil": {"x": {"blanking_ms": 66.5}}},
        "cycle.timing_tolerance_ms 2 ms, must be at most half of the 3.5 ms that are free before a sample "
        "(cycle.period_ms 500 ms less cycle.sample_ms 20 ms, cycle.compute_delay_ms 10 ms, "
        "cycle.drive_window_ms 400 ms and coil.x.blanking_ms 66.5 ms)",
    ),
    "tolerance after": (
        {"cycle": {"compute_delay_ms": 3.9}},
        "cycle.timing_tolerance_ms 2 ms, must be at most half of cycle.compute_delay_ms 3.9 ms: the sample "
        "must end before the pulses start",
    ),
    "field counts": (
        {"magnetometer": {"counts_per_ut": 163.9}},
        "magnetometer.counts_per_ut 163.9 counts/µT × magnetometer.range_ut 200 µT = 32780 counts, must be "
        "at most 32767 (16 bits)",
    ),
    "rate counts": (
        {"gyro": {"range_deg_s": 136.6}},
        "gyro.counts_per_deg_s 240 counts per °/s × gyro.range_deg_s 136.6 °/s = 32784 counts, must be at "
        "most 32767 (16 bits)",
    ),
    # 62.4 + 2.1 + 0.05 µT, the z axis.
    "field range": (
        {"magnetometer": {"range_ut": 64.54}},
        "magnetometer.range_ut 64.54 µT, must exceed 64.55 µT: control.field_max_ut 62.4 µT with "
        "magnetometer.bias_ut [1.4, -0.9, 2.1] µT and magnetometer.bias_error_ut [0.06, -0.04, 0.05] µT",
    ),
    # 1.25 √(144 + 121 + 169) = 26.0408
    "rate range": (
        {"gyro": {"range_deg_s": 26.04}},
        "gyro.range_deg_s 26.04 °/s, must exceed 26.0408 °/s: 1.25 × the norm of body.tip_off_deg_s [12, "
        "-11, 13] °/s",
    ),
    "not positive": (
        inertia(1.0, 1.0, 1.5, xy=1.0),
        "body.inertia_kg_m2: principal moments 0, 1.5 and 2 kg m², must each be in [1e-05, 1000] (from xx "
        "1, yy 1, zz 1.5, xy 1, xz 0, yz 0 kg m²)",
    ),
    "too large": (
        inertia(1000, 1000, 1000, xy=1),
        "body.inertia_kg_m2: principal moments 999, 1000 and 1001 kg m², must each be in [1e-05, 1000] "
        "(from xx 1000, yy 1000, zz 1000, xy 1, xz 0, yz 0 kg m²)",
    ),
    # ½ (3 ± 1) from the x, y block, and 3.001 > 1 + 2.
    "triangle": (
        inertia(1.5, 1.5, 3.001, xy=0.5),
        "body.inertia_kg_m2: principal moments 1, 2 and 3.001 kg m² violate the triangle inequality, the "
        "greatest must be at most the sum of the others, 3 kg m² (from xx 1.5, yy 1.5, zz 3.001, xy 0.5, xz "
        "0, yz 0 kg m²)",
    ),
    "supply": (
        {"supply": {"min_v": 7.5}},
        "supply.min_v 7.5 V, supply.nominal_v 7.4 V, supply.max_v 8.4 V: must not decrease in this order",
    ),
    "law without gyro": (
        {"gyro": None, "control": {"law": "rate", **FIELD}},
        'control.law "rate" needs a gyro, but there is no table [gyro]',
    ),
    "settling without gyro": (
        {"gyro": None},
        'control.settle_by "gyro" needs a gyro, but there is no table [gyro]',
    ),
    "field bounds": (
        {"control": {"field_min_ut": 62.4}},
        "control.field_min_ut 62.4 µT, must be below control.field_max_ut 62.4 µT",
    ),
    "wake": (
        {"control": {"wake_deg_s": 0.4}},
        "control.wake_deg_s 0.4 °/s, must be above control.settled_deg_s 0.4 °/s",
    ),
    # 3 × 360° / 5738.99 s = 0.188186
    "orbital rate": (
        {"magnetometer": {"noise_nt": 0}, "control": {"settled_deg_s": 0.188, **FIELD}},
        "control.settled_deg_s 0.188 °/s, must be at least 0.188186 °/s, 3 turns in orbital period 5738.99 "
        "s: with control.settle_by \"field\" the field's own turning over an orbit counts as rate; raise the "
        "threshold or settle by a gyro",
    ),
    # √2 × 300 nT / (30 µT × 1 s) is 0.810 °/s (derived from the formula; the same figure stands in the
    # project's table of checks), and three times that the floor.
    "rate noise": (
        {
            "magnetometer": {"noise_nt": 300},
            "cycle": {"period_ms": 1000},
            "control": {"settled_deg_s": 1.0, "field_min_ut": 10, "field_max_ut": 50, **FIELD},
        },
        "control.settled_deg_s 1 °/s, must be at least 2.43085 °/s, three times the noise of a rate from "
        'two samples: with control.settle_by "field", magnetometer.noise_nt 300 nT, cycle.period_ms 1000 ms '
        "and a field halfway between control.field_min_ut 10 µT and control.field_max_ut 50 µT; raise the "
        "threshold, lengthen the period or settle by a gyro",
    ),
    "aliased": (
        {"body": {"tip_off_deg_s": [0, 0, 60]}, "cycle": {"period_ms": 3000}},
        "body.tip_off_deg_s [0, 0, 60] °/s turns by 180 ° in cycle.period_ms 3000 ms, must be below 180 ° "
        'with control.law "derivative": beyond it the derivative is aliased; the period must be below 3000 '
        "ms",
    ),
    "low-pass": (
        {"control": {"low_pass_s": 50.1}},
        "control.low_pass_s 50.1 s, must be at most 50 s: 100 × cycle.period_ms 500 ms",
    ),
    "two dipoles": (
        {"coil": {"z": {"dipole_a_m2": 0.2, "area_m2": None}}},
        "coil.z.dipole_a_m2: excludes coil.z.turns, coil.z.resistance_ohm, coil.z.resistance_temperature_c "
        "and coil.z.temperature_c, give one or the other",
    ),
    "no dipole": (
        {"coil": {"x": {"dipole_a_m2": None}}},
        f"coil.x.dipole_a_m2: missing, must be a number in (0, 50] A m² (or give {WINDINGS})",
    ),
    "half a winding": (
        {"coil": {"z": {"area_m2": None}}},
        "coil.z.area_m2: missing, must be a number in (0, 10] m² "
        f"(the dipole follows from {WINDINGS} together)",
    ),
    # 0.2081958 A m² × 100 turns over, twice for the pair.
    "derived dipole": (
        {"coil": {"z": {"turns": 48_000, "mirrored_pair": True}}},
        "coil.z.dipole_a_m2: 83.2783 A m² derived from coil.z.turns 48000, coil.z.area_m2 0.0072 m², "
        "coil.z.resistance_ohm 58 Ω, coil.z.resistance_temperature_c 20 °C, coil.z.temperature_c 35 °C, "
        "coil.z.mirrored_pair true and supply.nominal_v 7.4 V, must be in (0, 50]",
    ),
    "air with remanence": (
        {"coil": {"z": {"remanence_fraction": 0.01}}},
        'coil.z.remanence_fraction: 0.01, must be 0 or left out with coil.z.core "air": without a core '
        "nothing stays magnetised",
    ),
    "core without remanence": (
        {"coil": {"y": {"remanence_fraction": None}}},
        'coil.y.remanence_fraction: missing, must be a number in [0, 0.2] with coil.y.core "cored"',
    ),
    "no gain": (
        {"control": {"K_n_m_s": None}},
        "control: the gain is missing, give exactly one of control.k_am2_s_per_t (a number in (0, "
        '1000000000] A m² s/T) or control.K_n_m_s (a number in (0, 100] N m s) or control.gain ("auto")',
    ),
    "three gains": (
        {"control": {"k_am2_s_per_t": 1e5, "gain": "auto"}},
        "control: control.k_am2_s_per_t, control.K_n_m_s and control.gain exclude each other, give exactly "
        "one",
    ),
}

ACCEPTED = {
    "the fastest tumble, just no jump": {"defence": {"jump_ut": 16.964}},
    "every defence off": {
        "defence": {"frozen_s": 0, "dead_axis_s": 0, "gyro_frozen_s": 0, "gyro_error_deg_s": 0, "divergence_guard": False}
    },
    "the shortest times": {"defence": {"frozen_s": 8.5, "dead_axis_s": 8.5, "gyro_frozen_s": 2, "window_s": 2}},
    "the longest times": {"defence": {"frozen_s": 32767.5, "dead_axis_s": 32767.5, "gyro_frozen_s": 32767.5}},
    "the smallest gyro error": {"defence": {"gyro_error_deg_s": 0.2294}},
    "the largest gyro error": {"defence": {"gyro_error_deg_s": 57.2957}},
    "as weak as just not off": {"current_sense": {"weak_percent": 10.1, "off_counts": 153}},
    "no current sense": {"current_sense": None},
    "windows that fill the cycle": {"cycle": {"drive_window_ms": 410, "timing_tolerance_ms": 0}},
    "a coil that uses all of the gap": {
        "coil": {"y": {"blanking_ms": 70}},
        "cycle": {"timing_tolerance_ms": 0},
    },
    "a fast coil": {"coil": {"z": {"blanking_ms": 4}}},
    "a bench pulse as long as the window": {"control": {"bench_limit_ms": 400}},
    "a bench pulse as short as the shortest": {"control": {"bench_limit_ms": 0.8}},
    "most ticks": {"cycle": {"pulse_tick_us": 20, "drive_window_ms": 327.68}},
    "fewest ticks": {"cycle": {"drive_window_ms": 1.6}, "current_sense": None, "control": {"bench_limit_ms": 1.0}},
    "decimal fractions of a millisecond": {"cycle": {"period_ms": 500.003, "sample_ms": 20.002}},
    # In binary 64.4 × 1000 is a little more than 64400.
    "a fraction that is not binary": {"cycle": {"drive_window_ms": 64.4}, "control": {"bench_limit_ms": 50}},
    "all of the tolerance": {"cycle": {"timing_tolerance_ms": 5}},
    "more tolerance with fast coils": {
        "current_sense": None,
        "coil": {axis: {"blanking_ms": 4} for axis in "xyz"},
        "cycle": {"compute_delay_ms": 20, "drive_window_ms": 390, "timing_tolerance_ms": 10},
    },
    "all counts": {"magnetometer": {"counts_per_ut": 163.835}},
    "a flat plate": inertia(1.5, 1.5, 3.0, xy=0.5),
    "the smallest body": inertia(1e-5, 1e-5, 1e-5, xy=0),
    "the largest body": inertia(1e3, 1e3, 1e3, xy=0),
    "one supply voltage": {"supply": {"min_v": 7.4, "max_v": 7.4}},
    "the rate law": {"control": {"law": "rate"}},
    "no gyro": {"gyro": None, "control": FIELD},
    "settled by a quiet field": {
        "magnetometer": {"noise_nt": 0},
        "control": {"settled_deg_s": 0.189, **FIELD},
    },
    "settled by a noisy field": {
        "magnetometer": {"noise_nt": 300},
        "cycle": {"period_ms": 1000},
        "control": {"settled_deg_s": 2.44, "wake_deg_s": 3, "field_min_ut": 10, "field_max_ut": 50, **FIELD},
    },
    "a rate law with half a turn in a cycle": {
        "body": {"tip_off_deg_s": [0, 0, 60]},
        "cycle": {"period_ms": 3000},
        "control": {"law": "rate"},
    },
    "just below half a turn": {"body": {"tip_off_deg_s": [0, 0, 60]}, "cycle": {"period_ms": 2999}},
    "the longest low-pass": {"control": {"low_pass_s": 50}},
    "air with no remanence, said": {"coil": {"z": {"remanence_fraction": 0}}},
    "k": {"control": {"K_n_m_s": None, "k_am2_s_per_t": 1.5e5}},
    "auto": {"control": {"K_n_m_s": None, "gain": "auto"}},
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(problems, case):
    overrides, problem = REFUSED[case]
    assert problems(overrides) == [problem]


@pytest.mark.parametrize("case", ACCEPTED)
def test_accepted(problems, case):
    assert problems(ACCEPTED[case]) == []


def test_checks_run_where_their_keys_are_legal(problems):
    """A bad key silences the checks that need it, and no others."""
    found = problems({"cycle": {"period_ms": 5, "shortest_pulse_ms": 401}, "supply": {"max_v": 7}})
    assert [problem.split(",")[0] for problem in found] == [
        "cycle.period_ms: 5 ms",
        "supply.min_v 6.6 V",
        "cycle.shortest_pulse_ms 401 ms",
    ]
