/*
 * arith.h - the integer operations that all stages share. Each states its operands, its result and why it cannot
 * overflow. Shifts act on unsigned values only: C leaves the right shift of a negative number to the compiler.
 * Every product is made in 32 bits by an explicit cast: int may have 16.
 */
#ifndef MRD_ARITH_H
#define MRD_ARITH_H

#include <stdint.h>

#include "mrd.h"

#define MRD_BIT(n) ((uint32_t)1 << (n))

/* |x|, exact for -2^31 too. */
static inline uint32_t mrd_abs_s32(int32_t x)
{
    return x < 0 ? (uint32_t)0 - (uint32_t)x : (uint32_t)x;
}

/* magnitude with the sign of x. magnitude up to 2^31 - 1. */
static inline int32_t mrd_with_sign_of(int32_t x, uint32_t magnitude)
{
    return x < 0 ? -(int32_t)magnitude : (int32_t)magnitude;
}

/* x / 2^shift, rounded half away from zero. shift 1..31; |x| + 2^(shift - 1) below 2^32, which holds for every int32. */
static inline int32_t mrd_round_shift(int32_t x, uint16_t shift)
{
    return mrd_with_sign_of(x, (mrd_abs_s32(x) + MRD_BIT(shift - 1)) >> shift);
}

/* x limited to -32767..32767: saturates. */
static inline int16_t mrd_clamp_s16(int32_t x)
{
    if (x > 32767) {
        return 32767;
    }
    if (x < -32767) {
        return -32767;
    }
    return (int16_t)x;
}

/* a * b: at most 65535^2, below 2^32. */
static inline uint32_t mrd_mul_u16(uint16_t a, uint16_t b)
{
    return (uint32_t)a * b;
}

/* a * b: at most 2^30. */
static inline int32_t mrd_mul_s16(int16_t a, int16_t b)
{
    return (int32_t)a * b;
}

/* Sum of squares: at most 3 * 2^30, below 2^32. */
static inline uint32_t mrd_norm_sq(const int16_t v[3])
{
    return (uint32_t)mrd_mul_s16(v[0], v[0]) + (uint32_t)mrd_mul_s16(v[1], v[1]) + (uint32_t)mrd_mul_s16(v[2], v[2]);
}

/* The larger of two. */
static inline uint32_t mrd_max_u32(uint32_t a, uint32_t b)
{
    return a > b ? a : b;
}

/* Adds 1; stops at 65535. */
static inline uint16_t mrd_count_u16(uint16_t n)
{
    return n < 65535u ? (uint16_t)(n + 1u) : n;
}

/* Adds 1; stops at 2^32 - 1. */
static inline uint32_t mrd_count_u32(uint32_t n)
{
    return n < UINT32_MAX ? n + 1u : n;
}

/* a x b: |.| up to 2 * 32767^2, below 2^31. No element is -32768. */
void mrd_cross(const int16_t a[3], const int16_t b[3], int32_t out[3]);

/* x * mantissa / 2^(16 + shift), rounded half away from zero, exactly, for |x| up to 2 * 32767^2 and shift 1..31; up to 2^30. */
int32_t mrd_scale_cross(int32_t x, uint16_t mantissa, int16_t shift);

/* Length of x in binary: 1..32, and 0 for 0. Five fixed steps. */
uint16_t mrd_bits_u32(uint32_t x);

/* min(65535, floor(2^31 / d)) for d in 32768..65535, exactly. */
uint16_t mrd_reciprocal_u16(uint16_t d);

/* floor(n / d), exactly, for d >= 1 and n < 65536 d. A fixed number of steps, no division instruction. */
uint16_t mrd_div_u32_u16(uint32_t n, uint16_t d);

/* Largest r with r * r <= x. Sixteen fixed steps. */
uint16_t mrd_isqrt_u32(uint32_t x);

#endif
