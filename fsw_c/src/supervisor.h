/* supervisor.h - the parts of the supervisor, one file each. */
#ifndef MRD_SUPERVISOR_H
#define MRD_SUPERVISOR_H

#include "mrd.h"

/* Stage 9: rate estimate. */
typedef struct {
    uint16_t rate;  /* rate counts */
    uint16_t valid; /* 0 or 1 */
} mrd_estimate;

uint32_t mrd_estimate_rate(const mrd_config *config, const mrd_trace *trace, mrd_estimate *estimate);

/* The command, then one transition. bench_pulse becomes 1 where the bench command of this cycle is accepted. */
uint32_t mrd_change_mode(mrd_state *state, const mrd_supervisor_config *config, const mrd_inputs *inputs,
                         const mrd_estimate *estimate, uint16_t *bench_pulse);

#endif
