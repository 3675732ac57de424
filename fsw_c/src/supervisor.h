/* supervisor.h - the parts of the supervisor, one file each. */
#ifndef MRD_SUPERVISOR_H
#define MRD_SUPERVISOR_H

#include "mrd.h"

/* Stage 12: rate estimate. */
typedef struct {
    uint16_t rate;  /* rate counts */
    uint16_t valid; /* 0 or 1 */
    uint16_t fell_back; /* 0 or 1: from the field in the gyro's place */
} mrd_estimate;

/* Fills trace.estimate too. */
uint32_t mrd_estimate_rate(const mrd_supervisor_config *config, mrd_trace *trace, mrd_estimate *estimate);

/* 1 for MRD_MODE_*, 0 for any other value. */
uint16_t mrd_is_mode(uint16_t mode);

/* The command. bench_pulse becomes 1 where the bench command of this cycle is accepted. Returns status bits. */
uint32_t mrd_obey(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs, uint16_t *bench_pulse);

/* One cycle of DAMPING, after so many trips: 1 if the tumble grows, or after a trip does not shrink. */
uint16_t mrd_judge_progress(mrd_progress *progress, const mrd_supervisor_config *config, uint16_t trips,
                            const mrd_estimate_trace *estimate);

/* One transition. Returns status bits. */
uint32_t mrd_change_mode(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                         const mrd_estimate_trace *across, const mrd_estimate *estimate);

/* The fold of the digests over bytes, each a field of its own. */
uint32_t mrd_fold_bytes(const uint8_t *bytes, uint16_t count);

#endif
