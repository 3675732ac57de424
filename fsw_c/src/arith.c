#include "arith.h"

uint16_t mrd_bits_u32(uint32_t x)
{
    uint16_t bits = 0;

    if (x >= MRD_BIT(16)) {
        x >>= 16;
        bits = 16;
    }
    if (x >= MRD_BIT(8)) {
        x >>= 8;
        bits = (uint16_t)(bits + 8u);
    }
    if (x >= MRD_BIT(4)) {
        x >>= 4;
        bits = (uint16_t)(bits + 4u);
    }
    if (x >= MRD_BIT(2)) {
        x >>= 2;
        bits = (uint16_t)(bits + 2u);
    }
    return (uint16_t)(bits + (x >= 2u ? 2u : x));
}

/* floor(2^31 / m) at the middle m of each 32nd part of 32768..65535: within 1.6 %. */
static const uint16_t reciprocal_table[32] = {
    64527, 62601, 60787, 59074, 57456, 55924, 54471, 53092, 51781, 50533, 49344, 48210, 47127, 46091, 45100, 44150,
    43240, 42366, 41527, 40721, 39945, 39199, 38479, 37786, 37117, 36472, 35848, 35246, 34663, 34100, 33554, 33026,
};

uint16_t mrd_reciprocal_u16(uint16_t d)
{
    uint16_t x = reciprocal_table[(d >> 10) - 32];
    uint16_t step;
    uint32_t rest;

    /* Newton: x (2 - d x / 2^31). Each step squares the relative error and, truncated, never ends above the quotient. */
    for (step = 0; step < 2u; step++) {
        uint16_t two_minus = (uint16_t)(((uint32_t)0 - mrd_mul_u16(d, x)) >> 16); /* Q15; d x > 2^30 */
        x = (uint16_t)(mrd_mul_u16(x, two_minus) >> 15);
    }
    /* Now at most 2 too small: shown for every d by test_reciprocal_all_divisors. */
    rest = MRD_BIT(31) - mrd_mul_u16(d, x);
    for (step = 0; step < 2u; step++) {
        if (rest >= d && x < 65535u) {
            rest -= d;
            x++;
        }
    }
    return x;
}

uint16_t mrd_div_u32_u16(uint32_t n, uint16_t d)
{
    uint16_t up = (uint16_t)(16u - mrd_bits_u32(d));
    uint16_t divisor = (uint16_t)((uint32_t)d << up);
    uint32_t scaled = n << up; /* below 65536 * divisor, so no bit is lost */
    uint16_t reciprocal = mrd_reciprocal_u16(divisor);
    uint32_t high = mrd_mul_u16((uint16_t)(scaled >> 16), reciprocal);
    uint32_t low = mrd_mul_u16((uint16_t)(scaled & 0xFFFFu), reciprocal);
    uint32_t quotient = (high + (low >> 16)) >> 15; /* 65535^2 + 65534 is below 2^32 */
    uint32_t rest = scaled - quotient * divisor;
    uint16_t step;

    /* The reciprocal is less than 1 too small, and scaled below 2^32: the quotient at most 2 too small. */
    for (step = 0; step < 2u; step++) {
        if (rest >= divisor) {
            rest -= divisor;
            quotient++;
        }
    }
    return (uint16_t)quotient;
}

uint16_t mrd_isqrt_u32(uint32_t x)
{
    uint32_t root = 0; /* 2 * bit * (root so far), shifted along: below 2^32 */
    uint32_t bit = MRD_BIT(30);
    uint16_t step;

    for (step = 0; step < 16u; step++) {
        if (x >= root + bit) {
            x -= root + bit;
            root = (root >> 1) + bit;
        } else {
            root >>= 1;
        }
        bit >>= 2;
    }
    return (uint16_t)root;
}

void mrd_cross(const int16_t a[3], const int16_t b[3], int32_t out[3])
{
    out[0] = mrd_mul_s16(a[1], b[2]) - mrd_mul_s16(a[2], b[1]);
    out[1] = mrd_mul_s16(a[2], b[0]) - mrd_mul_s16(a[0], b[2]);
    out[2] = mrd_mul_s16(a[0], b[1]) - mrd_mul_s16(a[1], b[0]);
}

int32_t mrd_scale_cross(int32_t x, uint16_t mantissa, int16_t shift)
{
    uint32_t magnitude = mrd_abs_s32(x);
    uint32_t high = mrd_mul_u16((uint16_t)(magnitude >> 16), mantissa);
    uint32_t low = mrd_mul_u16((uint16_t)(magnitude & 0xFFFFu), mantissa);

    /* u m + (v m >> 16) + 2^(shift - 1) is below 2^32. */
    return mrd_with_sign_of(x, (high + (low >> 16) + MRD_BIT(shift - 1)) >> shift);
}
