/* Stage 9: estimate. Rate, or filtered derivative and norm, in; rate counts out; saturates at 65535. */
#include "arith.h"
#include "supervisor.h"

/* Turn of the field a period, Q15 rad: |filtered| / |B|. */
static uint16_t turn_of_field(const mrd_trace *trace)
{
    uint16_t change = mrd_isqrt_u32(mrd_norm_sq(trace->low_pass.filtered));
    uint16_t norm = mrd_isqrt_u32(trace->plausibility.norm_sq);

    if (norm == 0u) {
        norm = 1; /* only where the norm is waived */
    }
    if (change >= (uint32_t)norm * 2u) {
        return 65535u;
    }
    return mrd_div_u32_u16((uint32_t)change << 15, norm);
}

uint32_t mrd_estimate_rate(const mrd_config *config, const mrd_trace *trace, mrd_estimate *estimate)
{
    uint32_t status = 0;

    estimate->rate = 0;
    estimate->valid = 1;
    estimate->fell_back = 0;
    if (config->supervisor.settle_by == MRD_SETTLE_BY_GYRO) {
        if (trace->calibration.rate_valid) {
            estimate->rate = mrd_isqrt_u32(mrd_norm_sq(trace->calibration.rate)); /* at most 56754 */
            return 0;
        }
        estimate->fell_back = 1;
        status |= MRD_BIT(MRD_S_ESTIMATE_FELL_BACK);
    }
    if (trace->derivative.valid) {
        uint32_t rate = mrd_mul_u16(turn_of_field(trace), config->supervisor.estimate_mantissa)
                        >> config->supervisor.estimate_shift;

        estimate->rate = rate > 65535u ? (uint16_t)65535u : (uint16_t)rate;
    } else {
        estimate->valid = 0;
    }
    return status;
}
