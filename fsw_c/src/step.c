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
    uint16_t flags = state->inhibit_commanded;
    uint16_t inhibited = mode == MRD_MODE_INHIBIT && (flags & (uint16_t)(flags - 1u)) != 0u; /* at least two bits */
    uint16_t restarts = state->counters.restarts;

    if (state->digest == mrd_state_digest(state)) {
        return 0;
    }
    mrd_reset(state);
    if (mode == MRD_MODE_SAFE || mode == MRD_MODE_BENCH || !mrd_is_mode(mode)) {
        state->mode = MRD_MODE_SAFE;
    } else if (mode == MRD_MODE_PAUSE) {
        state->mode = MRD_MODE_PAUSE;
    } else if (inhibited) {
        state->mode = MRD_MODE_INHIBIT;
        state->inhibit_commanded = 65535u;
    }
    state->counters.restarts = mrd_count_u16(restarts);
    return MRD_BIT(MRD_S_STATE_RESTARTED);
}

static void go_safe(mrd_state *state)
{
    static const mrd_progress anew;

    mrd_path_reset(&state->path);
    state->progress = anew;
    state->dwell = 0;
    state->inhibit_commanded = 0;
    state->trips = 0;
    state->mode = MRD_MODE_SAFE;
    state->counters.corrupt = mrd_count_u16(state->counters.corrupt);
}

/* Adds 1 where any of the bits is set. */
static void count_any(uint16_t *counter, uint32_t status, uint32_t bits)
{
    if (status & bits) {
        *counter = mrd_count_u16(*counter);
    }
}

static void count(mrd_counters *counters, uint16_t trusted, uint32_t status)
{
    uint16_t *by_trust = trusted ? &counters->trusted : &counters->rejected;

    *by_trust = mrd_count_u16(*by_trust);
    count_any(&counters->blanked, status, MRD_BIT(MRD_S_BLANKED));
    count_any(&counters->fell_back, status, MRD_BIT(MRD_S_FELL_BACK));
    count_any(&counters->refused, status, MRD_BIT(MRD_S_COMMAND_REFUSED));
    count_any(&counters->mag_faults, status,
              MRD_BIT(MRD_S_MAG_RANGE) | MRD_BIT(MRD_S_FIELD_IMPLAUSIBLE) | MRD_BIT(MRD_S_MAG_FROZEN)
                  | MRD_BIT(MRD_S_MAG_DEAD_AXIS) | MRD_BIT(MRD_S_MAG_JUMP) | MRD_BIT(MRD_S_MAG_NOISY));
    count_any(&counters->gyro_faults, status,
              MRD_BIT(MRD_S_GYRO_MISSING) | MRD_BIT(MRD_S_GYRO_RANGE) | MRD_BIT(MRD_S_GYRO_FROZEN)
                  | MRD_BIT(MRD_S_GYRO_DISAGREES));
    count_any(&counters->coil_faults, status, MRD_BIT(MRD_S_COIL_CURRENT) | MRD_BIT(MRD_S_SWITCH_OFF_UNSTAMPED));
    count_any(&counters->time_faults, status,
              MRD_BIT(MRD_S_SAMPLE_OFF_TIME) | MRD_BIT(MRD_S_INTERVAL_SHORT) | MRD_BIT(MRD_S_INTERVAL_LONG));
}

/* The pulses that this mode lets out; all others stay 0. */
static void choose_pulses(const mrd_state *state, const mrd_inputs *inputs, uint16_t bench_pulse, mrd_outputs *outputs)
{
    uint16_t i;

    if (state->mode == MRD_MODE_DAMPING) {
        for (i = 0; i < 3u; i++) {
            outputs->ticks[i] = outputs->trace.pulses.ticks[i];
        }
        mrd_path_withhold(&state->path, outputs->ticks);
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
    outputs->status |= mrd_estimate_rate(&config->supervisor, &outputs->trace, &estimate);
    outputs->status |= mrd_path_drive(&config->path, &outputs->trace);
    outputs->status |= mrd_change_mode(state, &config->supervisor, inputs, &outputs->trace.estimate, &estimate);
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
    outputs->cycle = state->cycle;
    state->cycle++;
    outputs->digest = config->digest;
    outputs->counters = state->counters;
    state->digest = mrd_state_digest(state);
}
