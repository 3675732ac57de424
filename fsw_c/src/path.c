/* The path: stages 1 to 8 in order. Knows nothing of modes. */
#include "arith.h"
#include "stages.h"

void mrd_path_reset(mrd_path_state *state)
{
    static const mrd_path_state zero;

    *state = zero;
}

uint32_t mrd_path_sense(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                        uint16_t waive_norm, mrd_trace *trace)
{
    static const mrd_trace zero;
    const uint32_t no_field = MRD_BIT(MRD_S_SAMPLE_MISSING) | MRD_BIT(MRD_S_MAG_RANGE);
    uint32_t rejecting = no_field | MRD_BIT(MRD_S_SAMPLE_OFF_TIME) | MRD_BIT(MRD_S_BLANKED);
    uint32_t status;

    *trace = zero;
    status = mrd_calibrate(config, inputs, &trace->calibration);
    if (!(status & no_field)) {
        status |= mrd_check_norm(config, trace->calibration.field, &trace->plausibility);
    }
    if (!waive_norm) {
        rejecting |= MRD_BIT(MRD_S_FIELD_IMPLAUSIBLE);
    }
    status |= mrd_gate(state, config, inputs, !(status & MRD_BIT(MRD_S_SAMPLE_MISSING)), &trace->gate);
    trace->gate.trusted = !(status & rejecting);

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
    return status;
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
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        if (ticks[i] != 0) {
            state->pending[i] = 1;
            state->drive_us[i] = inputs->cycle_start_us + config->phase_us + config->delay_us;
        }
    }
}
