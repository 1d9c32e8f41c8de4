/* The vessel's position from gpsd; see position.h. */
#include "feed/position.h"
#include "base/time.h"
#include "clock.h"
#include <gps.h>
#include <math.h>
#include <netdb.h>
#include <poll.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#define LEAST_GAP_NS (TIME_NS_PER_S / 2)
#define MOST_GAP_NS (8 * TIME_NS_PER_S)
#define WAIT_MS 250
#define HEADING_AGE_NS (5 * TIME_NS_PER_S) /* a compass that has fallen silent says nothing of now */
#define HUNG_NS (30 * TIME_NS_PER_S)       /* a connection over which nothing comes is made anew */

struct position_feed {
    struct position_feed_setup setup;
    char address[64], port[8];
    struct gps_data_t gps; /* the thread's, as are the two headings */
    double heading_deg;
    int64_t heading_ns;
    pthread_t thread;
    bool running;
    pthread_mutex_t lock; /* guards what follows */
    pthread_cond_t changed;
    bool stopping;
    const char *trouble; /* why nothing comes */
    int64_t since_ns;    /* monotonic time of the last fix, or of the start */
    uint64_t n_fixes;
};

enum status position_feed_create(const struct position_feed_setup *setup, struct position_feed **out)
{
    struct position_feed *feed = calloc(1, sizeof *feed);
    if (!feed)
        return STATUS_NO_MEMORY;
    feed->setup = *setup;
    snprintf(feed->address, sizeof feed->address, "%s", setup->address);
    snprintf(feed->port, sizeof feed->port, "%u", setup->port & 0xffff);
    feed->trouble = "has not been asked yet";
    feed->since_ns = clock_monotonic_ns();
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(&feed->changed, &attributes);
    pthread_condattr_destroy(&attributes);
    pthread_mutex_init(&feed->lock, NULL);
    *out = feed;
    return STATUS_OK;
}

static bool is_stopping(struct position_feed *feed)
{
    pthread_mutex_lock(&feed->lock);
    bool stopping = feed->stopping;
    pthread_mutex_unlock(&feed->lock);
    return stopping;
}

static void set_trouble(struct position_feed *feed, const char *trouble)
{
    pthread_mutex_lock(&feed->lock);
    feed->trouble = trouble;
    pthread_mutex_unlock(&feed->lock);
}

/* Waits unless it is to stop. */
static void pause_for(struct position_feed *feed, int64_t wait_ns)
{
    int64_t until_ns = clock_monotonic_ns() + wait_ns;
    struct timespec until = {.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
    pthread_mutex_lock(&feed->lock);
    int waited = 0;
    while (!feed->stopping && waited == 0)
        waited = pthread_cond_timedwait(&feed->changed, &feed->lock, &until);
    pthread_mutex_unlock(&feed->lock);
}

/* Whether somebody listens there: libgps would wait for the answer for minutes. */
static bool answers(struct position_feed *feed)
{
    const struct addrinfo hints = {.ai_flags = AI_NUMERICHOST | AI_NUMERICSERV, .ai_socktype = SOCK_STREAM};
    struct addrinfo *found = NULL;
    if (getaddrinfo(feed->address, feed->port, &hints, &found) != 0)
        return false;
    int handle = socket(found->ai_family, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
    bool good = handle >= 0;
    if (good && connect(handle, found->ai_addr, found->ai_addrlen) != 0) {
        struct pollfd waiting = {.fd = handle, .events = POLLOUT};
        int error = -1;
        socklen_t size = sizeof error;
        good = poll(&waiting, 1, WAIT_MS) == 1 &&
               getsockopt(handle, SOL_SOCKET, SO_ERROR, &error, &size) == 0 && error == 0;
    }
    if (handle >= 0)
        close(handle);
    freeaddrinfo(found);
    return good;
}

static double known_or_nan(double x, double min, double max)
{
    return isfinite(x) && x >= min && x <= max ? x : (double)NAN;
}

/* A fix that is of now, of a real receiver and at least of latitude and longitude. */
static void take_report(struct position_feed *feed)
{
    const struct gps_data_t *gps = &feed->gps;
    int64_t now_ns = clock_monotonic_ns();
    if (gps->set & ATTITUDE_SET) {
        feed->heading_deg = known_or_nan(gps->attitude.heading, 0, 360);
        feed->heading_ns = now_ns;
    }
    if (!(gps->set & MODE_SET))
        return;
    const struct gps_fix_t *fix = &gps->fix;
    struct position position = {.of = POSITION_OF_VESSEL,
                                .from = POSITION_FROM_FEED,
                                .latitude_deg = fix->latitude,
                                .longitude_deg = fix->longitude,
                                .heading_deg = feed->heading_deg,
                                .course_deg = known_or_nan(fix->track, 0, 360),
                                .speed_m_s = known_or_nan(fix->speed, 0, 1000),
                                .accuracy_m = known_or_nan(fix->eph, 0, 1e6)};
    if (now_ns - feed->heading_ns > HEADING_AGE_NS)
        position.heading_deg = NAN;
    if (fix->mode < MODE_2D || fix->status == STATUS_SIM || position_check(&position) != STATUS_OK) {
        set_trouble(feed, fix->status == STATUS_SIM ? "gives simulated positions" : "has no fix");
        return;
    }
    pthread_mutex_lock(&feed->lock);
    feed->since_ns = now_ns;
    feed->n_fixes++;
    feed->trouble = "sends nothing";
    pthread_mutex_unlock(&feed->lock);
    feed->setup.take(feed->setup.context, &position);
}

/* Until the connection ends, hangs, or it is to stop. */
static void listen_to(struct position_feed *feed)
{
    int64_t heard_ns = clock_monotonic_ns();
    while (!is_stopping(feed) && clock_monotonic_ns() - heard_ns < HUNG_NS) {
        if (!gps_waiting(&feed->gps, 1000 * WAIT_MS))
            continue;
        if (gps_read(&feed->gps, NULL, 0) < 0)
            break;
        heard_ns = clock_monotonic_ns();
        take_report(feed);
    }
}

static void *run_feed(void *context)
{
    struct position_feed *feed = context;
    pthread_setname_np(pthread_self(), "position");
    int64_t gap_ns = LEAST_GAP_NS;
    while (!is_stopping(feed)) {
        memset(&feed->gps, 0, sizeof feed->gps);
        feed->heading_deg = NAN;
        if (!answers(feed) || gps_open(feed->address, feed->port, &feed->gps) != 0)
            set_trouble(feed, "does not answer");
        else {
            gps_stream(&feed->gps, WATCH_ENABLE | WATCH_JSON, NULL);
            set_trouble(feed, "sends nothing");
            listen_to(feed);
            gps_close(&feed->gps);
            gap_ns = LEAST_GAP_NS;
        }
        pause_for(feed, gap_ns);
        gap_ns = 2 * gap_ns < MOST_GAP_NS ? 2 * gap_ns : MOST_GAP_NS;
    }
    return NULL;
}

enum status position_feed_start(struct position_feed *feed)
{
    feed->running = pthread_create(&feed->thread, NULL, run_feed, feed) == 0;
    return feed->running ? STATUS_OK : STATUS_SYSTEM;
}

void position_feed_stop(struct position_feed *feed)
{
    if (!feed || !feed->running)
        return;
    pthread_mutex_lock(&feed->lock);
    feed->stopping = true;
    pthread_cond_broadcast(&feed->changed);
    pthread_mutex_unlock(&feed->lock);
    pthread_join(feed->thread, NULL);
    feed->running = false;
}

void position_feed_destroy(struct position_feed *feed)
{
    if (!feed)
        return;
    position_feed_stop(feed);
    pthread_cond_destroy(&feed->changed);
    pthread_mutex_destroy(&feed->lock);
    free(feed);
}

void position_feed_get_state(struct position_feed *feed, struct position_feed_state *out)
{
    pthread_mutex_lock(&feed->lock);
    double age_s = time_to_s(clock_monotonic_ns() - feed->since_ns);
    *out = (struct position_feed_state){.silent = age_s > POSITION_FEED_SILENT_S, .n_fixes = feed->n_fixes};
    snprintf(out->problem, sizeof out->problem, "gpsd at %s, port %s, %s", feed->address, feed->port,
             feed->trouble);
    pthread_mutex_unlock(&feed->lock);
}
