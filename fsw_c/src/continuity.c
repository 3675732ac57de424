/*
 * Stage 5: continuity. One sample against those before it: counts that stand still, a field that jumps, a norm that trembles.
 * Raw counts and field counts in. Cannot overflow: counters stop, and a change is clamped before it is squared.
 */
#include "arith.h"
#include "stages.h"

/* Counts of one sensor that stay the same from sample to sample. */
static uint16_t unchanged(int16_t now, int16_t before, uint16_t known, uint16_t same)
{
    return known && now == before ? mrd_count_u16(same) : (uint16_t)0;
}

static uint16_t reached(uint16_t count, uint16_t limit)
{
    return limit != 0u && count >= limit;
}

static uint32_t magnetometer_stands_still(mrd_path_state *state, const mrd_path_config *config, const int16_t raw[3],
                                          uint16_t same[3])
{
    uint16_t frozen = 1;
    uint16_t dead = 0;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        same[i] = unchanged(raw[i], state->mag_raw[i], state->mag_known, state->mag_same[i]);
        state->mag_same[i] = same[i];
        state->mag_raw[i] = raw[i];
        frozen = frozen && reached(same[i], config->frozen_limit);
        dead = dead || reached(same[i], config->dead_limit);
    }
    state->mag_known = 1;
    if (frozen) {
        return MRD_BIT(MRD_S_MAG_FROZEN);
    }
    return dead ? MRD_BIT(MRD_S_MAG_DEAD_AXIS) : 0u;
}

static uint32_t jumps(mrd_path_state *state, const mrd_path_config *config, uint32_t sample_us, const int16_t field[3],
                      uint32_t *jump_sq)
{
    int16_t change[3];
    uint16_t i;

    if (!state->field_valid || sample_us - state->sample_us > config->period_us + (config->period_us >> 1)) {
        return 0;
    }
    for (i = 0; i < 3u; i++) {
        change[i] = mrd_clamp_s16((int32_t)field[i] - state->field[i]);
    }
    *jump_sq = mrd_norm_sq(change);
    mrd_vote(&state->jumping, *jump_sq > config->jump_max_sq);
    return *jump_sq > config->jump_max_sq ? MRD_BIT(MRD_S_MAG_JUMP) : 0u;
}

/* The norm does not turn with the body. judged: there is one, and no coil and no clock spoils it. */
static uint32_t trembles(mrd_path_state *state, const mrd_path_config *config, uint16_t judged, uint16_t norm, uint16_t *change)
{
    if (judged && state->norm_known) {
        *change = norm > state->norm ? (uint16_t)(norm - state->norm) : (uint16_t)(state->norm - norm);
        mrd_vote(&state->noise, *change > config->noise_limit);
    }
    if (judged) {
        state->norm = norm;
    }
    state->norm_known = judged;
    return state->noise.tripped ? MRD_BIT(MRD_S_MAG_NOISY) : 0u;
}

static uint32_t gyro_stands_still(mrd_path_state *state, const mrd_path_config *config, const int16_t raw[3], uint16_t *same)
{
    uint16_t alike = state->gyro_known;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        alike = alike && raw[i] == state->gyro_raw[i];
        state->gyro_raw[i] = raw[i];
    }
    state->gyro_known = 1;
    state->gyro_same = alike ? mrd_count_u16(state->gyro_same) : (uint16_t)0;
    *same = state->gyro_same;
    return reached(*same, config->gyro_frozen_limit) ? MRD_BIT(MRD_S_GYRO_FROZEN) : 0u;
}

uint32_t mrd_check_continuity(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                              uint32_t before, mrd_trace *trace)
{
    const uint32_t no_field = MRD_BIT(MRD_S_SAMPLE_MISSING) | MRD_BIT(MRD_S_MAG_RANGE);
    const uint32_t spoilt = no_field | MRD_BIT(MRD_S_BLANKED) | MRD_BIT(MRD_S_SAMPLE_OFF_TIME);
    mrd_continuity_trace *continuity = &trace->continuity;
    uint32_t status = 0;

    if (!(before & MRD_BIT(MRD_S_SAMPLE_MISSING))) {
        status |= magnetometer_stands_still(state, config, inputs->mag_raw, continuity->same);
    }
    if (!(before & no_field)) {
        status |= jumps(state, config, inputs->sample_us, trace->calibration.field, &continuity->jump_sq);
    }
    status |= trembles(state, config, !(before & spoilt), trace->plausibility.norm, &continuity->norm_change);
    if (config->gyro_fitted && inputs->gyro_valid) {
        status |= gyro_stands_still(state, config, inputs->gyro_raw, &continuity->gyro_same);
    }
    if (status & MRD_BIT(MRD_S_GYRO_FROZEN)) {
        trace->calibration.rate_valid = 0;
    }
    return status;
}
