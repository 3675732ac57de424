/* Stage 6: derivative. Field counts in, field counts a period out; saturates at 32767 and says so. */
#include "arith.h"
#include "stages.h"

/* Period over interval in Q14, for an interval of half a period to one and a half: 10922..32768. */
static uint16_t period_over_interval(uint32_t period_us, uint32_t interval_us)
{
    uint16_t down = (uint16_t)(mrd_bits_u32(period_us) - 15u);
    uint32_t period = period_us >> down;                    /* 16384..32767 */
    uint16_t interval = (uint16_t)(interval_us >> down);    /* 8192..49151 */
    uint32_t rounded = (period << 14) + (interval >> 1);    /* below 2^30 */

    /* interval >= (period - 1) / 2: the quotient passes 2^15 by rounding only, and the division is exact to 2^16. */
    uint16_t factor = mrd_div_u32_u16(rounded, interval);
    return factor > 32768u ? (uint16_t)32768u : factor;
}

static uint32_t difference(const mrd_path_state *state, uint16_t factor, const int16_t field[3], int16_t derivative[3])
{
    uint32_t status = 0;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        int32_t change = (int32_t)field[i] - state->field[i];
        /* |change| up to 65534, factor up to 32768: |product| below 2^31 - 2^13. */
        int32_t value = mrd_round_shift(change * (int32_t)factor, 14);

        derivative[i] = mrd_clamp_s16(value);
        if (value != derivative[i]) {
            status |= MRD_BIT(MRD_S_DERIVATIVE_CLAMPED);
        }
    }
    return status;
}

uint32_t mrd_derive(mrd_path_state *state, const mrd_path_config *config, uint32_t sample_us, const int16_t field[3],
                    mrd_derivative_trace *trace)
{
    uint32_t status = 0;
    uint16_t i;

    if (!state->field_valid) {
        status |= MRD_BIT(MRD_S_NO_PREVIOUS);
    } else {
        trace->interval_us = sample_us - state->sample_us;
        if (trace->interval_us < (config->period_us + 1u) >> 1) {
            status |= MRD_BIT(MRD_S_INTERVAL_SHORT);
        } else if (trace->interval_us > config->period_us + (config->period_us >> 1)) {
            status |= MRD_BIT(MRD_S_INTERVAL_LONG);
        } else {
            trace->factor = period_over_interval(config->period_us, trace->interval_us);
            status |= difference(state, trace->factor, field, trace->derivative);
            trace->valid = 1;
        }
    }
    for (i = 0; i < 3u; i++) {
        state->field[i] = field[i];
    }
    state->sample_us = sample_us;
    state->field_valid = 1;
    return status;
}
