/* What hushwatch-capture shares with the daemon: the ring's memory and the clock of its stamps. */
#ifndef CAPTURE_SHARED_H
#define CAPTURE_SHARED_H

#include "ring/ring.h"
#include <stdbool.h>

/* Now, on the clock of the ring's stamps: the monotonic one that nobody steers, since frames are counted
 * against it. */
int64_t capture_now_ns(void);

/* A stamp for the buffer at hand. info_s and first_s are what the sound system says, in its own clock: when
 * it looked at the device, and when the buffer's first frame was sampled. first_ns of the result is 0 where
 * they make no sense. */
struct ring_mark capture_stamp(double info_s, double first_s, bool overrun);

/* Maps the ring that the open file holds. false after a line on stderr that says why not. */
bool capture_map_ring(int fd, uint32_t n_channels, struct ring *out);

#endif
