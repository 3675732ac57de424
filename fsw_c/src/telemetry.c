/* Telemetry: one cycle as bytes, most significant first. The table is in ../README.md. */
#include "arith.h"
#include "supervisor.h"

static const uint16_t check_at = MRD_TELEMETRY_BYTES - 4;

/* Each returns the place after what it wrote. */
static uint8_t *put_u8(uint8_t *at, uint16_t value)
{
    at[0] = (uint8_t)(value & 0xFFu);
    return at + 1;
}

static uint8_t *put_u16(uint8_t *at, uint16_t value)
{
    return put_u8(put_u8(at, (uint16_t)(value >> 8)), value);
}

static uint8_t *put_u32(uint8_t *at, uint32_t value)
{
    return put_u16(put_u16(at, (uint16_t)(value >> 16)), (uint16_t)(value & 0xFFFFu));
}

static uint8_t *put_counters(uint8_t *at, const mrd_counters *counters)
{
    at = put_u16(at, counters->trusted);
    at = put_u16(at, counters->rejected);
    at = put_u16(at, counters->blanked);
    at = put_u16(at, counters->fell_back);
    at = put_u16(at, counters->refused);
    at = put_u16(at, counters->restarts);
    at = put_u16(at, counters->corrupt);
    at = put_u16(at, counters->mag_faults);
    at = put_u16(at, counters->gyro_faults);
    at = put_u16(at, counters->coil_faults);
    at = put_u16(at, counters->time_faults);
    return put_u16(at, counters->trips);
}

static uint16_t flags(const mrd_outputs *outputs)
{
    const uint16_t *fault = outputs->trace.currents.fault;

    return (uint16_t)((outputs->rate_valid & 1u) | (outputs->handover & 1u) << 1 | (fault[0] & 3u) << 2 | (fault[1] & 3u) << 4
                      | (fault[2] & 3u) << 6);
}

static uint16_t decisions(const mrd_trace *trace)
{
    return (uint16_t)((trace->law.active & 3u) | (trace->gate.trusted & 1u) << 2);
}

void mrd_telemetry(const mrd_outputs *outputs, uint8_t bytes[MRD_TELEMETRY_BYTES])
{
    uint8_t *at = bytes;
    uint16_t i;

    at = put_u8(at, MRD_VERSION);
    at = put_u8(at, outputs->mode);
    at = put_u32(at, outputs->status);
    at = put_u16(at, outputs->rate);
    at = put_u8(at, flags(outputs));
    at = put_u8(at, decisions(&outputs->trace));
    at = put_u16(at, outputs->cycle);
    at = put_u32(at, outputs->digest);
    for (i = 0; i < 3u; i++) {
        at = put_u16(at, (uint16_t)outputs->ticks[i]);
    }
    at = put_counters(at, &outputs->counters);
    put_u32(at, mrd_fold_bytes(bytes, check_at));
}
