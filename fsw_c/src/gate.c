/*
 * Stage 3: gate. Stamps in us, which wrap after 71.6 min: every difference is unsigned and wraps with them. An age of
 * 2^31 or more is a switch-off that lies ahead of the sample. A switch-off that was once old enough stays old while
 * its stamp does not change, so a coil at rest for hours is never taken for one just switched off. In the first cycle
 * after a reset nothing is known of the coils, and no sample is trusted.
 */
#include "arith.h"
#include "stages.h"

static const uint32_t age_saturated_us = 0x7FFFFFFF;

static uint16_t in_place(const mrd_path_config *config, const mrd_path_inputs *inputs)
{
    uint32_t late_us = inputs->sample_us - inputs->cycle_start_us - config->phase_us;
    uint32_t early_us = (uint32_t)0 - late_us;

    return late_us <= config->tolerance_us || early_us <= config->tolerance_us;
}

uint32_t mrd_gate(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                  uint16_t have_sample, mrd_gate_trace *trace)
{
    uint32_t start_us = have_sample ? inputs->sample_us - config->half_sample_us : inputs->cycle_start_us;
    uint32_t status = 0;
    uint16_t i;

    if (have_sample && !in_place(config, inputs)) {
        status |= MRD_BIT(MRD_S_SAMPLE_OFF_TIME);
    }
    for (i = 0; i < 3u; i++) {
        uint16_t fresh = inputs->switch_off_us[i] != state->switch_off_us[i];
        uint32_t age_us = start_us - inputs->switch_off_us[i];
        uint16_t clear;

        if (!state->off_known) {
            clear = 0;
        } else if (!fresh && state->ticks[i] != 0) {
            status |= MRD_BIT(MRD_S_SWITCH_OFF_UNSTAMPED);
            clear = 0;
        } else if (!fresh && state->off_clear[i]) {
            age_us = age_saturated_us;
            clear = 1;
        } else {
            clear = age_us >= config->blanking_us[i] && age_us <= age_saturated_us;
        }
        if (!clear && have_sample) {
            status |= MRD_BIT(MRD_S_BLANKED);
        }
        trace->age_us[i] = age_us;
        state->off_clear[i] = clear;
        state->switch_off_us[i] = inputs->switch_off_us[i];
    }
    state->off_known = 1;
    return status;
}
