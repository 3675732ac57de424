/*
 * Fuzzing of mrd_init and mrd_step: arbitrary bytes as configuration, state and inputs, under the address and undefined-behaviour
 * sanitizers. What must hold whatever the bytes is asserted here. The bytes are: 1 of choices, a configuration, a state, and
 * inputs for as many cycles as are left; what is missing is zero.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "mrd.h"

enum { MEND_CONFIG = 1, MEND_DIGEST = 2, MEND_STATE = 4, CYCLES = 24 };

typedef struct {
    const uint8_t *at;
    size_t left;
} reader;

static void take(reader *bytes, void *into, size_t size)
{
    size_t n = size < bytes->left ? size : bytes->left;

    memset(into, 0, size);
    memcpy(into, bytes->at, n);
    bytes->at += n;
    bytes->left -= n;
}

static void must(int holds, const char *what)
{
    if (!holds) {
        fprintf(stderr, "broken promise: %s\n", what);
        abort();
    }
}

/* A legal timeline and legal ranges in place of what the bytes say: so that a good part of the inputs gets past mrd_init. */
static void mend(mrd_config *config)
{
    mrd_path_config *path = &config->path;
    mrd_supervisor_config *supervisor = &config->supervisor;
    int i;

    for (i = 0; i < 9; i++) {
        path->mag.matrix[i] = (int16_t)(path->mag.matrix[i] / 3 * 2 / 3);
        path->gyro.matrix[i] = (int16_t)(path->gyro.matrix[i] / 3 * 2 / 3);
    }
    for (i = 0; i < 3; i++) {
        path->mag.offset[i] /= 2;
        path->gyro.offset[i] /= 2;
        path->polarity[i] = path->polarity[i] & 1 ? 1 : -1;
        path->derivative_gain.mantissa[i] |= 0x8000u;
        path->rate_gain.mantissa[i] |= 0x8000u;
        path->derivative_gain.shift[i] = (int16_t)(1 + (path->derivative_gain.shift[i] & 15));
        path->rate_gain.shift[i] = (int16_t)(1 + (path->rate_gain.shift[i] & 15));
        path->blanking_us[i] %= 100000u;
        path->current_min[i] = (int16_t)(2 + (path->current_min[i] & 0x3FFF));
    }
    path->mag.shift = (uint16_t)(1 + path->mag.shift % 16u);
    path->gyro.shift = (uint16_t)(1 + path->gyro.shift % 16u);
    path->mag.limit = (int16_t)(1 + (path->mag.limit & 0x7FFE));
    path->gyro.limit = (int16_t)(1 + (path->gyro.limit & 0x7FFE));
    path->gyro_fitted = 1;
    path->law = (uint16_t)(1 + path->law % 2u);
    path->saturation = (uint16_t)(1 + path->saturation % 2u);
    path->gain_scaling = MRD_GAIN_CONSTANT;
    path->norm_min_sq = 32768u + path->norm_min_sq % 1000000u;
    path->norm_max_sq = 3221028867u;
    path->period_us = 500000u;
    path->phase_us = 150000u;
    path->tolerance_us %= 100000u;
    path->half_sample_us = 20000u;
    path->delay_us = 30000u;
    path->tick_us = 20u;
    path->window_ticks = (int16_t)(1 + (path->window_ticks & 0x1FFF));
    path->shortest_ticks = 1;
    path->filter_gain = (uint16_t)(128u + path->filter_gain % 32641u);
    path->jump_max_sq = 1u + path->jump_max_sq % 3221028867u;
    path->noise_limit |= 1u;
    path->agree_mantissa |= 0x8000u;
    path->agree_shift = (uint16_t)(1 + path->agree_shift % 31u);
    path->agree_rate_max = (int16_t)(1 + (path->agree_rate_max & 0x7FFE));
    path->current_fitted = 1;
    path->current_ticks = 1;
    path->current_off_max = 1;
    supervisor->settle_dwell = 1u + supervisor->settle_dwell % 8u;
    supervisor->wake_dwell = 1u + supervisor->wake_dwell % 8u;
    supervisor->hold_off_s %= 4u;
    supervisor->settle_by = (uint16_t)(1 + supervisor->settle_by % 2u);
    supervisor->wake_rate = (uint16_t)(supervisor->wake_rate % 65535u);
    supervisor->settled_rate = (uint16_t)(supervisor->settled_rate % (supervisor->wake_rate + 1u));
    supervisor->estimate_mantissa |= 0x8000u;
    supervisor->estimate_shift = (uint16_t)(1 + supervisor->estimate_shift % 31u);
    supervisor->window_cycles = 1u + supervisor->window_cycles % 6u;
    supervisor->pause_cycles = 1u + supervisor->pause_cycles % 6u;
    supervisor->guard_turn %= 1024u;
    supervisor->growth = (uint16_t)(257 + supervisor->growth % 768u);
    supervisor->progress = (uint16_t)(1 + supervisor->progress % 256u);
    supervisor->bench_key |= 1u;
    supervisor->bench_limit_ticks = path->window_ticks;
}

static int is_mode(uint16_t mode)
{
    return mode == MRD_MODE_HOLD_OFF || mode == MRD_MODE_DAMPING || mode == MRD_MODE_SETTLED || mode == MRD_MODE_SAFE
           || mode == MRD_MODE_INHIBIT || mode == MRD_MODE_BENCH || mode == MRD_MODE_PAUSE;
}

static int status_bit(const mrd_outputs *outputs, int bit)
{
    return (int)(outputs->status >> bit & 1u);
}

/* What holds for any bytes at all. */
static void always(const mrd_state *state, const mrd_config *config, const mrd_outputs *outputs)
{
    int driven = outputs->ticks[0] || outputs->ticks[1] || outputs->ticks[2];

    must(is_mode(outputs->mode) && state->mode == outputs->mode, "the mode is one of the named");
    must(state->digest == mrd_state_digest(state), "the state carries its digest");
    must(outputs->handover == (outputs->mode == MRD_MODE_SETTLED), "handover exactly in SETTLED");
    must(!driven || outputs->mode == MRD_MODE_DAMPING || outputs->mode == MRD_MODE_BENCH, "coils off but in DAMPING and BENCH");
    if (config->digest != mrd_config_digest(config)) {
        must(outputs->mode == MRD_MODE_SAFE && !driven && status_bit(outputs, MRD_S_CONFIG_CORRUPT),
             "a corrupt configuration is safe");
    }
}

/* What holds for a configuration that mrd_init has accepted, and a state that the controller left. */
static void accepted(const mrd_config *config, const mrd_inputs *inputs, const mrd_outputs *outputs)
{
    const mrd_trace *trace = &outputs->trace;
    int i;

    for (i = 0; i < 3; i++) {
        int ticks = outputs->ticks[i];
        int along = (outputs->mode == MRD_MODE_BENCH ? 1 : config->path.polarity[i]) * ticks;

        must(abs(ticks) <= config->path.window_ticks, "no pulse beyond its window");
        must(ticks == 0 || outputs->mode == MRD_MODE_BENCH || abs(ticks) >= config->path.shortest_ticks, "no pulse too short");
        if (outputs->mode == MRD_MODE_DAMPING && trace->law.active == MRD_LAW_DERIVATIVE) {
            must((int64_t)along * trace->low_pass.filtered[i] <= 0, "the derivative law opposes the change");
        }
        if (outputs->mode == MRD_MODE_DAMPING && trace->law.active == MRD_LAW_RATE) {
            must((int64_t)along * trace->law.cross[i] >= 0, "the rate law is along w x B");
        }
        if (trace->gate.trusted) {
            must(trace->gate.age_us[i] >= config->path.blanking_us[i] && trace->gate.age_us[i] <= 0x7FFFFFFFu,
                 "a trusted sample is old enough after every switch-off");
        }
    }
    must(!trace->gate.trusted || inputs->path.mag_valid, "no sample, no trust");
    if (outputs->mode == MRD_MODE_DAMPING && !trace->gate.trusted) {
        must(!outputs->ticks[0] && !outputs->ticks[1] && !outputs->ticks[2], "no trust, no pulse of the law");
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    reader bytes = {data, size};
    uint8_t choices, packed[MRD_TELEMETRY_BYTES];
    mrd_config config;
    mrd_state state;
    mrd_outputs outputs;
    uint16_t verdict;
    int cycle;

    take(&bytes, &choices, 1);
    take(&bytes, &config, sizeof config);
    take(&bytes, &state, sizeof state);
    if (choices & MEND_CONFIG) {
        mend(&config);
    }
    if (choices & MEND_DIGEST) {
        config.digest = mrd_config_digest(&config);
    }
    if (choices & MEND_STATE) {
        mrd_reset(&state);
    }
    verdict = mrd_init(&config);
    must(verdict <= MRD_E_DIGEST, "a named verdict");
    if (verdict != MRD_OK && verdict != MRD_E_DIGEST) {
        config.digest = ~mrd_config_digest(&config); /* refused: it may reach mrd_step only as a corrupt one */
    }
    /* A state of wild bytes fails its digest: the first step restarts it. With the one chance in 2^32 of another end it is not judged. */
    for (cycle = 0; cycle < CYCLES && (bytes.left || cycle == 0); cycle++) {
        mrd_inputs inputs;

        take(&bytes, &inputs, sizeof inputs);
        memset(&outputs, 0xA5, sizeof outputs);
        mrd_step(&state, &config, &inputs, &outputs);
        always(&state, &config, &outputs);
        if (verdict == MRD_OK) {
            accepted(&config, &inputs, &outputs);
        }
        mrd_telemetry(&outputs, packed);
    }
    return 0;
}
