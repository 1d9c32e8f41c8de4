/* The virtual sound device of pcm_feed.c, and a listener that holds what the real input says against the
 * frame numbers that the device put into its sound. */
#ifndef SUPPORT_LIVE_H
#define SUPPORT_LIVE_H

#include "input/input.h"
#include <stdbool.h>
#include <stdint.h>
#include <sys/types.h>

#define LIVE_MAX_GAPS 64

/* Writes the sound configuration with one working device "feed" (more keys: pcm_feed.c) and sets the
 * environment so that PortAudio sees it alone. Its time zero is now. Call live_end in the end. */
void live_begin(double rate_hz, uint32_t n_channels, const char *more_keys);
/* Seconds since the device's time zero. */
double live_now_s(void);
/* Settings for it. */
struct stream_settings live_settings(double rate_hz, uint32_t n_channels);
void live_end(void);

struct live_gap {
    double at_s;                    /* device time at which sound came again */
    uint64_t declared, really_lost; /* between two heard frames */
};

struct live_listener {
    void *input;
    double rate_hz;
    uint32_t n_channels;
    uint64_t heard, declared; /* frames, in all */
    bool has_next;
    uint64_t next;        /* the frame number that comes next if nothing is lost */
    uint64_t since_heard; /* declared since the last heard frame */
    uint64_t wrong;       /* frames that had a wrong channel */
    uint32_t n_inside;    /* breaks of the count inside a piece */
    uint64_t really_lost; /* frames missing in the count, in all */
    uint32_t n_gaps;
    struct live_gap gaps[LIVE_MAX_GAPS];
    double silent_since_s; /* device time of the first declared loss without sound since the last sound; 0 */
    double heard_at_s;     /* device time of the last sound */
    double longest_read_s;
};

/* Opens the input "device"; fails the test with the problems when that does not work. */
void live_open(struct live_listener *listener, const struct stream_settings *settings);
/* Reads and checks up to a device time, or until the first declared silence, or the first sound after
 * silence. */
enum live_until { LIVE_TIME, LIVE_UNTIL_SILENT, LIVE_UNTIL_SOUND };
void live_listen(struct live_listener *listener, double until_s, enum live_until until);
/* The i-th gap against the truth: fails when what was declared is off by more than the tolerance. */
void live_check_gap(const struct live_listener *listener, uint32_t i, double tolerance_frames,
                    const char *what);
void live_wait_s(double seconds);
/* Seconds that closing took. */
double live_close(struct live_listener *listener);

/* The capture program that this process started; 0: none. */
pid_t live_capture_pid(void);
/* Takes the capture program away from beside this one; live_begin puts it back. */
void live_hide_capture(void);

#endif
