/* Stage 12: estimate. Rate, or filtered derivative and norm, in; rate counts out; saturates at 65535. */
#include "arith.h"
#include "supervisor.h"

/* Turn of the field a period, Q15 rad: |filtered| / |B|. */
static uint16_t turn_of_field(const mrd_trace *trace)
{
    uint16_t change = mrd_isqrt_u32(mrd_norm_sq(trace->low_pass.filtered));
    uint16_t norm = trace->plausibility.norm;

    if (norm == 0u) {
        norm = 1; /* only where the norm is waived */
    }
    if (change >= (uint32_t)norm * 2u) {
        return 65535u;
    }
    return mrd_div_u32_u16((uint32_t)change << 15, norm);
}

static void rate_across_field(const mrd_supervisor_config *config, mrd_trace *trace)
{
    uint32_t rate;

    if (!trace->derivative.valid) {
        return;
    }
    trace->estimate.turn = turn_of_field(trace);
    rate = mrd_mul_u16(trace->estimate.turn, config->estimate_mantissa) >> config->estimate_shift;
    trace->estimate.across = rate > 65535u ? (uint16_t)65535u : (uint16_t)rate;
    trace->estimate.across_valid = 1;
}

uint32_t mrd_estimate_rate(const mrd_supervisor_config *config, mrd_trace *trace, mrd_estimate *estimate)
{
    rate_across_field(config, trace);
    estimate->rate = trace->estimate.across;
    estimate->valid = trace->estimate.across_valid;
    estimate->fell_back = 0;
    if (config->settle_by != MRD_SETTLE_BY_GYRO) {
        return 0;
    }
    if (trace->calibration.rate_valid) {
        estimate->rate = mrd_isqrt_u32(mrd_norm_sq(trace->calibration.rate)); /* at most 56754 */
        estimate->valid = 1;
        return 0;
    }
    estimate->fell_back = 1;
    return MRD_BIT(MRD_S_ESTIMATE_FELL_BACK);
}
