/* Denormals; Intel 64 and IA-32 Architectures Software Developer's Manual, volume 1, section 10.2.3 (MXCSR);
 * Arm Architecture Reference Manual, FPCR.FZ. */
#include "float_mode.h"
#include <stdint.h>

#if defined(__SSE2__)
#include <immintrin.h>

void float_mode_flush_to_zero(void)
{
    _mm_setcsr(_mm_getcsr() | 0x8040);
}
#elif defined(__aarch64__)
void float_mode_flush_to_zero(void)
{
    uint64_t mode;
    __asm__ volatile("mrs %0, fpcr" : "=r"(mode));
    __asm__ volatile("msr fpcr, %0" : : "r"(mode | (UINT64_C(1) << 24)));
}
#else
void float_mode_flush_to_zero(void)
{
}
#endif
