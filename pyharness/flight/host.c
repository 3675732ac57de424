/* host.c - loops over many steps in C, for the harness on this machine. Not flight code: it takes any build of the controller by its function pointer. */
#include <stddef.h>

#include "mrd.h"

typedef void (*step_function)(mrd_state *, const mrd_config *, const mrd_inputs *, mrd_outputs *);

/* One step of each of n controllers. */
void host_step_many(step_function step, mrd_state *states, const mrd_config *configs, const mrd_inputs *inputs,
                    mrd_outputs *outputs, size_t n)
{
    size_t i;

    for (i = 0; i < n; i++) {
        step(&states[i], &configs[i], &inputs[i], &outputs[i]);
    }
}

/* n steps of one controller. */
void host_run(step_function step, mrd_state *state, const mrd_config *config, const mrd_inputs *inputs,
              mrd_outputs *outputs, size_t n)
{
    size_t i;

    for (i = 0; i < n; i++) {
        step(state, config, &inputs[i], &outputs[i]);
    }
}
