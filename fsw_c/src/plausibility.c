/* Stage 2: plausibility. Field counts in, norm and its square out. Cannot overflow: 3 * 32767^2 is below 2^32. */
#include "arith.h"
#include "stages.h"

uint32_t mrd_check_norm(const mrd_path_config *config, const int16_t field[3], mrd_plausibility_trace *trace)
{
    trace->norm_sq = mrd_norm_sq(field);
    trace->norm = mrd_isqrt_u32(trace->norm_sq);
    if (trace->norm_sq < config->norm_min_sq || trace->norm_sq > config->norm_max_sq) {
        return MRD_BIT(MRD_S_FIELD_IMPLAUSIBLE);
    }
    return 0;
}
