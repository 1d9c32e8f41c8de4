/* Makes sound for the pages: takes it from a clip or from the ring, makes it fit for ears (dsp/audible.h) and
 * hands it back as a whole. A thread of its own at low priority, because both the disk and the making take
 * their time, and nobody who keeps the watch may wait for either. */
#ifndef HTTP_PLAYER_H
#define HTTP_PLAYER_H

#include "base/status.h"
#include "dsp/audible.h"
#include "flow.h"
#include "sound/clip_store.h"
#include "sound/disk_ring.h"
#include <microhttpd.h>
#include <stdbool.h>
#include <stddef.h>

#define PLAYER_MAX_WAITING 16
#define PLAYER_LONGEST_S 60.0

enum player_what {
    PLAYER_RING, /* a stretch of the ring */
    PLAYER_CLIP, /* a clip, made fit for ears */
    PLAYER_FILE  /* a clip's file as it is kept */
};

struct player_item {
    struct MHD_Connection *connection;
    struct player_item *next;
    /* what is asked for */
    enum player_what what;
    char id[FLOW_ID_SIZE]; /* of the clip's entry */
    uint32_t stream, channel;
    int64_t from_ns, to_ns;
    enum audible_form form;
    double centre_hz, gain_db; /* NAN: chosen */
    /* the answer */
    enum status status;
    unsigned char *data; /* a WAV (16 bit, one channel) or FLAC file; who takes it frees it */
    size_t size;
    double made_gain_db;
};

struct player;

/* ring and clips may be NULL: then there is nothing to hear of them. STATUS_NO_MEMORY, STATUS_SYSTEM. */
enum status player_create(struct disk_ring *ring, struct clip_store *clips, struct player **out);
/* What waits is refused; takes NULL. */
void player_stop(struct player *player);
/* Takes NULL. */
void player_destroy(struct player *player);

/* Suspends the item's connection; it is resumed when the answer is there. STATUS_BUSY: too many wait. */
enum status player_submit(struct player *player, struct player_item *item);

#endif
