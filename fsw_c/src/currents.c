/*
 * Stage 3: currents. What the sense says of each coil, in current counts: off while the magnetometer samples, and at the end
 * of a pulse as strong as commanded and of its sign. Cannot overflow: 16-bit counts are negated in 32 bits.
 */
#include "arith.h"
#include "stages.h"

/* The pulse of the step before, if it was long enough for the current to build up. */
static void judge_pulse(mrd_path_state *state, const mrd_path_config *config, int16_t driven, uint16_t i)
{
    int32_t along = state->ticks[i] < 0 ? -(int32_t)driven : (int32_t)driven;

    if (mrd_abs_s32(state->ticks[i]) >= (uint32_t)config->current_ticks) {
        uint16_t backward = along < -(int32_t)config->current_off_max;

        mrd_vote(&state->backward[i], backward);
        mrd_vote(&state->weak[i], !backward && along < config->current_min[i]);
    }
}

static uint16_t fault_of(const mrd_path_state *state, uint16_t on, uint16_t i)
{
    if (on) {
        return MRD_COIL_ON;
    }
    if (state->backward[i].tripped) {
        return MRD_COIL_BACKWARD;
    }
    return state->weak[i].tripped ? MRD_COIL_WEAK : MRD_COIL_OK;
}

uint32_t mrd_check_currents(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                            mrd_currents_trace *trace)
{
    uint32_t status = 0;
    uint16_t i;

    if (!config->current_fitted) {
        return 0;
    }
    for (i = 0; i < 3u; i++) {
        uint16_t on = 0;

        if (inputs->current_valid) {
            on = mrd_abs_s32(inputs->current_sampled[i]) > (uint32_t)config->current_off_max;
            judge_pulse(state, config, inputs->current_driven[i], i);
        }
        trace->fault[i] = fault_of(state, on, i);
        if (trace->fault[i] != MRD_COIL_OK) {
            status |= MRD_BIT(MRD_S_COIL_CURRENT);
        }
    }
    return status;
}

void mrd_path_withhold(const mrd_path_state *state, int16_t ticks[3])
{
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        if (state->backward[i].tripped) {
            ticks[i] = 0;
        }
    }
}

void mrd_path_restore(mrd_path_state *state)
{
    static const mrd_ballot fresh;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        state->weak[i] = fresh;
        state->backward[i] = fresh;
    }
}
