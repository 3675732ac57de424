/*
 * Stage 4: gate. Stamps in us, which wrap after 71.6 min: every difference is unsigned and wraps with them. An age of
 * 2^31 or more is a switch-off that lies ahead of the sample, unless the same switch-off was old enough before. A pulse
 * stays pending until a stamp says that it ended after its drive window opened. In the first cycle after a reset nothing
 * is known of the coils, and no sample is trusted.
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

/* A stamp that is new, and not from before the pulse. */
static uint16_t stamps_pulse(const mrd_path_state *state, uint32_t stamp_us, uint16_t i)
{
    return stamp_us != state->switch_off_us[i] && stamp_us - state->drive_us[i] <= age_saturated_us;
}

/*
 * A pulse that began more than 2^30 us ago is over, and one that lies ahead by more than a period was commanded before the
 * clock was set back: in both cases a stamp of the present time is taken. The stamp is judged as it stands first.
 */
static void take_stamp(mrd_path_state *state, const mrd_path_config *config, uint32_t cycle_start_us, uint32_t stamp_us, uint16_t i)
{
    uint32_t since_us = cycle_start_us - state->drive_us[i];

    if (!state->pending[i]) {
        return;
    }
    if (!stamps_pulse(state, stamp_us, i) && since_us > MRD_BIT(30) && since_us < (uint32_t)0 - config->period_us) {
        state->drive_us[i] = cycle_start_us - MRD_BIT(30);
    }
    if (stamps_pulse(state, stamp_us, i)) {
        state->pending[i] = 0;
    }
}

/* One coil: returns status bits, and whether it is clear. timed: the sample is there and at its place; on: the sense says so. */
static uint32_t gate_coil(mrd_path_state *state, uint32_t stamp_us, uint32_t blanking_us, uint16_t timed, uint16_t on,
                          uint16_t i, uint32_t *age_us, uint16_t *clear)
{
    uint16_t was_clear = stamp_us == state->switch_off_us[i] && state->off_clear[i];

    *clear = 0;
    state->switch_off_us[i] = stamp_us;
    if (!state->off_known || state->pending[i]) {
        state->off_clear[i] = 0;
        return state->off_known ? MRD_BIT(MRD_S_SWITCH_OFF_UNSTAMPED) : 0u;
    }
    if (on) {
        state->off_clear[i] = 0;
        return 0;
    }
    if (was_clear && *age_us > age_saturated_us) {
        *age_us = age_saturated_us;
    }
    *clear = *age_us >= blanking_us && *age_us <= age_saturated_us;
    state->off_clear[i] = was_clear || (*clear && timed);
    return 0;
}

uint32_t mrd_gate(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                  uint16_t have_sample, const mrd_currents_trace *currents, mrd_gate_trace *trace)
{
    uint32_t start_us = have_sample ? inputs->sample_us - config->half_sample_us : inputs->cycle_start_us;
    uint16_t timed = have_sample && in_place(config, inputs);
    uint32_t status = 0;
    uint16_t i;

    if (have_sample && !timed) {
        status |= MRD_BIT(MRD_S_SAMPLE_OFF_TIME);
    }
    for (i = 0; i < 3u; i++) {
        uint16_t clear;

        trace->age_us[i] = start_us - inputs->switch_off_us[i];
        take_stamp(state, config, inputs->cycle_start_us, inputs->switch_off_us[i], i);
        status |= gate_coil(state, inputs->switch_off_us[i], config->blanking_us[i], timed,
                            currents->fault[i] == MRD_COIL_ON, i, &trace->age_us[i], &clear);
        if (!clear && have_sample) {
            status |= MRD_BIT(MRD_S_BLANKED);
        }
    }
    state->off_known = 1;
    return status;
}
