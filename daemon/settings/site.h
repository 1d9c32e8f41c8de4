/* The site's settings: hushwatch.cfg. Everything a run needs to know, checked before anything starts. */
#ifndef SETTINGS_SITE_H
#define SETTINGS_SITE_H

#include "base/status.h"
#include "base/text.h"
#include "flow.h"
#include "level/calibration.h"
#include "settings/permit.h"
#include "settings/position.h"
#include "settings/reader.h"
#include "settings/source.h"
#include <stdbool.h>
#include <stdint.h>

#define SITE_MAX_STREAMS 8
#define SITE_MAX_STATIONS 8
#define SITE_MAX_HOSTS 8
#define SITE_PATH_SIZE 512
#define SITE_MAX_FILES 64
#define SITE_DATE_SIZE 11 /* "2026-03-01" and its terminator */

struct channel_settings {
    struct calibration calibration;
    char serial[64];
    char certificate_date[SITE_DATE_SIZE]; /* of the last calibration, "2026-03-01"; empty where not stated */
    char due_date[SITE_DATE_SIZE];         /* until which it holds */
    /* From the source's reference point: ahead, to starboard, down. Of a stream with a place of its own: from
     * there, north, east, down. Carried by a vessel: from its antenna. NAN where unknown. */
    double x_m, y_m, z_m;
};

/* Slant range of the channel's place from the source's reference point, m; NAN where unknown. */
double channel_range_m(const struct channel_settings *channel);

struct stream_settings {
    char name[64];
    char input[32];            /* a name of the input table: "device", "recording", "pcm", "scene" */
    double rate_hz;            /* 0: as the input says (recording, scene) */
    uint32_t n_channels;       /* 0: as the input says */
    char device[128];          /* device: name or number */
    double latency_s;          /* device: at least 0.2 */
    char format[8];            /* pcm: "s16", "s24", "s32", "f32" (little-endian) */
    char path[SITE_PATH_SIZE]; /* pcm: a named pipe or "-"; scene: its file */
    uint32_t n_files;
    char files[SITE_MAX_FILES][SITE_PATH_SIZE]; /* recording: one or several, as one stream */
    bool real_pace;              /* recording, scene: at the pace of the clock, not as fast as possible */
    struct place_settings place; /* where its hydrophones stay */
    struct channel_settings channels[FLOW_MAX_CHANNELS];
};

/* What is kept of the sound itself. */
struct sound_settings {
    char folder[SITE_PATH_SIZE]; /* of ring and clips; empty: LEDGER.sound */
    double minutes;              /* of the ring; 0: no sound is kept */
    double most_mib, leave_mib;  /* the ring's size at most; so much of the disk stays free */
    double around_s;             /* of sound before and after a call in its clip */
};

struct site {
    char name[64];
    char folder[SITE_PATH_SIZE]; /* of the settings file; relative paths start there */
    char ledger[SITE_PATH_SIZE];
    char permit[SITE_PATH_SIZE];
    struct permit_fills permit_fills; /* what the site states in place of the permit file */
    char calls[SITE_PATH_SIZE];       /* the folder of the call catalogue */
    char address[64]; /* of the pages; loopback unless accounts, certificate and key are set */
    char accounts[SITE_PATH_SIZE], certificate[SITE_PATH_SIZE], key[SITE_PATH_SIZE]; /* "": none */
    uint32_t n_hosts;
    char hosts[SITE_MAX_HOSTS][NOTE_NAME_SIZE]; /* names by which others reach the pages */
    uint32_t port;
    uint32_t n_stations;
    char stations[SITE_MAX_STATIONS][NOTE_NAME_SIZE]; /* crew stations that acknowledge for themselves */
    struct sound_settings sound;
    struct source_settings source;
    struct position_settings position;
    uint32_t n_streams;
    struct stream_settings streams[SITE_MAX_STREAMS];
    double contact_gap_s;
    double look_evidence, act_evidence, evidence_decay_s; /* 0: as the catalogue says (rules_load) */
    double sighting_log_spread;
    double silence_s;
    struct text effective; /* every setting with its value, one a line */
};

/* Reads and checks; adds to problems. STATUS_BAD_FORMAT when any was added. The caller destroys *out. */
enum status site_load(const char *path, struct problems *problems, struct site *out);
/* The same from effective settings, as a `run` entry keeps them; `length` bytes of text. */
enum status site_load_effective(const char *name, const char *text, size_t length, struct problems *problems,
                                struct site *out);
void site_destroy(struct site *site);

#endif
