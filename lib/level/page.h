/* Page's test: finds when the mean of a sequence has risen.
 *
 * Page, "Continuous inspection schemes", Biometrika 41, 100 (1954): S = max(0, S + x - k), alarm at S >= h,
 * for x of unit variance; k is half the rise looked for. Mean run lengths by Siegmund (Sequential Analysis,
 * 1985): (exp(-2 d b) + 2 d b - 1) / (2 d^2), d = mean - k, b = h + 1.166. */
#ifndef LEVEL_PAGE_H
#define LEVEL_PAGE_H

#include <stdbool.h>
#include <stdint.h>

struct page {
    double k, h;
    double sum;       /* S */
    double since;     /* sum of x since S was last 0 */
    uint64_t n_since; /* how many that were: where the rise began, when the alarm comes */
    bool alarm;
};

void page_reset(struct page *page, double k, double h);
/* Takes one x; true from S >= h until S is back at 0. S goes no higher than h, so that the alarm ends soon
 * after the rise does. */
bool page_push(struct page *page, double x);
/* Mean of x since the rise began; NAN before anything rose. */
double page_rise(const struct page *page);

/* Mean number of x until the alarm when their mean is `mean`. */
double page_run_length(double mean, double k, double h);
/* The h whose mean run length without a rise is run_length (above 2). */
double page_threshold(double k, double run_length);

#endif
