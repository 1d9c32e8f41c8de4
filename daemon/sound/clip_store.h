/* Which clips there are: the `sound` entries of a ledger, and the folder that holds their files. Any thread.
 */
#ifndef SOUND_CLIP_STORE_H
#define SOUND_CLIP_STORE_H

#include "base/status.h"
#include "flow.h"
#include "ledger/ledger.h"
#include "record/marks.h"

#define CLIP_PATH_SIZE 700

struct clip_store;

/* What somebody who wants to hear a clip must know. */
struct clip {
    char id[FLOW_ID_SIZE];
    char path[CLIP_PATH_SIZE];
    double low_hz, high_hz; /* of what it was kept for; NAN where nothing is known */
};

/* Beside a ledger, LEDGER.sound holds the ring (`ring`) and the clips (`clips`). Writes the clips' folder. */
void clip_store_folder(const char *ledger_path, char out[CLIP_PATH_SIZE]);

/* folder: copied; it need not exist. STATUS_NO_MEMORY. The caller owns *out. */
enum status clip_store_create(const char *folder, struct clip_store **out);
/* Takes NULL. */
void clip_store_destroy(struct clip_store *store);
/* Reads the `sound` entries of a ledger. As ledger_select. */
enum status clip_store_load(struct clip_store *store, struct ledger *ledger);
/* file: a name within the folder; one that would lead out of it is refused with STATUS_BAD_ARGUMENT. */
enum status clip_store_add(struct clip_store *store, const char *id, const char *file, double low_hz,
                           double high_hz);
/* STATUS_NOT_FOUND: no entry has this id. */
enum status clip_store_find(struct clip_store *store, const char *id, struct clip *out);

#endif
