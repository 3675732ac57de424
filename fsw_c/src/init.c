/* The configuration check. One function per code, in the order of the codes: each may rely on those before it. */
#include "arith.h"

static uint16_t within(uint32_t x, uint32_t least, uint32_t greatest)
{
    return x >= least && x <= greatest;
}

static uint16_t sensor_ok(const mrd_sensor_config *sensor)
{
    uint16_t row;
    uint16_t i;

    if (!within(sensor->shift, 1, 16) || sensor->limit < 1) {
        return 0;
    }
    for (i = 0; i < 9u; i++) {
        if (sensor->matrix[i] < -32767) {
            return 0;
        }
    }
    for (row = 0; row < 3u; row++) {
        const int16_t *m = &sensor->matrix[3u * row];

        if (sensor->offset[row] < -32767 || mrd_abs_s32(m[0]) + mrd_abs_s32(m[1]) + mrd_abs_s32(m[2]) > 65535u) {
            return 0;
        }
    }
    return 1;
}

static uint16_t gyro_ok(const mrd_path_config *c)
{
    return c->gyro_fitted == 0u || (c->gyro_fitted == 1u && sensor_ok(&c->gyro));
}

static uint16_t norm_ok(const mrd_path_config *c)
{
    return within(c->norm_min_sq, 32768, c->norm_max_sq) && c->norm_max_sq <= 3221028867u;
}

static uint16_t sample_ok(const mrd_path_config *c)
{
    return c->half_sample_us <= c->phase_us && c->phase_us < c->period_us && c->tolerance_us < c->period_us >> 2;
}

static uint16_t window_ok(const mrd_path_config *c)
{
    return c->tick_us >= 1u && c->window_ticks >= 1 && c->window_ticks <= 16384 && c->shortest_ticks >= 1
           && c->shortest_ticks <= c->window_ticks;
}

static uint16_t timeline_ok(const mrd_path_config *c)
{
    uint32_t end_us;
    uint16_t i;

    if (!within(c->delay_us, c->half_sample_us, c->period_us)) {
        return 0;
    }
    /* Below 2e7 + 16384 * 65535, so below 2^31. */
    end_us = c->phase_us + c->delay_us + mrd_mul_u16((uint16_t)c->window_ticks, c->tick_us);
    if (end_us > c->period_us) {
        return 0;
    }
    for (i = 0; i < 3u; i++) {
        if (c->blanking_us[i] > c->period_us - end_us + (c->phase_us - c->half_sample_us)) {
            return 0;
        }
    }
    return 1;
}

static uint16_t choice_ok(const mrd_path_config *c)
{
    return (c->law == MRD_LAW_DERIVATIVE || (c->law == MRD_LAW_RATE && c->gyro_fitted))
           && (c->gain_scaling == MRD_GAIN_CONSTANT || c->gain_scaling == MRD_GAIN_NORMALISED)
           && (c->saturation == MRD_SATURATE_PER_AXIS || c->saturation == MRD_SATURATE_KEEP_DIRECTION);
}

static uint16_t polarity_ok(const mrd_path_config *c)
{
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        if (c->polarity[i] != 1 && c->polarity[i] != -1) {
            return 0;
        }
    }
    return 1;
}

static uint16_t gain_ok(const mrd_path_config *c, const mrd_gain_config *gain)
{
    int16_t least = 1;
    int16_t greatest = 31;
    uint16_t i;

    if (c->gain_scaling == MRD_GAIN_NORMALISED) {
        /* What normalising adds to the shift: bits - 16 + 15 or 16. */
        least = (int16_t)(1 - 15 - ((int16_t)mrd_bits_u32(c->norm_min_sq) - 16));
        greatest = (int16_t)(31 - 16 - ((int16_t)mrd_bits_u32(c->norm_max_sq) - 16));
    }
    for (i = 0; i < 3u; i++) {
        if (gain->mantissa[i] < 32768u || gain->shift[i] < least || gain->shift[i] > greatest) {
            return 0;
        }
    }
    return 1;
}

static uint16_t continuity_ok(const mrd_path_config *c)
{
    return within(c->jump_max_sq, 1, 3221028867u) && c->noise_limit >= 1u;
}

static uint16_t agreement_ok(const mrd_path_config *c)
{
    return c->agree_mantissa >= 32768u && within(c->agree_shift, 1, 31) && c->agree_rate_max >= 1;
}

static uint16_t current_ok(const mrd_path_config *c)
{
    uint16_t i;

    if (c->current_fitted == 0u) {
        return 1;
    }
    if (c->current_fitted != 1u || c->current_ticks < 1 || c->current_ticks > c->window_ticks || c->current_off_max < 1) {
        return 0;
    }
    for (i = 0; i < 3u; i++) {
        if (c->current_min[i] <= c->current_off_max) {
            return 0;
        }
    }
    return 1;
}

static uint16_t settle_ok(const mrd_config *config)
{
    const mrd_supervisor_config *s = &config->supervisor;

    return (s->settle_by == MRD_SETTLE_BY_FIELD || (s->settle_by == MRD_SETTLE_BY_GYRO && config->path.gyro_fitted))
           && s->settled_rate <= s->wake_rate && s->wake_rate <= 65534u && s->settle_dwell >= 1u && s->wake_dwell >= 1u;
}

static uint16_t estimate_ok(const mrd_supervisor_config *s)
{
    return s->estimate_mantissa >= 32768u && within(s->estimate_shift, 1, 31);
}

static uint16_t progress_ok(const mrd_supervisor_config *s)
{
    return within(s->growth, 257, 1024) && within(s->progress, 1, 256) && s->window_cycles >= 1u
           && s->pause_cycles >= 1u;
}

static uint16_t bench_ok(const mrd_config *config)
{
    const mrd_supervisor_config *s = &config->supervisor;

    return s->bench_limit_ticks >= 1 && s->bench_limit_ticks <= config->path.window_ticks && s->bench_key != 0u;
}

uint16_t mrd_path_check(const mrd_path_config *config)
{
    if (!sensor_ok(&config->mag)) {
        return MRD_E_MAG;
    }
    if (!gyro_ok(config)) {
        return MRD_E_GYRO;
    }
    if (!norm_ok(config)) {
        return MRD_E_NORM;
    }
    if (!within(config->period_us, 16384, 10000000)) {
        return MRD_E_PERIOD;
    }
    if (!sample_ok(config)) {
        return MRD_E_SAMPLE;
    }
    if (!window_ok(config)) {
        return MRD_E_WINDOW;
    }
    if (!timeline_ok(config)) {
        return MRD_E_TIMELINE;
    }
    if (!within(config->filter_gain, 128, 32768)) {
        return MRD_E_FILTER;
    }
    if (!choice_ok(config)) {
        return MRD_E_CHOICE;
    }
    if (!polarity_ok(config)) {
        return MRD_E_POLARITY;
    }
    if (!gain_ok(config, &config->derivative_gain) || !gain_ok(config, &config->rate_gain)) {
        return MRD_E_GAIN;
    }
    if (!continuity_ok(config)) {
        return MRD_E_CONTINUITY;
    }
    if (!agreement_ok(config)) {
        return MRD_E_AGREEMENT;
    }
    if (!current_ok(config)) {
        return MRD_E_CURRENT;
    }
    return MRD_OK;
}

uint16_t mrd_init(const mrd_config *config)
{
    uint16_t result = mrd_path_check(&config->path);

    if (result != MRD_OK) {
        return result;
    }
    if (!settle_ok(config)) {
        return MRD_E_SETTLE;
    }
    if (!estimate_ok(&config->supervisor)) {
        return MRD_E_ESTIMATE;
    }
    if (!progress_ok(&config->supervisor)) {
        return MRD_E_PROGRESS;
    }
    if (!bench_ok(config)) {
        return MRD_E_BENCH;
    }
    if (config->digest != mrd_config_digest(config)) {
        return MRD_E_DIGEST;
    }
    return MRD_OK;
}
