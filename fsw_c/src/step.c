/* One step of the whole controller: integrity, path, modes, outputs. */
#include "arith.h"
#include "supervisor.h"

void mrd_reset(mrd_state *state)
{
    static const mrd_state zero;

    *state = zero;
    state->mode = MRD_MODE_HOLD_OFF;
    state->digest = mrd_state_digest(state);
}

/* A state that cannot be trusted starts anew; of its mode remains what keeps coils off. */
static uint32_t restart_if_corrupt(mrd_state *state)
{
    uint16_t mode = state->mode;
    uint16_t inhibited = mode == MRD_MODE_INHIBIT && state->inhibit_commanded;
    uint16_t restarts = state->counters.restarts;

    if (state->digest == mrd_state_digest(state)) {
        return 0;
    }
    mrd_reset(state);
    if (mode == MRD_MODE_SAFE || mode == MRD_MODE_BENCH || !mrd_is_mode(mode)) {
        state->mode = MRD_MODE_SAFE;
    } else if (inhibited) {
        state->mode = MRD_MODE_INHIBIT;
        state->inhibit_commanded = 65535u;
    }
    state->counters.restarts = mrd_count_u16(restarts);
    return MRD_BIT(MRD_S_STATE_RESTARTED);
}

static void go_safe(mrd_state *state)
{
    mrd_path_reset(&state->path);
    state->dwell = 0;
    state->inhibit_commanded = 0;
    state->mode = MRD_MODE_SAFE;
}

static void count(mrd_counters *counters, uint16_t trusted, uint32_t status)
{
    if (trusted) {
        counters->trusted = mrd_count_u16(counters->trusted);
    } else {
        counters->rejected = mrd_count_u16(counters->rejected);
    }
    if (status & MRD_BIT(MRD_S_BLANKED)) {
        counters->blanked = mrd_count_u16(counters->blanked);
    }
    if (status & MRD_BIT(MRD_S_FELL_BACK)) {
        counters->fell_back = mrd_count_u16(counters->fell_back);
    }
    if (status & MRD_BIT(MRD_S_COMMAND_REFUSED)) {
        counters->refused = mrd_count_u16(counters->refused);
    }
}

/* The pulses that this mode lets out; all others stay 0. */
static void choose_pulses(const mrd_state *state, const mrd_inputs *inputs, uint16_t bench_pulse, mrd_outputs *outputs)
{
    uint16_t i;

    if (state->mode == MRD_MODE_DAMPING) {
        for (i = 0; i < 3u; i++) {
            outputs->ticks[i] = outputs->trace.pulses.ticks[i];
        }
    } else if (bench_pulse) {
        outputs->ticks[inputs->command_coil] = inputs->command_ticks;
    }
}

static void run(mrd_state *state, const mrd_config *config, const mrd_inputs *inputs, mrd_outputs *outputs)
{
    mrd_estimate estimate;
    uint16_t bench_pulse;

    outputs->status |= mrd_obey(state, &config->supervisor, inputs, &bench_pulse);
    outputs->status |= mrd_path_sense(&state->path, &config->path, &inputs->path, state->mode == MRD_MODE_BENCH,
                                      &outputs->trace);
    outputs->status |= mrd_estimate_rate(config, &outputs->trace, &estimate);
    outputs->status |= mrd_path_drive(&config->path, &outputs->trace);
    mrd_change_mode(state, &config->supervisor, inputs, &estimate);
    outputs->rate = estimate.rate;
    outputs->rate_valid = estimate.valid;
    choose_pulses(state, inputs, bench_pulse, outputs);
    count(&state->counters, outputs->trace.gate.trusted, outputs->status);
}

void mrd_step(mrd_state *state, const mrd_config *config, const mrd_inputs *inputs, mrd_outputs *outputs)
{
    static const mrd_outputs zero;

    *outputs = zero;
    outputs->status = restart_if_corrupt(state);
    if (config->digest != mrd_config_digest(config)) {
        outputs->status |= MRD_BIT(MRD_S_CONFIG_CORRUPT);
        go_safe(state);
    } else {
        run(state, config, inputs, outputs);
    }
    mrd_path_commit(&state->path, &config->path, &inputs->path, outputs->ticks);
    outputs->mode = state->mode;
    outputs->handover = state->mode == MRD_MODE_SETTLED;
    outputs->digest = config->digest;
    outputs->counters = state->counters;
    state->digest = mrd_state_digest(state);
}
