/* The median of a few numbers. */
#ifndef BASE_MEDIAN_H
#define BASE_MEDIAN_H

#include <stdint.h>

/* Sorts rising; none of them NAN. */
void median_sort(double *values, uint32_t n);
/* Sorts values[n], none of them NAN, and gives their median; of an even number the mean of the middle two, of
 * none NAN. */
double median_of(double *values, uint32_t n);

#endif
