/* Stage 1: calibration. Raw counts in, field or rate counts out; saturates, and a saturated sample is never used. */
#include "arith.h"
#include "stages.h"

/* One sensor. Returns 1 if every raw count and every result is in range. */
static uint16_t apply(const mrd_sensor_config *sensor, const int16_t raw[3], int16_t out[3])
{
    uint16_t in_range = 1;
    uint16_t i;

    for (i = 0; i < 3u; i++) {
        if (raw[i] <= -sensor->limit || raw[i] >= sensor->limit) {
            return 0;
        }
    }
    for (i = 0; i < 3u; i++) {
        const int16_t *row = &sensor->matrix[3u * i];
        /* Absolute row sum up to 65535, |raw| up to 32766: every partial sum is below 2^31. */
        int32_t sum = mrd_mul_s16(row[0], raw[0]) + mrd_mul_s16(row[1], raw[1]) + mrd_mul_s16(row[2], raw[2]);
        int32_t value = mrd_round_shift(sum, sensor->shift) - sensor->offset[i]; /* up to 2^30 + 32767 */

        out[i] = mrd_clamp_s16(value);
        if (value != out[i]) {
            in_range = 0;
        }
    }
    return in_range;
}

uint32_t mrd_calibrate(const mrd_path_config *config, const mrd_path_inputs *inputs, mrd_calibration_trace *trace)
{
    uint32_t status = 0;

    if (!inputs->mag_valid) {
        status |= MRD_BIT(MRD_S_SAMPLE_MISSING);
    } else if (!apply(&config->mag, inputs->mag_raw, trace->field)) {
        status |= MRD_BIT(MRD_S_MAG_RANGE);
    }
    if (config->gyro_fitted) {
        if (!inputs->gyro_valid) {
            status |= MRD_BIT(MRD_S_GYRO_MISSING);
        } else if (!apply(&config->gyro, inputs->gyro_raw, trace->rate)) {
            status |= MRD_BIT(MRD_S_GYRO_RANGE);
        } else {
            trace->rate_valid = 1;
        }
    }
    return status;
}
