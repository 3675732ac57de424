/* Stage 10: saturation. Demand in, command out, both in Q15 of the dipole limit; saturates at 32767 and says so. */
#include "arith.h"
#include "stages.h"

static void keep_direction(const uint32_t magnitude[3], uint32_t largest, const int32_t demand[3], int16_t command[3])
{
    uint16_t down = (uint16_t)(mrd_bits_u32(largest) - 16u);
    uint16_t divisor = (uint16_t)(largest >> down); /* 32768..65535 */
    uint16_t factor = mrd_div_u32_u16((MRD_BIT(16) * 32767u) + (divisor >> 1), divisor); /* 32767..65534, Q16 */
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        /* At most 32767 * 65536 + divisor / 2, and 32768 more: below 2^32. */
        uint32_t scaled = (mrd_mul_u16((uint16_t)(magnitude[i] >> down), factor) + 32768u) >> 16;

        command[i] = mrd_clamp_s16(mrd_with_sign_of(demand[i], scaled));
    }
}

uint32_t mrd_saturate(const mrd_path_config *config, const int32_t demand[3], mrd_saturation_trace *trace)
{
    uint32_t magnitude[3];
    uint32_t largest = 0;
    uint32_t status = 0;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        magnitude[i] = mrd_abs_s32(demand[i]);
        if (magnitude[i] > largest) {
            largest = magnitude[i];
        }
        if (magnitude[i] > 32767u) {
            status |= MRD_BIT(MRD_S_SATURATED_X + i);
        }
    }
    if (largest > 32767u && config->saturation == MRD_SATURATE_KEEP_DIRECTION) {
        keep_direction(magnitude, largest, demand, trace->command);
    } else {
        for (i = 0; i < 3u; i++) {
            trace->command[i] = mrd_clamp_s16(demand[i]);
        }
    }
    return status;
}
