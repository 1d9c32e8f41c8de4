/* Where the source and the hydrophones are, and what moves:
 *
 *   source   = { latitude_deg = 54.0120; longitude_deg = 6.5830; };       where it stays
 *   streams  = ( { latitude_deg = 54.0; longitude_deg = 6.6; ... } );      where its hydrophones stay
 *   position = { feed = "gpsd"; address = "127.0.0.1"; port = 2947; moves = "array"; offset_m = [-120.0,
 * 0.0]; oldest_s = 60.0; }; */
#ifndef SETTINGS_POSITION_H
#define SETTINGS_POSITION_H

#include "place/ranges.h"
#include "settings/reader.h"
#include <stdbool.h>
#include <stdint.h>

enum feed_kind { FEED_NONE, FEED_GPSD };

/* A place that stays; both or none. */
struct place_settings {
    bool known;
    double latitude_deg, longitude_deg;
};

struct position_settings {
    enum feed_kind feed;
    char address[64]; /* of gpsd: digits only, so that nothing has to be looked up */
    uint32_t port;
    enum ranges_moves moves;
    double offset_m[2]; /* where the source moves: from the antenna, ahead and to starboard */
    double oldest_s;
};

/* Reads latitude_deg and longitude_deg of a group; adds a problem when there is only one of them. */
void place_settings_read(struct group_reader *group, struct place_settings *out);
/* Reads the group `position`, which may be absent. source: where it stays. n_free: streams without a place of
 * their own. Adds problems. */
void position_settings_read(struct group_reader *root, const struct place_settings *source, unsigned n_free,
                            struct position_settings *out);

#endif
