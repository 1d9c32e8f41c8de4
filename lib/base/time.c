/* Watch time, sample numbers and UTC. Calendar arithmetic after Howard Hinnant, "chrono-compatible low-level
 * date algorithms" (2014), days_from_civil and its inverse. */
#include "base/time.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

static int64_t floor_divide(int64_t a, int64_t b)
{
    int64_t q = a / b;
    return (a % b != 0 && (a < 0) != (b < 0)) ? q - 1 : q;
}

int64_t time_from_minutes(double minutes)
{
    return minutes < 1e6 ? time_from_s(minutes * 60) : INT64_MAX / 4;
}

int64_t time_round_us(int64_t ns)
{
    return floor_divide(ns + TIME_NS_PER_US / 2, TIME_NS_PER_US) * TIME_NS_PER_US;
}

int64_t time_of_frame(const struct time_map *map, uint64_t frame)
{
    int64_t frames = (int64_t)(frame - map->anchor_frame);
    /* Whole seconds apart from the rest: a double holds nanoseconds of a day, not of a year. */
    int64_t rate = (int64_t)map->rate_hz;
    if (rate > 0 && (double)rate == map->rate_hz) {
        int64_t seconds = floor_divide(frames, rate);
        int64_t rest = frames - seconds * rate;
        double ns = (double)rest * 1e9 / map->rate_hz;
        return time_round_us(map->anchor_ns + seconds * TIME_NS_PER_S + (int64_t)llround(ns));
    }
    return time_round_us(map->anchor_ns + (int64_t)llround((double)frames * 1e9 / map->rate_hz));
}

double time_to_s(int64_t ns)
{
    /* Through microseconds, so that the nearest double to the decimal text is what comes out. */
    return (double)(time_round_us(ns) / TIME_NS_PER_US) / 1e6;
}

int64_t time_from_s(double seconds)
{
    return (int64_t)llround(seconds * 1e6) * TIME_NS_PER_US;
}

static int64_t days_from_civil(int64_t year, unsigned month, unsigned day)
{
    year -= month <= 2;
    int64_t era = floor_divide(year, 400);
    unsigned year_of_era = (unsigned)(year - era * 400);
    unsigned day_of_year = (153 * (month + (month > 2 ? -3U : 9U)) + 2) / 5 + day - 1;
    unsigned day_of_era = year_of_era * 365 + year_of_era / 4 - year_of_era / 100 + day_of_year;
    return era * 146097 + (int64_t)day_of_era - 719468;
}

static void civil_from_days(int64_t days, int64_t *out_year, unsigned *out_month, unsigned *out_day)
{
    days += 719468;
    int64_t era = floor_divide(days, 146097);
    unsigned day_of_era = (unsigned)(days - era * 146097);
    unsigned year_of_era = (day_of_era - day_of_era / 1460 + day_of_era / 36524 - day_of_era / 146096) / 365;
    unsigned day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    unsigned month_from_march = (5 * day_of_year + 2) / 153;
    *out_day = day_of_year - (153 * month_from_march + 2) / 5 + 1;
    *out_month = month_from_march < 10 ? month_from_march + 3 : month_from_march - 9;
    *out_year = (int64_t)year_of_era + era * 400 + (*out_month <= 2);
}

void time_format_utc(int64_t unix_ns, char out[TIME_UTC_SIZE])
{
    int64_t us = time_round_us(unix_ns) / TIME_NS_PER_US;
    int64_t seconds = floor_divide(us, 1000000);
    int64_t days = floor_divide(seconds, 86400);
    int64_t of_day = seconds - days * 86400;
    int64_t year;
    unsigned month, day;
    civil_from_days(days, &year, &month, &day);
    char text[96];
    snprintf(text, sizeof text, "%04" PRId64 "-%02u-%02uT%02d:%02d:%02d.%06" PRId64 "Z", year, month, day,
             (int)(of_day / 3600), (int)(of_day / 60 % 60), (int)(of_day % 60), us - seconds * 1000000);
    memcpy(out, text, TIME_UTC_SIZE);
}

/* Reads exactly `digits` decimal digits. */
static bool read_digits(const char **text, int digits, unsigned *out)
{
    unsigned value = 0;
    for (int i = 0; i < digits; i++, (*text)++) {
        if (**text < '0' || **text > '9')
            return false;
        value = value * 10 + (unsigned)(**text - '0');
    }
    *out = value;
    return true;
}

static bool read_char(const char **text, char wanted)
{
    if (**text != wanted)
        return false;
    (*text)++;
    return true;
}

static bool read_fraction_us(const char **text, unsigned *out_us)
{
    *out_us = 0;
    if (**text != '.')
        return true;
    (*text)++;
    unsigned scale = 100000;
    int n = 0;
    for (; **text >= '0' && **text <= '9'; (*text)++, n++) {
        *out_us += scale * (unsigned)(**text - '0');
        scale /= 10;
    }
    return n > 0;
}

static unsigned days_in_month(unsigned year, unsigned month)
{
    static const unsigned days[] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    bool leap = (year % 4 == 0 && year % 100 != 0) || year % 400 == 0;
    return days[month - 1] + (month == 2 && leap);
}

enum status time_parse_utc(const char *text, int64_t *out_unix_ns)
{
    unsigned year, month, day, hour, minute, second, us;
    if (!read_digits(&text, 4, &year) || !read_char(&text, '-') || !read_digits(&text, 2, &month) ||
        !read_char(&text, '-') || !read_digits(&text, 2, &day) || !read_char(&text, 'T') ||
        !read_digits(&text, 2, &hour) || !read_char(&text, ':') || !read_digits(&text, 2, &minute) ||
        !read_char(&text, ':') || !read_digits(&text, 2, &second) || !read_fraction_us(&text, &us) ||
        !read_char(&text, 'Z') || *text != '\0')
        return STATUS_BAD_FORMAT;
    if (month < 1 || month > 12 || day < 1 || day > days_in_month(year, month) || hour > 23 || minute > 59 ||
        second > 59)
        return STATUS_OUT_OF_RANGE;
    int64_t seconds = days_from_civil(year, month, day) * 86400 + hour * 3600 + minute * 60 + second;
    *out_unix_ns = seconds * TIME_NS_PER_S + (int64_t)us * TIME_NS_PER_US;
    return STATUS_OK;
}
