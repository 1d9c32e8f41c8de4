/* Closed forms and bounds; see ideal.h. */
#include "support/ideal.h"
#include <math.h>
#include <stdbool.h>

double ideal_chi_square_tail(uint32_t k, double x)
{
    double term = exp(-x / 2), sum = 0;
    for (uint32_t j = 0; j < k; j++) {
        sum += term;
        term *= x / 2 / (j + 1);
    }
    return sum;
}

double ideal_detection(uint32_t k, double lambda, double threshold)
{
    double weight = exp(-lambda / 2), sum = 0;
    for (uint32_t j = 0; j < 400; j++) {
        sum += weight * ideal_chi_square_tail(k + j, threshold);
        weight *= lambda / 2 / (j + 1);
    }
    return sum;
}

double ideal_threshold(uint32_t k, double false_alarm)
{
    double low = 0, high = 1000;
    for (int i = 0; i < 100; i++) {
        double middle = (low + high) / 2;
        *(ideal_chi_square_tail(k, middle) > false_alarm ? &low : &high) = middle;
    }
    return low;
}

static double lambda_for(uint32_t k, double threshold, double pd)
{
    double low = 0, high = 500;
    for (int i = 0; i < 60; i++) {
        double middle = (low + high) / 2;
        *(ideal_detection(k, middle, threshold) < pd ? &low : &high) = middle;
    }
    return low;
}

double ideal_energy_lambda(double w_hz, double t_s, double false_per_hour, double pd)
{
    uint32_t tw = (uint32_t)fmax(1, round(w_hz * t_s));
    return lambda_for(tw, ideal_threshold(tw, false_per_hour / (3600 * w_hz)), pd);
}

double ideal_matched_lambda(double w_hz, double false_per_hour, double pd)
{
    return lambda_for(1, -2 * log(false_per_hour / (3600 * w_hz)), pd);
}

double ideal_gamma_tail(double shape, double x)
{
    if (x <= 0)
        return 1;
    double front = exp(shape * log(x) - x - lgamma(shape));
    if (x < shape + 1) {
        double term = 1 / shape, sum = term;
        for (int n = 1; n < 1000 && term > sum * 1e-15; n++)
            sum += term *= x / (shape + n);
        return 1 - front * sum;
    }
    double b = x + 1 - shape, c = 1e300, d = 1 / b, h = d;
    for (int n = 1; n < 1000; n++) { /* Lentz's evaluation */
        double a = -n * (n - shape);
        b += 2;
        d = 1 / (a * d + b);
        c = b + a / c;
        h *= d * c;
        if (fabs(d * c - 1) < 1e-14)
            break;
    }
    return front * h;
}

double ideal_gamma_quantile(uint32_t n, double p)
{
    double low = 0, high = 10.0 * n + 100;
    for (int i = 0; i < 100; i++) {
        double middle = (low + high) / 2;
        *(ideal_gamma_tail(n, middle) > p ? &low : &high) = middle;
    }
    return high;
}

double ideal_tail_rate(const struct ideal_tail *tail, double threshold)
{
    return tail->scale * ideal_gamma_tail(tail->shape, tail->shape * threshold);
}

double ideal_tail_threshold(const struct ideal_tail *tail, double per_second)
{
    double low = 1, high = 1000;
    for (int i = 0; i < 100; i++) {
        double middle = (low + high) / 2;
        *(ideal_tail_rate(tail, middle) > per_second ? &low : &high) = middle;
    }
    return low;
}

/* Given the shape, the best scale makes the first count right; what is left is how they divide. */
static double fit_likelihood(double shape, const double *thresholds, const uint64_t *counts)
{
    double all = ideal_gamma_tail(shape, shape * thresholds[0]), sum = 0;
    for (int i = 0; i < IDEAL_TAIL_STEPS; i++) {
        bool last = i == IDEAL_TAIL_STEPS - 1;
        double share = ideal_gamma_tail(shape, shape * thresholds[i]) -
                       (last ? 0 : ideal_gamma_tail(shape, shape * thresholds[i + 1]));
        sum += (double)(counts[i] - (last ? 0 : counts[i + 1])) * log(share / all);
    }
    return sum;
}

struct ideal_tail ideal_tail_fit(const double thresholds[IDEAL_TAIL_STEPS],
                                 const uint64_t counts[IDEAL_TAIL_STEPS], double seconds)
{
    double low = log(0.3), high = log(100);
    for (int i = 0; i < 80; i++) { /* one hill: thirds */
        double a = low + (high - low) / 3, b = high - (high - low) / 3;
        if (fit_likelihood(exp(a), thresholds, counts) < fit_likelihood(exp(b), thresholds, counts))
            low = a;
        else
            high = b;
    }
    struct ideal_tail tail = {.shape = exp(low)};
    tail.scale = (double)counts[0] / seconds / ideal_gamma_tail(tail.shape, tail.shape * thresholds[0]);
    return tail;
}

double ideal_poisson_upper(uint32_t n, double confidence)
{
    return ideal_gamma_quantile(n + 1, 1 - confidence);
}

double ideal_crossing(const double *at, const double *share, uint32_t n)
{
    if (share[0] >= 0.9)
        return at[0];
    for (uint32_t i = 1; i < n; i++)
        if (share[i] >= 0.9)
            return at[i - 1] + (0.9 - share[i - 1]) / (share[i] - share[i - 1]) * (at[i] - at[i - 1]);
    return INFINITY;
}

double ideal_normal_quantile(double p)
{
    double low = -10, high = 10;
    for (int i = 0; i < 100; i++) {
        double middle = (low + high) / 2;
        *(0.5 * erfc(-middle / sqrt(2)) < p ? &low : &high) = middle;
    }
    return low;
}
