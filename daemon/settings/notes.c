/* People's notes on a timetable; see notes.h. */
#include "settings/notes.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void set_field(struct group_reader *group, struct note *note, const char *key, const char *value)
{
    const char *allowed = NULL;
    enum status status = note_set(note, key, value, &allowed);
    if (status == STATUS_NOT_FOUND)
        group_problem(group, key, "is no field of a note");
    else if (status != STATUS_OK)
        group_problem(group, key, "is \"%s\"; allowed: %s", value, allowed ? allowed : "another value");
}

static void read_one(struct group_reader *group, struct timed_note *out)
{
    char kind[NOTE_NAME_SIZE] = "";
    enum note_kind note_kind = NOTE_REMARK;
    group_number(group, "at_s", READER_REQUIRED, 0, 1e9, &out->at_s);
    if (group_string(group, "kind", READER_REQUIRED, kind, sizeof kind) &&
        !note_kind_from_text(kind, &note_kind))
        group_problem(group, "kind", "is \"%s\", which is no kind of note", kind);
    note_reset(&out->note, note_kind);
    unsigned before = group->reader->problems->count;
    char key[NOTE_NAME_SIZE], value[NOTE_TEXT_SIZE];
    for (unsigned i = 0; group_pair(group, i, key, sizeof key, value, sizeof value); i++)
        if (strcmp(key, "at_s") != 0 && strcmp(key, "kind") != 0)
            set_field(group, &out->note, key, value);
    const char *missing = NULL;
    if (group->reader->problems->count == before && note_check(&out->note, &missing) != STATUS_OK)
        group_problem(group, "kind", "is \"%s\", which needs \"%s\"", kind, missing ? missing : "more");
}

static int by_time(const void *a, const void *b)
{
    const struct timed_note *x = a, *y = b;
    return (x->at_s > y->at_s) - (x->at_s < y->at_s);
}

enum status notes_read(struct group_reader *group, const char *key, struct timed_note **out, unsigned *out_n)
{
    unsigned before = group->reader->problems->count;
    unsigned n = group_count(group, key, READER_OPTIONAL);
    struct timed_note *notes = calloc(n ? n : 1, sizeof *notes);
    if (!notes)
        return STATUS_NO_MEMORY;
    for (unsigned i = 0; i < n; i++) {
        struct group_reader item;
        group_at(group, key, i, &item);
        read_one(&item, &notes[i]);
    }
    if (group->reader->problems->count != before) {
        free(notes);
        return STATUS_BAD_FORMAT;
    }
    qsort(notes, n, sizeof *notes, by_time);
    *out = notes;
    *out_n = n;
    return STATUS_OK;
}

enum status notes_load(const char *path, struct problems *problems, struct timed_note **out, unsigned *out_n)
{
    struct reader reader;
    enum status status = reader_open(&reader, path, problems, NULL);
    if (status == STATUS_OK) {
        struct group_reader root = reader_root(&reader);
        unsigned before = problems->count;
        status = notes_read(&root, "notes", out, out_n);
        group_done(&root);
        if (status == STATUS_OK && problems->count != before) {
            free(*out);
            status = STATUS_BAD_FORMAT;
        }
    }
    reader_close(&reader);
    return status;
}
