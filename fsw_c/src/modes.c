/* Modes: the table in mrd.h, one small function per command and per mode. */
#include "arith.h"
#include "supervisor.h"

uint16_t mrd_is_mode(uint16_t mode)
{
    switch (mode) {
    case MRD_MODE_HOLD_OFF:
    case MRD_MODE_DAMPING:
    case MRD_MODE_SETTLED:
    case MRD_MODE_SAFE:
    case MRD_MODE_INHIBIT:
    case MRD_MODE_BENCH:
    case MRD_MODE_PAUSE:
        return 1;
    default:
        return 0;
    }
}

/* ---- commands: each returns 1 if accepted ---- */

static uint16_t command_inhibit(mrd_state *state)
{
    if (state->mode == MRD_MODE_SAFE || state->mode == MRD_MODE_BENCH) {
        return 0;
    }
    state->mode = MRD_MODE_INHIBIT;
    state->inhibit_commanded = 65535u;
    return 1;
}

static uint16_t command_safe(mrd_state *state)
{
    state->mode = MRD_MODE_SAFE;
    state->inhibit_commanded = 0;
    return 1;
}

static uint16_t command_resume(mrd_state *state)
{
    if (state->mode == MRD_MODE_HOLD_OFF || state->mode == MRD_MODE_DAMPING || state->mode == MRD_MODE_SETTLED) {
        return 0;
    }
    state->mode = MRD_MODE_HOLD_OFF;
    state->inhibit_commanded = 0;
    state->trips = 0;
    mrd_path_restore(&state->path);
    return 1;
}

static uint16_t command_arm(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs)
{
    if (state->mode != MRD_MODE_SAFE || inputs->command_key != config->bench_key) {
        return 0;
    }
    state->mode = MRD_MODE_BENCH;
    return 1;
}

static uint16_t command_bench(const mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs)
{
    uint32_t ticks = mrd_abs_s32(inputs->command_ticks);

    return state->mode == MRD_MODE_BENCH && !inputs->low_power && inputs->command_coil < 3u && ticks >= 1u
           && ticks <= (uint32_t)config->bench_limit_ticks;
}

static uint16_t accept(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                       uint16_t *bench_pulse)
{
    switch (inputs->command) {
    case MRD_COMMAND_NONE:
        return 1;
    case MRD_COMMAND_ARM:
        return command_arm(state, config, inputs);
    case MRD_COMMAND_INHIBIT:
        return command_inhibit(state);
    case MRD_COMMAND_SAFE:
        return command_safe(state);
    case MRD_COMMAND_RESUME:
        return command_resume(state);
    case MRD_COMMAND_BENCH:
        *bench_pulse = command_bench(state, config, inputs);
        return *bench_pulse;
    default:
        return 0;
    }
}

uint32_t mrd_obey(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs, uint16_t *bench_pulse)
{
    uint16_t before = state->mode;
    uint32_t status = 0;

    *bench_pulse = 0;
    if (!mrd_is_mode(state->mode)) {
        state->mode = MRD_MODE_SAFE;
    }
    if (!accept(state, config, inputs, bench_pulse)) {
        status |= MRD_BIT(MRD_S_COMMAND_REFUSED);
    }
    if (state->mode != before) {
        state->dwell = 0;
        if (before == MRD_MODE_BENCH) { /* what was measured while the norm was waived is not used */
            state->path.field_valid = 0;
            state->path.filter_valid = 0;
        }
    }
    return status;
}

/* ---- transitions: each returns the mode that follows ---- */

/* One more cycle towards needed: 1 where it is reached. */
static uint16_t dwells(mrd_state *state, uint32_t needed)
{
    state->dwell = mrd_count_u32(state->dwell);
    return state->dwell >= needed;
}

static uint16_t from_hold_off(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs)
{
    if (inputs->low_power) {
        return MRD_MODE_INHIBIT;
    }
    if (inputs->separation_s < config->hold_off_s) {
        state->dwell = 0;
        return MRD_MODE_HOLD_OFF;
    }
    return dwells(state, 2) ? MRD_MODE_DAMPING : MRD_MODE_HOLD_OFF; /* two in a row: no flipped bit ends hold-off */
}

static uint16_t from_damping(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                             const mrd_estimate *estimate, uint16_t diverging)
{
    if (inputs->low_power) {
        return MRD_MODE_INHIBIT;
    }
    if (diverging) {
        uint16_t again = state->trips < config->retries;

        state->trips = mrd_count_u16(state->trips);
        state->counters.trips = mrd_count_u16(state->counters.trips);
        return again ? MRD_MODE_PAUSE : MRD_MODE_SAFE;
    }
    if (estimate->valid && estimate->rate > config->settled_rate) {
        state->dwell = 0;
    } else if (estimate->valid && !estimate->fell_back && dwells(state, config->settle_dwell)) {
        state->trips = 0;
        return MRD_MODE_SETTLED;
    }
    return MRD_MODE_DAMPING;
}

static uint16_t from_settled(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                             const mrd_estimate *estimate)
{
    if (estimate->valid && estimate->rate <= config->wake_rate) {
        state->dwell = 0;
    } else if (estimate->valid && dwells(state, config->wake_dwell) && !inputs->low_power) {
        return MRD_MODE_DAMPING;
    }
    return MRD_MODE_SETTLED;
}

static uint16_t from_pause(mrd_state *state, const mrd_supervisor_config *config)
{
    return dwells(state, config->pause_cycles) ? MRD_MODE_HOLD_OFF : MRD_MODE_PAUSE;
}

/* The mode that follows. */
static uint16_t next_mode(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                          const mrd_estimate *estimate, uint16_t diverging)
{
    switch (state->mode) {
    case MRD_MODE_HOLD_OFF:
        return from_hold_off(state, config, inputs);
    case MRD_MODE_DAMPING:
        return from_damping(state, config, inputs, estimate, diverging);
    case MRD_MODE_SETTLED:
        return from_settled(state, config, inputs, estimate);
    case MRD_MODE_PAUSE:
        return from_pause(state, config);
    default: /* safe and bench, and inhibit by command: left by command only */
        return state->mode;
    }
}

/* Low power once an orbit must not blind the guard. */
static uint16_t keeps_progress(const mrd_state *state)
{
    return state->mode == MRD_MODE_DAMPING || state->mode == MRD_MODE_HOLD_OFF
           || (state->mode == MRD_MODE_INHIBIT && !state->inhibit_commanded);
}

static uint32_t told(const mrd_state *state, uint16_t diverging)
{
    uint32_t status = 0;

    if (state->progress.stalled) {
        status |= MRD_BIT(MRD_S_NO_PROGRESS);
    }
    if (state->mode == MRD_MODE_PAUSE || (diverging && state->mode == MRD_MODE_SAFE)) {
        status |= MRD_BIT(MRD_S_DIVERGING);
    }
    return status;
}

uint32_t mrd_change_mode(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                         const mrd_estimate_trace *across, const mrd_estimate *estimate)
{
    static const mrd_progress anew;
    uint16_t diverging = 0;
    uint16_t before;

    if (state->mode == MRD_MODE_INHIBIT && !inputs->low_power && !state->inhibit_commanded) {
        state->mode = MRD_MODE_HOLD_OFF;
        state->dwell = 0;
    }
    if (state->mode == MRD_MODE_DAMPING) {
        diverging = mrd_judge_progress(&state->progress, config, state->trips, across);
    }
    before = state->mode;
    state->mode = next_mode(state, config, inputs, estimate, diverging);
    if (state->mode != before) {
        state->dwell = 0;
    }
    if (!keeps_progress(state)) {
        state->progress = anew;
    }
    return told(state, diverging);
}
