/* Four or eight floats at a time, as gcc and clang give them on any processor (their vector extension): for
 * the few loops that every sample passes. Order of additions is fixed, so results do not depend on the
 * compiler's mood. */
#ifndef DSP_LANES_H
#define DSP_LANES_H

#include <stdint.h>
#include <string.h>
#ifdef __SSE4_1__
#include <smmintrin.h>
#endif

#define LANES 4u

typedef float lanes __attribute__((vector_size(16)));
typedef int32_t lane_mask __attribute__((vector_size(16)));

/* Eight floats: one register where the processor has AVX2, else two. A function marked LANES_WIDE is compiled
 * for both and the processor's own taken when the program is loaded; no product is contracted into a sum
 * (-std=c11), so that the results are the same. Not for sanitizers, which start later than that choice. */
#define WIDE_LANES 8u
typedef float wide_lanes __attribute__((vector_size(32)));
typedef int32_t wide_mask __attribute__((vector_size(32)));
#if defined(__x86_64__) && defined(__GNUC__) && !defined(__clang__) && !defined(__SANITIZE_ADDRESS__) &&     \
    !defined(__SANITIZE_THREAD__)
#define LANES_WIDE __attribute__((target_clones("avx2", "default")))
#else
#define LANES_WIDE
#endif

#define WIDE_ALL(x) ((wide_lanes){0} + (x))
/* Where the mask is set, yes; else no. */
#define WIDE_CHOOSE(mask, yes, no) ((wide_lanes)(((mask) & (wide_mask)(yes)) | (~(mask) & (wide_mask)(no))))
/* Without its sign. */
#define WIDE_SIZE(x) ((wide_lanes)((wide_mask)(x)&INT32_MAX))

/* By address: compilers pass such a register differently with and without AVX2. */
static inline void wide_load(wide_lanes *out, const float *from)
{
    memcpy(out, from, sizeof *out);
}

static inline void wide_store(float *to, const wide_lanes *from)
{
    memcpy(to, from, sizeof *from);
}

/* From and to memory of any alignment. */
static inline lanes lanes_load(const float *from)
{
    lanes x;
    memcpy(&x, from, sizeof x);
    return x;
}

static inline void lanes_store(float *to, lanes x)
{
    memcpy(to, &x, sizeof x);
}

static inline lanes lanes_all(float x)
{
    return (lanes){x, x, x, x};
}

/* Where the processor has one instruction for it, compilers do not find it by themselves; the results are the
 * same. */
static inline lanes lanes_choose(lane_mask mask, lanes yes, lanes no)
{
#ifdef __SSE4_1__
    return (lanes)_mm_blendv_ps((__m128)no, (__m128)yes, (__m128)mask);
#else
    return (lanes)((mask & (lane_mask)yes) | (~mask & (lane_mask)no));
#endif
}

/* The smaller and the greater of each pair; b where either is NAN. */
static inline lanes lanes_least(lanes a, lanes b)
{
#ifdef __SSE4_1__
    return (lanes)_mm_min_ps((__m128)a, (__m128)b);
#else
    return lanes_choose(a < b, a, b);
#endif
}

static inline lanes lanes_greatest(lanes a, lanes b)
{
#ifdef __SSE4_1__
    return (lanes)_mm_max_ps((__m128)a, (__m128)b);
#else
    return lanes_choose(a > b, a, b);
#endif
}

/* Without its sign. */
static inline lanes lanes_size(lanes x)
{
    const lane_mask sign = {INT32_MIN, INT32_MIN, INT32_MIN, INT32_MIN};
    return (lanes)((lane_mask)x & ~sign);
}

/* Whether any lane of a comparison is true. */
static inline int lanes_any(lane_mask mask)
{
    uint64_t halves[2];
    memcpy(halves, &mask, sizeof halves);
    return (halves[0] | halves[1]) != 0;
}

/* A bit for each lane of a comparison that is true, lane 0 the lowest. */
static inline uint32_t lanes_bits(lane_mask mask)
{
#ifdef __SSE4_1__
    return (uint32_t)_mm_movemask_ps((__m128)mask);
#else
    const lane_mask bits = mask & (lane_mask){1, 2, 4, 8};
    return (uint32_t)(bits[0] | bits[1] | bits[2] | bits[3]);
#endif
}

static inline double lanes_sum(lanes x)
{
    return ((double)x[0] + x[1]) + ((double)x[2] + x[3]);
}

#endif
