/* Least squares, point by point. */
#include "level/trend.h"
#include "base/student.h"
#include <math.h>

void trend_push(struct trend *trend, double x, double y_db)
{
    if (!isfinite(x) || !isfinite(y_db))
        return;
    trend->n++;
    double off_x = x - trend->mean_x, off_y = y_db - trend->mean_y;
    trend->mean_x += off_x / (double)trend->n;
    trend->mean_y += off_y / (double)trend->n;
    trend->xx += off_x * (x - trend->mean_x);
    trend->xy += off_x * (y_db - trend->mean_y);
    trend->yy += off_y * (y_db - trend->mean_y);
}

enum status trend_get(const struct trend *trend, double x, struct trend_forecast *out)
{
    double n = (double)trend->n;
    if (trend->n < TREND_LEAST_POINTS || !(trend->xx > 0.0) || !isfinite(x))
        return STATUS_NOT_FOUND;
    double slope = trend->xy / trend->xx, off = x - trend->mean_x;
    double scatter = sqrt(fmax(trend->yy - slope * trend->xy, 0.0) / (n - 2.0));
    double half = student_quantile(0.95, n - 2.0) * scatter * sqrt(1.0 / n + off * off / trend->xx);
    double db = trend->mean_y + slope * off;
    *out = (struct trend_forecast){db, db - half, db + half, slope, scatter};
    return STATUS_OK;
}
