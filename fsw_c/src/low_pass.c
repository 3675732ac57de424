/*
 * Stage 7: low-pass. Field counts a period in and out, the filter with 8 fraction bits, without which it would stick
 * near zero. Cannot overflow: the new filter lies between the old one and the new target, both within 32767 * 256.
 */
#include "arith.h"
#include "stages.h"

/* difference * gain / 2^15, rounded half away from zero. |difference| up to 2 * 32767 * 256, gain up to 32768. */
static int32_t scaled(int32_t difference, uint16_t gain)
{
    uint32_t magnitude = mrd_abs_s32(difference);
    uint32_t high = (magnitude >> 8) * gain;    /* up to 65534 * 32768, below 2^31 */
    uint32_t low = (magnitude & 0xFFu) * gain;  /* up to 255 * 32768 */

    return mrd_with_sign_of(difference, (high + ((low + MRD_BIT(14)) >> 8)) >> 7);
}

void mrd_low_pass(mrd_path_state *state, const mrd_path_config *config, const int16_t derivative[3],
                  mrd_low_pass_trace *trace)
{
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        int32_t target = (int32_t)derivative[i] * 256;

        if (state->filter_valid) {
            state->filter[i] += scaled(target - state->filter[i], config->filter_gain);
        } else {
            state->filter[i] = target;
        }
        trace->filter[i] = state->filter[i];
        trace->filtered[i] = mrd_clamp_s16(mrd_round_shift(state->filter[i], 8));
    }
    state->filter_valid = 1;
}
