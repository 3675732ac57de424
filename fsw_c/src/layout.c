/* The layout of this build: version, then for each structure its size and the offset of each field. */
#include <stddef.h>

#include "mrd.h"

#define SIZE(type) (uint16_t)sizeof(type)
#define AT(type, field) (uint16_t)offsetof(type, field)

const uint16_t mrd_layout[] = {
    MRD_VERSION,

    SIZE(mrd_sensor_config),
    AT(mrd_sensor_config, matrix),
    AT(mrd_sensor_config, offset),
    AT(mrd_sensor_config, shift),
    AT(mrd_sensor_config, limit),

    SIZE(mrd_gain_config),
    AT(mrd_gain_config, mantissa),
    AT(mrd_gain_config, shift),

    SIZE(mrd_path_config),
    AT(mrd_path_config, mag),
    AT(mrd_path_config, gyro),
    AT(mrd_path_config, gyro_fitted),
    AT(mrd_path_config, law),
    AT(mrd_path_config, gain_scaling),
    AT(mrd_path_config, saturation),
    AT(mrd_path_config, norm_min_sq),
    AT(mrd_path_config, norm_max_sq),
    AT(mrd_path_config, period_us),
    AT(mrd_path_config, phase_us),
    AT(mrd_path_config, tolerance_us),
    AT(mrd_path_config, half_sample_us),
    AT(mrd_path_config, delay_us),
    AT(mrd_path_config, blanking_us),
    AT(mrd_path_config, tick_us),
    AT(mrd_path_config, window_ticks),
    AT(mrd_path_config, shortest_ticks),
    AT(mrd_path_config, polarity),
    AT(mrd_path_config, filter_gain),
    AT(mrd_path_config, derivative_gain),
    AT(mrd_path_config, rate_gain),

    SIZE(mrd_supervisor_config),
    AT(mrd_supervisor_config, settle_dwell),
    AT(mrd_supervisor_config, wake_dwell),
    AT(mrd_supervisor_config, hold_off_s),
    AT(mrd_supervisor_config, settle_by),
    AT(mrd_supervisor_config, settled_rate),
    AT(mrd_supervisor_config, wake_rate),
    AT(mrd_supervisor_config, estimate_mantissa),
    AT(mrd_supervisor_config, estimate_shift),
    AT(mrd_supervisor_config, bench_key),
    AT(mrd_supervisor_config, bench_limit_ticks),

    SIZE(mrd_config),
    AT(mrd_config, path),
    AT(mrd_config, supervisor),
    AT(mrd_config, digest),

    SIZE(mrd_path_inputs),
    AT(mrd_path_inputs, cycle_start_us),
    AT(mrd_path_inputs, sample_us),
    AT(mrd_path_inputs, switch_off_us),
    AT(mrd_path_inputs, mag_raw),
    AT(mrd_path_inputs, gyro_raw),
    AT(mrd_path_inputs, mag_valid),
    AT(mrd_path_inputs, gyro_valid),

    SIZE(mrd_inputs),
    AT(mrd_inputs, path),
    AT(mrd_inputs, separation_s),
    AT(mrd_inputs, low_power),
    AT(mrd_inputs, command),
    AT(mrd_inputs, command_key),
    AT(mrd_inputs, command_coil),
    AT(mrd_inputs, command_ticks),

    SIZE(mrd_path_state),
    AT(mrd_path_state, filter),
    AT(mrd_path_state, sample_us),
    AT(mrd_path_state, switch_off_us),
    AT(mrd_path_state, field),
    AT(mrd_path_state, ticks),
    AT(mrd_path_state, field_valid),
    AT(mrd_path_state, filter_valid),
    AT(mrd_path_state, off_known),
    AT(mrd_path_state, off_clear),

    SIZE(mrd_counters),
    AT(mrd_counters, trusted),
    AT(mrd_counters, rejected),
    AT(mrd_counters, blanked),
    AT(mrd_counters, fell_back),
    AT(mrd_counters, refused),
    AT(mrd_counters, restarts),

    SIZE(mrd_state),
    AT(mrd_state, path),
    AT(mrd_state, dwell),
    AT(mrd_state, mode),
    AT(mrd_state, inhibit_commanded),
    AT(mrd_state, counters),
    AT(mrd_state, digest),

    SIZE(mrd_calibration_trace),
    AT(mrd_calibration_trace, field),
    AT(mrd_calibration_trace, rate),
    AT(mrd_calibration_trace, rate_valid),

    SIZE(mrd_plausibility_trace),
    AT(mrd_plausibility_trace, norm_sq),

    SIZE(mrd_gate_trace),
    AT(mrd_gate_trace, age_us),
    AT(mrd_gate_trace, trusted),

    SIZE(mrd_derivative_trace),
    AT(mrd_derivative_trace, interval_us),
    AT(mrd_derivative_trace, factor),
    AT(mrd_derivative_trace, derivative),
    AT(mrd_derivative_trace, valid),

    SIZE(mrd_low_pass_trace),
    AT(mrd_low_pass_trace, filter),
    AT(mrd_low_pass_trace, filtered),

    SIZE(mrd_law_trace),
    AT(mrd_law_trace, active),
    AT(mrd_law_trace, cross),
    AT(mrd_law_trace, mantissa),
    AT(mrd_law_trace, shift),
    AT(mrd_law_trace, demand),

    SIZE(mrd_saturation_trace),
    AT(mrd_saturation_trace, command),

    SIZE(mrd_pulses_trace),
    AT(mrd_pulses_trace, ticks),

    SIZE(mrd_trace),
    AT(mrd_trace, calibration),
    AT(mrd_trace, plausibility),
    AT(mrd_trace, gate),
    AT(mrd_trace, derivative),
    AT(mrd_trace, low_pass),
    AT(mrd_trace, law),
    AT(mrd_trace, saturation),
    AT(mrd_trace, pulses),

    SIZE(mrd_outputs),
    AT(mrd_outputs, ticks),
    AT(mrd_outputs, mode),
    AT(mrd_outputs, status),
    AT(mrd_outputs, rate),
    AT(mrd_outputs, rate_valid),
    AT(mrd_outputs, handover),
    AT(mrd_outputs, digest),
    AT(mrd_outputs, counters),
    AT(mrd_outputs, trace),
};

const uint16_t mrd_layout_length = sizeof mrd_layout / sizeof mrd_layout[0];
