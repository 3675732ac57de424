/*
 * Stage 9: law. Filtered derivative, or rate and field, in; demand out, in Q15 of the dipole limit and up to 2^30.
 * Cannot overflow: the gain's mantissa has 16 bits, its shift is at least 1.
 */
#include "arith.h"
#include "stages.h"

static uint16_t choose(const mrd_path_config *config, const mrd_trace *trace, uint32_t *status)
{
    if (!trace->gate.trusted) {
        return MRD_LAW_NONE;
    }
    if (config->law == MRD_LAW_RATE) {
        if (trace->calibration.rate_valid) {
            return MRD_LAW_RATE;
        }
        *status |= MRD_BIT(MRD_S_FELL_BACK);
    }
    return trace->derivative.valid ? MRD_LAW_DERIVATIVE : MRD_LAW_NONE;
}

static void constant_gain(const mrd_gain_config *gain, mrd_law_trace *trace)
{
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        trace->mantissa[i] = gain->mantissa[i];
        trace->shift[i] = gain->shift[i];
    }
}

/* gain / norm_sq, with a 16-bit mantissa again; norm_sq is at least 32768. */
static void normalised_gain(const mrd_gain_config *gain, uint32_t norm_sq, mrd_law_trace *trace)
{
    uint16_t down = (uint16_t)(mrd_bits_u32(norm_sq) - 16u);
    uint16_t reciprocal = mrd_reciprocal_u16((uint16_t)(norm_sq >> down));
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        uint32_t product = mrd_mul_u16(gain->mantissa[i], reciprocal); /* 2^30 to below 2^32 */
        uint16_t high = product >= MRD_BIT(31);

        trace->mantissa[i] = (uint16_t)(product >> (high ? 16 : 15));
        trace->shift[i] = (int16_t)(gain->shift[i] + (int16_t)down + (high ? 15 : 16));
    }
}

static void apply_gain(const mrd_path_config *config, const mrd_gain_config *gain, uint32_t norm_sq,
                       mrd_law_trace *trace)
{
    if (config->gain_scaling == MRD_GAIN_CONSTANT) {
        constant_gain(gain, trace);
        return;
    }
    if (norm_sq < config->norm_min_sq) {
        norm_sq = config->norm_min_sq;
    }
    if (norm_sq > config->norm_max_sq) {
        norm_sq = config->norm_max_sq;
    }
    normalised_gain(gain, norm_sq, trace);
}

uint32_t mrd_apply_law(const mrd_path_config *config, mrd_trace *trace)
{
    mrd_law_trace *law = &trace->law;
    uint32_t status = 0;
    uint16_t i;

    law->active = choose(config, trace, &status);
    if (law->active == MRD_LAW_RATE) {
        apply_gain(config, &config->rate_gain, trace->plausibility.norm_sq, law);
        mrd_cross(trace->calibration.rate, trace->calibration.field, law->cross);
        for (i = 0; i < 3u; i++) {
            law->demand[i] = mrd_scale_cross(law->cross[i], law->mantissa[i], law->shift[i]);
        }
    } else if (law->active == MRD_LAW_DERIVATIVE) {
        apply_gain(config, &config->derivative_gain, trace->plausibility.norm_sq, law);
        for (i = 0; i < 3u; i++) {
            /* |filtered| up to 32767, mantissa up to 65535: below 2^31. */
            int32_t product = -(int32_t)trace->low_pass.filtered[i] * (int32_t)law->mantissa[i];

            law->demand[i] = mrd_round_shift(product, (uint16_t)law->shift[i]);
        }
    }
    return status;
}
