/* The strips of sound that people look at: for three bands, four columns a second of spectral density in rows
 * of equal frequency ratio. They show; nothing is decided from them. */
#ifndef LISTEN_STRIPS_H
#define LISTEN_STRIPS_H

#include "base/status.h"
#include "listen/listen.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct strips;

/* One channel at rate_hz (8 kHz to 1 MHz); relative: dB re full scale, shown 150 dB up. Plans FFTs. */
enum status strips_create(double rate_hz, bool relative, struct strips **out);
/* Forgets the column that is being filled; frames go on at next_frame. */
void strips_reset(struct strips *strips, uint64_t next_frame);
/* Takes n samples in pascals; `map` dates the columns that become complete. */
void strips_push(struct strips *strips, const float *pascals, size_t n, const struct time_map *map,
                 const struct column_sink *sink);
void strips_destroy(struct strips *strips);

#endif
