/* Where things are, and what moves; see position.h. */
#include "settings/position.h"
#include <arpa/inet.h>
#include <stdio.h>

static const char *const feed_words[] = {"none", "gpsd"};
static const char *const moves_words[] = {"nothing", "source",
                                          "array"}; /* in the order of enum ranges_moves */

void place_settings_read(struct group_reader *group, struct place_settings *out)
{
    *out = (struct place_settings){0};
    bool latitude = group_number(group, "latitude_deg", READER_OPTIONAL, -90, 90, &out->latitude_deg);
    bool longitude = group_number(group, "longitude_deg", READER_OPTIONAL, -180, 180, &out->longitude_deg);
    out->known = latitude && longitude;
    if (latitude != longitude)
        group_problem(group, latitude ? "longitude_deg" : "latitude_deg",
                      "is missing; a position has both latitude_deg and longitude_deg");
}

static bool is_numeric(const char *address)
{
    unsigned char raw[sizeof(struct in6_addr)];
    return inet_pton(AF_INET, address, raw) == 1 || inet_pton(AF_INET6, address, raw) == 1;
}

static void check(struct group_reader *group, const struct place_settings *source, unsigned n_free,
                  const struct position_settings *settings)
{
    if (!is_numeric(settings->address))
        group_problem(group, "address", "is \"%s\"; allowed: an address in digits, like 127.0.0.1",
                      settings->address);
    if (settings->moves == RANGES_SOURCE && source->known)
        group_problem(group, "moves", "is \"source\", and the source has a latitude_deg where it stays");
    if (settings->moves == RANGES_ARRAY && n_free == 0)
        group_problem(group, "moves", "is \"array\", and every stream has a latitude_deg where it stays");
    if (settings->moves == RANGES_ARRAY && settings->feed == FEED_NONE)
        group_problem(group, "feed", "is \"none\"; an array that moves needs a feed");
}

void position_settings_read(struct group_reader *root, const struct place_settings *source, unsigned n_free,
                            struct position_settings *out)
{
    struct group_reader group;
    unsigned feed = FEED_NONE, moves = RANGES_NOTHING;
    double port = 2947;
    *out = (struct position_settings){.address = "127.0.0.1", .oldest_s = RANGES_OLDEST_S};
    group_child(root, "position", READER_OPTIONAL, &group);
    group_word(&group, "feed", READER_OPTIONAL, feed_words, 2, &feed);
    group_string(&group, "address", READER_OPTIONAL, out->address, sizeof out->address);
    group_number(&group, "port", READER_OPTIONAL, 1, 65535, &port);
    group_word(&group, "moves", READER_OPTIONAL, moves_words, 3, &moves);
    unsigned n = group_numbers(&group, "offset_m", READER_OPTIONAL, -1e5, 1e5, out->offset_m, 2);
    group_number(&group, "oldest_s", READER_OPTIONAL, 1, 86400, &out->oldest_s);
    out->feed = (enum feed_kind)feed;
    out->moves = (enum ranges_moves)moves;
    out->port = (uint32_t)port;
    if (n == 1)
        group_problem(&group, "offset_m", "has 1 number; allowed: [ahead, starboard]");
    check(&group, source, n_free, out);
    group_done(&group);
}
