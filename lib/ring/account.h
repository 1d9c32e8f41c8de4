/* Counts the frames that a sound device lost, from the marks that came with those it gave.
 *
 * What the ring had no room for is counted by the ring. What the driver lost is told by nobody: PortAudio's
 * overrun flag has no count and may be missing. So frames are counted against the clock: the sampling times
 * of frames received lie on a straight line (the device's clock), and what is measured of them lies on it or,
 * as a rule, later. Of each quarter of a second the second earliest point counts; a robust line through these
 * is the clock; a lasting step up from it is the number of frames lost. The step is measured between the
 * earliest points of equally many marks before and after it.
 *
 * Method: Siegel, "Robust regression using repeated medians", Biometrika 69 (1982), for the line, since a
 * thread that is put to sleep between two readings can stamp far too late, and sometimes too early.
 *
 * How exact it is: to the frame, where the driver tells each block's age to the frame and a second was heard
 * before the loss; else to what the driver tells (many tell whole periods). The sound after a suspected loss
 * is held for at most a quarter of a second, until enough marks agree. */
#ifndef RING_ACCOUNT_H
#define RING_ACCOUNT_H

#include "ring/ring.h"
#include <stdbool.h>

#define ACCOUNT_BINS 64
#define ACCOUNT_MAX_HELD 64
#define ACCOUNT_MAX_PIECES 256

/* What to do with the ring's next frames: `skip` of them are thrown away (the clock had them declared lost
 * already), then lost_before frames are lost, then come n_frames to hear. */
struct account_piece {
    uint64_t skip, lost_before, n_frames;
};

struct account_point {
    double x_s; /* frame number over the nominal rate */
    double y_s; /* sampling time less x_s */
};

struct account {
    double rate_hz;
    int64_t origin_ns;
    uint64_t next_frame; /* number of the frame after all that was accepted; lost ones count */
    uint64_t skip;       /* frames still to come that were declared lost before */
    bool absent;         /* nothing is heard until a new ring's first marks are understood */
    bool has_line;
    double offset_s, slope; /* the line: y = offset_s + slope x */
    double noise_s;         /* mean distance of points above the line */
    double bin_end_s;       /* of the bin that is being filled, the last one */
    uint32_t bin_points;
    struct account_point bin_least;
    uint32_t n_bins;
    struct account_point bins[ACCOUNT_BINS]; /* oldest first */
    uint32_t n_held;
    double held_least_s, held_second_s; /* the two earliest of the held marks, above the line */
    struct ring_mark held[ACCOUNT_MAX_HELD];
    uint32_t first_piece, n_pieces;
    struct account_piece pieces[ACCOUNT_MAX_PIECES];
};

/* Frame 0 is at origin_ns of the marks' clock until the first mark says better. */
void account_reset(struct account *account, double rate_hz, int64_t origin_ns);

/* The next mark of the ring. STATUS_FULL: nothing was taken, pieces wait to be got; STATUS_BAD_FORMAT: no
 * mark could say that, nothing was taken. */
enum status account_push(struct account *account, const struct ring_mark *mark);

/* The ring's next piece: STATUS_OK, or STATUS_END when none is decided yet. */
enum status account_get(struct account *account, struct account_piece *out);

/* The ring has come to its end: what is held is decided with what is known. */
void account_flush(struct account *account);

/* The ring is gone; total frames (heard and lost) were passed on. From now on frames are missing, until the
 * marks of a new ring come in: they go on from the same clock. */
void account_absent(struct account *account, uint64_t total);

/* While absent and no mark has come: frames lost by the clock up to now that were not declared yet. */
uint64_t account_declare(struct account *account, int64_t now_ns);

/* Whether marks wait for a decision. */
bool account_holds(const struct account *account);

/* How far the device's clock is from its nominal rate, in parts per million (positive: fast); NAN before the
 * first second. */
double account_ppm(const struct account *account);

#endif
