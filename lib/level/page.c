/* Page's test and its run lengths: see the header. */
#include "level/page.h"
#include <math.h>

#define SIEGMUND_SHIFT 1.166

void page_reset(struct page *page, double k, double h)
{
    *page = (struct page){.k = k, .h = h};
}

bool page_push(struct page *page, double x)
{
    page->sum = fmin(page->sum + x - page->k, page->h);
    page->since += x;
    page->n_since++;
    page->alarm = page->alarm || page->sum >= page->h;
    if (page->sum <= 0.0) {
        page->sum = page->since = 0.0;
        page->n_since = 0;
        page->alarm = false;
    }
    return page->alarm;
}

double page_rise(const struct page *page)
{
    return page->n_since ? page->since / (double)page->n_since : (double)NAN;
}

double page_run_length(double mean, double k, double h)
{
    double d = mean - k, b = h + SIEGMUND_SHIFT;
    if (fabs(d) < 1e-6)
        return b * b;
    return (expm1(-2.0 * d * b) + 2.0 * d * b) / (2.0 * d * d);
}

double page_threshold(double k, double run_length)
{
    double low = 0.0, high = 1.0;
    while (page_run_length(0.0, k, high) < run_length && high < 1e6)
        high *= 2.0;
    for (int i = 0; i < 60; i++) {
        double middle = 0.5 * (low + high);
        if (page_run_length(0.0, k, middle) < run_length)
            low = middle;
        else
            high = middle;
    }
    return 0.5 * (low + high);
}
