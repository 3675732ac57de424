/* The path: stages 1 to 11 in order. Knows nothing of modes. */
#include "arith.h"
#include "stages.h"

void mrd_path_reset(mrd_path_state *state)
{
    static const mrd_path_state zero;

    *state = zero;
}

/* Which status bits keep a sample from being used: some do not on the bench, and jumps not in a tumble that fast. */
static uint32_t rejecting(const mrd_path_state *state, uint16_t waive)
{
    const uint32_t always = MRD_BIT(MRD_S_SAMPLE_MISSING) | MRD_BIT(MRD_S_MAG_RANGE) | MRD_BIT(MRD_S_SAMPLE_OFF_TIME)
                            | MRD_BIT(MRD_S_BLANKED);
    const uint32_t in_flight = MRD_BIT(MRD_S_FIELD_IMPLAUSIBLE) | MRD_BIT(MRD_S_MAG_FROZEN) | MRD_BIT(MRD_S_MAG_DEAD_AXIS)
                               | MRD_BIT(MRD_S_MAG_NOISY);

    if (waive) {
        return always;
    }
    return always | in_flight | (state->jumping.tripped ? 0u : MRD_BIT(MRD_S_MAG_JUMP));
}

/* Stages 1 to 5: is this sample to be used? */
static uint32_t judge_sample(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                             uint16_t waive, mrd_trace *trace)
{
    const uint32_t no_field = MRD_BIT(MRD_S_SAMPLE_MISSING) | MRD_BIT(MRD_S_MAG_RANGE);
    uint32_t status = mrd_calibrate(config, inputs, &trace->calibration);

    if (!(status & no_field)) {
        status |= mrd_check_norm(config, trace->calibration.field, &trace->plausibility);
    }
    status |= mrd_check_currents(state, config, inputs, &trace->currents);
    status |= mrd_gate(state, config, inputs, !(status & MRD_BIT(MRD_S_SAMPLE_MISSING)), &trace->currents, &trace->gate);
    status |= mrd_check_continuity(state, config, inputs, status, trace);
    trace->gate.trusted = !(status & rejecting(state, waive));
    return status;
}

uint32_t mrd_path_sense(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                        uint16_t waive, mrd_trace *trace)
{
    static const mrd_trace zero;
    int16_t earlier_field[3];
    uint32_t status;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        earlier_field[i] = state->field[i];
    }
    *trace = zero;
    status = judge_sample(state, config, inputs, waive, trace);
    if (trace->gate.trusted) {
        status |= mrd_derive(state, config, inputs->sample_us, trace->calibration.field, &trace->derivative);
    } else {
        state->field_valid = 0;
    }
    if (trace->derivative.valid) {
        mrd_low_pass(state, config, trace->derivative.derivative, &trace->low_pass);
    } else {
        state->filter_valid = 0;
    }
    return status | mrd_check_agreement(state, config, status, earlier_field, trace);
}

uint32_t mrd_path_drive(const mrd_path_config *config, mrd_trace *trace)
{
    uint32_t status = mrd_apply_law(config, trace);

    if (trace->law.active != MRD_LAW_NONE) {
        status |= mrd_saturate(config, trace->law.demand, &trace->saturation);
        status |= mrd_make_pulses(config, trace->saturation.command, &trace->pulses);
    }
    return status;
}

void mrd_path_commit(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                     const int16_t ticks[3])
{
    uint32_t opens_us = config->phase_us + config->delay_us;
    uint32_t earliest_us = opens_us > config->tolerance_us ? opens_us - config->tolerance_us : 0u; /* below 2e7 */
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        state->ticks[i] = ticks[i];
        if (ticks[i] != 0) {
            state->pending[i] = 1;
            state->drive_us[i] = inputs->cycle_start_us + earliest_us;
        }
    }
}
