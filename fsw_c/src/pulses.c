/* Stage 11: pulses. Command in, signed ticks of coil current out. Cannot exceed window_ticks, which is at most 16384. */
#include "arith.h"
#include "stages.h"

uint32_t mrd_make_pulses(const mrd_path_config *config, const int16_t command[3], mrd_pulses_trace *trace)
{
    uint32_t status = 0;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        /* At most 32767 * 16384 + 2^14, below 2^30. */
        int32_t ticks = mrd_round_shift(mrd_mul_s16(command[i], config->window_ticks), 15);

        if (ticks != 0 && mrd_abs_s32(ticks) < (uint32_t)config->shortest_ticks) {
            status |= MRD_BIT(MRD_S_SHORT_PULSE_X + i);
            ticks = 0;
        }
        trace->ticks[i] = (int16_t)(config->polarity[i] < 0 ? -ticks : ticks);
    }
    return status;
}
