/*
 * Stage 8: agreement. In the body a field that stands still turns by -w x B: a gyro that says otherwise is not used. Rate and
 * field counts in, field counts a period out; up to 2^30. Midpoints of two samples make it right to third order in the turn.
 */
#include "arith.h"
#include "stages.h"

static int16_t mean(int16_t a, int16_t b)
{
    return (int16_t)mrd_round_shift((int32_t)a + b, 1);
}

static uint16_t comparable(const mrd_path_state *state, const mrd_path_config *config, uint32_t before, const mrd_trace *trace,
                           int16_t rate[3])
{
    uint16_t i;

    if (config->agree_limit == 0u || !trace->calibration.rate_valid || !state->rate_known || !trace->derivative.valid
        || (before & MRD_BIT(MRD_S_DERIVATIVE_CLAMPED))) {
        return 0;
    }
    for (i = 0; i < 3u; i++) {
        rate[i] = mean(trace->calibration.rate[i], state->rate[i]);
        if (mrd_abs_s32(rate[i]) > (uint32_t)config->agree_rate_max) {
            return 0;
        }
    }
    return 1;
}

/* 1 where gyro and field contradict each other. */
static uint16_t contradict(const mrd_path_config *config, const int16_t rate[3], const int16_t earlier_field[3], mrd_trace *trace)
{
    const int16_t *derivative = trace->derivative.derivative;
    int16_t field[3];
    int32_t turn[3];
    uint32_t largest = 0;
    uint32_t worst = 0;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        field[i] = mean(trace->calibration.field[i], earlier_field[i]);
    }
    mrd_cross(rate, field, turn);
    for (i = 0; i < 3u; i++) {
        int32_t *residual = &trace->agreement.residual[i];

        *residual = derivative[i] + mrd_scale_cross(turn[i], config->agree_mantissa, (int16_t)config->agree_shift);
        worst = mrd_max_u32(worst, mrd_abs_s32(*residual));
        largest = mrd_max_u32(largest, mrd_abs_s32(derivative[i]));
    }
    return worst > config->agree_limit + (largest >> 3);
}

uint32_t mrd_check_agreement(mrd_path_state *state, const mrd_path_config *config, uint32_t before,
                             const int16_t earlier_field[3], mrd_trace *trace)
{
    int16_t rate[3];
    uint16_t i;

    if (!config->gyro_fitted) {
        return 0;
    }
    trace->agreement.judged = comparable(state, config, before, trace, rate);
    if (trace->agreement.judged) {
        mrd_vote(&state->agreement, contradict(config, rate, earlier_field, trace));
    }
    for (i = 0; i < 3u; i++) {
        state->rate[i] = trace->calibration.rate[i];
    }
    state->rate_known = trace->calibration.rate_valid;
    if (state->agreement.tripped) {
        trace->calibration.rate_valid = 0;
        return MRD_BIT(MRD_S_GYRO_DISAGREES);
    }
    return 0;
}
