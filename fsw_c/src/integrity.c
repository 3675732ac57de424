/*
 * Integrity: a fold over field values, not bytes, so that padding, byte order and word size do not matter. Each step, that
 * of FNV-1a and a xor-shift for the high bits, is one-to-one in h and in the field: a change in any one field always
 * changes the digest.
 */
#include "arith.h"
#include "supervisor.h"

static uint32_t mix(uint32_t h, uint32_t field)
{
    h = (h ^ field) * 16777619u;
    return h ^ (h >> 15);
}

static uint32_t mix_s16s(uint32_t h, const int16_t *fields, uint16_t count)
{
    uint16_t i;

    for (i = 0; i < count; i++) {
        h = mix(h, (uint16_t)fields[i]);
    }
    return h;
}

static uint32_t mix_u16s(uint32_t h, const uint16_t *fields, uint16_t count)
{
    uint16_t i;

    for (i = 0; i < count; i++) {
        h = mix(h, fields[i]);
    }
    return h;
}

static uint32_t mix_u32s(uint32_t h, const uint32_t *fields, uint16_t count)
{
    uint16_t i;

    for (i = 0; i < count; i++) {
        h = mix(h, fields[i]);
    }
    return h;
}

static uint32_t mix_sensor(uint32_t h, const mrd_sensor_config *sensor)
{
    h = mix_s16s(h, sensor->matrix, 9);
    h = mix_s16s(h, sensor->offset, 3);
    h = mix(h, sensor->shift);
    return mix(h, (uint16_t)sensor->limit);
}

static uint32_t mix_gain(uint32_t h, const mrd_gain_config *gain)
{
    h = mix_u16s(h, gain->mantissa, 3);
    return mix_s16s(h, gain->shift, 3);
}

static uint32_t mix_path(uint32_t h, const mrd_path_config *path)
{
    h = mix_sensor(h, &path->mag);
    h = mix_sensor(h, &path->gyro);
    h = mix(h, path->gyro_fitted);
    h = mix(h, path->law);
    h = mix(h, path->gain_scaling);
    h = mix(h, path->saturation);
    h = mix(h, path->norm_min_sq);
    h = mix(h, path->norm_max_sq);
    h = mix(h, path->period_us);
    h = mix(h, path->phase_us);
    h = mix(h, path->tolerance_us);
    h = mix(h, path->half_sample_us);
    h = mix(h, path->delay_us);
    h = mix_u32s(h, path->blanking_us, 3);
    h = mix(h, path->tick_us);
    h = mix(h, (uint16_t)path->window_ticks);
    h = mix(h, (uint16_t)path->shortest_ticks);
    h = mix_s16s(h, path->polarity, 3);
    h = mix(h, path->filter_gain);
    h = mix_gain(h, &path->derivative_gain);
    h = mix_gain(h, &path->rate_gain);
    h = mix(h, path->jump_max_sq);
    h = mix(h, path->noise_limit);
    h = mix(h, path->frozen_limit);
    h = mix(h, path->dead_limit);
    h = mix(h, path->gyro_frozen_limit);
    h = mix(h, path->agree_limit);
    h = mix(h, path->agree_mantissa);
    h = mix(h, path->agree_shift);
    h = mix(h, (uint16_t)path->agree_rate_max);
    h = mix(h, path->current_fitted);
    h = mix(h, (uint16_t)path->current_ticks);
    h = mix_s16s(h, path->current_min, 3);
    return mix(h, (uint16_t)path->current_off_max);
}

static const uint32_t offset_basis = 2166136261u;

uint32_t mrd_config_digest(const mrd_config *config)
{
    const mrd_supervisor_config *supervisor = &config->supervisor;
    uint32_t h = mix_path(offset_basis, &config->path);

    h = mix(h, supervisor->settle_dwell);
    h = mix(h, supervisor->wake_dwell);
    h = mix(h, supervisor->hold_off_s);
    h = mix(h, supervisor->settle_by);
    h = mix(h, supervisor->settled_rate);
    h = mix(h, supervisor->wake_rate);
    h = mix(h, supervisor->estimate_mantissa);
    h = mix(h, supervisor->estimate_shift);
    h = mix(h, supervisor->window_cycles);
    h = mix(h, supervisor->pause_cycles);
    h = mix(h, supervisor->guard_turn);
    h = mix(h, supervisor->stall_turn);
    h = mix(h, supervisor->growth);
    h = mix(h, supervisor->progress);
    h = mix(h, supervisor->retries);
    h = mix(h, supervisor->bench_key);
    return mix(h, (uint16_t)supervisor->bench_limit_ticks);
}

static uint32_t mix_ballots(uint32_t h, const mrd_ballot *ballots, uint16_t count)
{
    uint16_t i;

    for (i = 0; i < count; i++) {
        h = mix(h, ballots[i].level);
        h = mix(h, ballots[i].tripped);
    }
    return h;
}

static uint32_t mix_path_state(uint32_t h, const mrd_path_state *path)
{
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        h = mix(h, (uint32_t)path->filter[i]);
    }
    h = mix(h, path->sample_us);
    h = mix_u32s(h, path->switch_off_us, 3);
    h = mix_u32s(h, path->drive_us, 3);
    h = mix_s16s(h, path->field, 3);
    h = mix(h, path->field_valid);
    h = mix(h, path->filter_valid);
    h = mix(h, path->off_known);
    h = mix_u16s(h, path->off_clear, 3);
    h = mix_u16s(h, path->pending, 3);
    h = mix_s16s(h, path->ticks, 3);
    h = mix_s16s(h, path->mag_raw, 3);
    h = mix(h, path->mag_known);
    h = mix_u16s(h, path->mag_same, 3);
    h = mix(h, path->norm);
    h = mix(h, path->norm_known);
    h = mix_ballots(h, &path->noise, 1);
    h = mix_ballots(h, &path->jumping, 1);
    h = mix_s16s(h, path->gyro_raw, 3);
    h = mix(h, path->gyro_known);
    h = mix(h, path->gyro_same);
    h = mix_s16s(h, path->rate, 3);
    h = mix(h, path->rate_known);
    h = mix_ballots(h, &path->agreement, 1);
    h = mix_ballots(h, path->weak, 3);
    return mix_ballots(h, path->backward, 3);
}

static uint32_t mix_progress(uint32_t h, const mrd_progress *progress)
{
    h = mix(h, progress->window);
    h = mix_u16s(h, progress->peak, 3);
    h = mix(h, progress->least);
    h = mix(h, progress->in_four);
    return mix(h, progress->stalled);
}

static uint32_t mix_counters(uint32_t h, const mrd_counters *counters)
{
    h = mix(h, counters->trusted);
    h = mix(h, counters->rejected);
    h = mix(h, counters->blanked);
    h = mix(h, counters->fell_back);
    h = mix(h, counters->refused);
    h = mix(h, counters->restarts);
    h = mix(h, counters->corrupt);
    h = mix(h, counters->mag_faults);
    h = mix(h, counters->gyro_faults);
    h = mix(h, counters->coil_faults);
    h = mix(h, counters->time_faults);
    return mix(h, counters->trips);
}

uint32_t mrd_state_digest(const mrd_state *state)
{
    uint32_t h = mix_path_state(offset_basis, &state->path);

    h = mix(h, state->dwell);
    h = mix(h, state->mode);
    h = mix(h, state->inhibit_commanded);
    h = mix(h, state->trips);
    h = mix(h, state->cycle);
    h = mix_progress(h, &state->progress);
    return mix_counters(h, &state->counters);
}

uint32_t mrd_fold_bytes(const uint8_t *bytes, uint16_t count)
{
    uint32_t h = offset_basis;
    uint16_t i;

    for (i = 0; i < count; i++) {
        h = mix(h, bytes[i]);
    }
    return h;
}
