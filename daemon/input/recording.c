/* Recordings: one or several WAV, FLAC or Ogg files as one stream, read piece by piece in bounded memory.
 *
 * A file follows the one before without a gap unless both headers tell their times: then a hole is frames
 * lost, and an overlap is an error. Header times are those of the broadcast extension chunk (EBU Tech 3285),
 * taken as UTC. Samples are passed on as they are; the listener deals with those that are not numbers. */
#include "base/time.h"
#include "input/kinds.h"
#include <inttypes.h>
#include <math.h>
#include <sndfile.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

/* Header times in whole seconds may be off by one each; times in samples by rounding and a clock's drift. */
#define COARSE_TOLERANCE_S 1.0
#define FINE_TOLERANCE_S 0.001
/* Frames of a hole told at once, so that no reader needs more than 32 bits. */
#define LOST_AT_ONCE (UINT64_C(1) << 30)
#define ALLOWED "allowed: WAV, FLAC or Ogg"

struct file {
    const char *path; /* borrowed from the settings */
    uint64_t first_frame, n_frames;
    bool has_time, fine_time;
    int64_t start_unix_ns;
};

struct recording {
    double rate_hz;
    uint32_t n_channels;
    uint32_t n_files, next_file;
    struct file files[SITE_MAX_FILES];
    SNDFILE *sound; /* of the file before next_file; NULL between files */
    uint64_t frame; /* of the stream: the next one to give or to call lost */
};

static void say(struct problems *problems, const char *path, const char *what)
{
    problems_add(problems, path, 0, "", "%s; " ALLOWED, what);
}

static uint32_t little_endian_32(const unsigned char *bytes)
{
    return (uint32_t)bytes[0] | (uint32_t)bytes[1] << 8 | (uint32_t)bytes[2] << 16 | (uint32_t)bytes[3] << 24;
}

/* A RIFF file says its own length (Microsoft and IBM, "Multimedia programming interface", 1991). 0 is left by
 * a writer that never came back to fill it in; all ones by one that wrote to a pipe, and says nothing. The
 * last pad byte may be counted and missing. */
static bool riff_is_cut(FILE *file, uint64_t size)
{
    unsigned char head[12];
    if (fseek(file, 0, SEEK_SET) != 0 || fread(head, sizeof head, 1, file) != 1 ||
        memcmp(head, "RIFF", 4) != 0)
        return false;
    uint32_t length = little_endian_32(head + 4);
    return length == 0 || (length != UINT32_MAX && (uint64_t)length + 7 > size);
}

/* The last page of an Ogg stream carries the end-of-stream flag (RFC 3533, section 6); a page is at most
 * 65,307 bytes. */
static bool ogg_is_cut(FILE *file, uint64_t size)
{
    enum { PAGE = 65307, END_OF_STREAM = 0x04 };
    unsigned char tail[PAGE];
    if (fseek(file, 0, SEEK_SET) != 0 || fread(tail, 4, 1, file) != 1 || memcmp(tail, "OggS", 4) != 0)
        return false;
    bool cut = true;
    if (fseek(file, size > PAGE ? (long)(size - PAGE) : 0, SEEK_SET) == 0) {
        size_t n = fread(tail, 1, PAGE, file);
        for (size_t i = 0; i + 5 < n; i++)
            if (memcmp(tail + i, "OggS", 4) == 0)
                cut = (tail[i + 5] & END_OF_STREAM) == 0;
    }
    return cut;
}

/* The last frame that the header promises can be read: what a cut FLAC file cannot do. */
static bool last_frame_is_there(SNDFILE *sound, const SF_INFO *info)
{
    float frame[FLOW_MAX_CHANNELS];
    return sf_seek(sound, info->frames - 1, SEEK_SET) == info->frames - 1 &&
           sf_readf_float(sound, frame, 1) == 1;
}

/* What is wrong with the file as a file, or NULL. */
static const char *check_bytes(FILE *file)
{
    struct stat facts;
    const char *wrong = NULL;
    if (fstat(fileno(file), &facts) != 0 || !S_ISREG(facts.st_mode))
        wrong = "is not a file";
    else if (facts.st_size == 0)
        wrong = "is empty";
    else if (riff_is_cut(file, (uint64_t)facts.st_size) || ogg_is_cut(file, (uint64_t)facts.st_size))
        wrong = "is truncated: it ends before the length that it states, or was never finished";
    return wrong;
}

static bool format_is_allowed(int format)
{
    int type = format & SF_FORMAT_TYPEMASK;
    return type == SF_FORMAT_WAV || type == SF_FORMAT_WAVEX || type == SF_FORMAT_RF64 ||
           type == SF_FORMAT_FLAC || type == SF_FORMAT_OGG;
}

/* Copies the digits of a header text, which has any separators and no terminator: "2026-03-01" and
 * "12:00:00".
 */
static bool header_number(const char *text, int at, int digits, unsigned *out)
{
    *out = 0;
    for (int i = at; i < at + digits; i++) {
        if (text[i] < '0' || text[i] > '9')
            return false;
        *out = *out * 10 + (unsigned)(text[i] - '0');
    }
    return true;
}

/* The time of the first frame. Where the sample count since midnight agrees with the clock time, it is finer.
 */
static void read_header_time(SNDFILE *sound, const SF_INFO *info, struct file *file)
{
    SF_BROADCAST_INFO header;
    memset(&header, 0, sizeof header);
    if (sf_command(sound, SFC_GET_BROADCAST_INFO, &header, sizeof header) != SF_TRUE)
        return;
    unsigned year, month, day, hour, minute, second;
    if (!header_number(header.origination_date, 0, 4, &year) ||
        !header_number(header.origination_date, 5, 2, &month) ||
        !header_number(header.origination_date, 8, 2, &day) ||
        !header_number(header.origination_time, 0, 2, &hour) ||
        !header_number(header.origination_time, 3, 2, &minute) ||
        !header_number(header.origination_time, 6, 2, &second))
        return;
    char utc[TIME_UTC_SIZE + 16];
    snprintf(utc, sizeof utc, "%04u-%02u-%02uT%02u:%02u:%02uZ", year, month, day, hour, minute, second);
    if (time_parse_utc(utc, &file->start_unix_ns) != STATUS_OK)
        return;
    file->has_time = true;
    uint64_t samples = (uint64_t)header.time_reference_high << 32 | header.time_reference_low;
    double of_day_s = (double)samples / info->samplerate;
    double clock_s = hour * 3600.0 + minute * 60.0 + second;
    file->fine_time = samples > 0 && fabs(of_day_s - clock_s) < 1.0;
    if (file->fine_time)
        file->start_unix_ns += (int64_t)llround((of_day_s - clock_s) * 1e9);
}

static enum status inspect(const char *path, struct problems *problems, struct file *out, SF_INFO *out_info)
{
    FILE *bytes = fopen(path, "rb");
    if (!bytes) {
        problems_add(problems, path, 0, "", "cannot be opened (%m); " ALLOWED);
        return STATUS_NOT_FOUND;
    }
    const char *wrong = check_bytes(bytes);
    fclose(bytes);
    if (wrong) {
        say(problems, path, wrong);
        return STATUS_BAD_FORMAT;
    }
    *out_info = (SF_INFO){0};
    SNDFILE *sound = sf_open(path, SFM_READ, out_info);
    if (!sound) {
        say(problems, path, "is not a sound file that can be read");
        return STATUS_BAD_FORMAT;
    }
    *out = (struct file){.path = path, .n_frames = (uint64_t)out_info->frames};
    if (!format_is_allowed(out_info->format))
        wrong = "is another kind of sound file";
    else if (out_info->frames <= 0)
        wrong = "holds no sound";
    else if (out_info->channels > FLOW_MAX_CHANNELS)
        wrong = "has more than 16 channels";
    else if (!last_frame_is_there(sound, out_info))
        wrong = "is truncated: it ends before the length that it states";
    if (wrong)
        say(problems, path, wrong);
    else
        read_header_time(sound, out_info, out);
    sf_close(sound);
    return wrong ? STATUS_BAD_FORMAT : STATUS_OK;
}

static void check_shape(const struct stream_settings *settings, const struct recording *recording,
                        const char *path, const SF_INFO *info, struct problems *problems)
{
    double rate_hz = recording->n_files > 0 ? recording->rate_hz : settings->rate_hz;
    uint32_t n_channels = recording->n_files > 0 ? recording->n_channels : settings->n_channels;
    const char *by = recording->n_files > 0 ? "the file before" : "the settings";
    if (rate_hz > 0 && rate_hz != info->samplerate)
        problems_add(problems, path, 0, "",
                     "has %d Hz where %s say%s %g Hz; allowed: one rate for the stream", info->samplerate, by,
                     recording->n_files > 0 ? "s" : "", rate_hz);
    if (n_channels > 0 && n_channels != (uint32_t)info->channels)
        problems_add(problems, path, 0, "",
                     "has %d channels where %s say%s %" PRIu32 "; allowed: one count for the stream",
                     info->channels, by, recording->n_files > 0 ? "s" : "", n_channels);
}

/* Where a file begins in the stream: directly after the one before, or later by what the headers say. */
static void place_file(struct recording *recording, struct file *file, struct problems *problems)
{
    const struct file *first = &recording->files[0];
    if (recording->n_files == 0)
        return;
    const struct file *before = file - 1;
    file->first_frame = before->first_frame + before->n_frames;
    if (!first->has_time || !file->has_time)
        return;
    double by_header_s = (double)(file->start_unix_ns - first->start_unix_ns) * 1e-9;
    double hole_s = by_header_s - (double)file->first_frame / recording->rate_hz;
    double tolerance_s = first->fine_time && file->fine_time ? FINE_TOLERANCE_S : COARSE_TOLERANCE_S;
    if (hole_s < -tolerance_s)
        problems_add(
            problems, file->path, 0, "",
            "begins %.3f s before the end of %s by their headers; allowed: files in order of time that "
            "do not overlap",
            -hole_s, before->path);
    else if (hole_s > tolerance_s)
        file->first_frame += (uint64_t)llround(hole_s * recording->rate_hz);
}

static void add_file(const struct stream_settings *settings, const char *path, struct problems *problems,
                     struct recording *recording)
{
    SF_INFO info;
    struct file *file = &recording->files[recording->n_files];
    if (inspect(path, problems, file, &info) != STATUS_OK)
        return;
    check_shape(settings, recording, path, &info, problems);
    if (recording->n_files == 0) {
        recording->rate_hz = info.samplerate;
        recording->n_channels = (uint32_t)info.channels;
    }
    place_file(recording, file, problems);
    recording->n_files++;
}

static void tell_facts(const struct recording *recording, struct input_facts *out)
{
    const struct file *first = &recording->files[0], *last = first + recording->n_files - 1;
    *out =
        (struct input_facts){.rate_hz = recording->rate_hz,
                             .n_channels = recording->n_channels,
                             .duration_s = (double)(last->first_frame + last->n_frames) / recording->rate_hz};
    struct stat facts;
    if (first->has_time) {
        out->has_start_utc = true;
        out->start_unix_ns = first->start_unix_ns;
        out->start_source = "header";
    } else if (stat(first->path, &facts) == 0) {
        double duration_s = (double)first->n_frames / recording->rate_hz;
        int64_t end_ns = (int64_t)facts.st_mtim.tv_sec * TIME_NS_PER_S + facts.st_mtim.tv_nsec;
        out->has_start_utc = true;
        out->start_unix_ns = time_round_us(end_ns - (int64_t)(duration_s * 1e9));
        out->start_source = "modification time";
    }
}

static void close_recording(void *input)
{
    struct recording *recording = input;
    if (recording && recording->sound)
        sf_close(recording->sound);
    free(recording);
}

static enum status open_recording(const struct stream_settings *settings, struct problems *problems,
                                  void **out, struct input_facts *out_facts)
{
    struct recording *recording = calloc(1, sizeof *recording);
    if (!recording)
        return STATUS_NO_MEMORY;
    unsigned before = problems->count;
    if (settings->n_files == 0)
        problems_add(problems, settings->name, 0, "files", "is empty; allowed: 1 to %d recordings",
                     SITE_MAX_FILES);
    for (uint32_t i = 0; i < settings->n_files && i < SITE_MAX_FILES; i++)
        add_file(settings, settings->files[i], problems, recording);
    if (problems->count != before) {
        close_recording(recording);
        return STATUS_BAD_FORMAT;
    }
    tell_facts(recording, out_facts);
    *out = recording;
    return STATUS_OK;
}

/* Frames from here to `until` are lost: at most so many at once. */
static void lose(struct recording *recording, uint64_t until, struct input_piece *out)
{
    uint64_t lost = until - recording->frame;
    out->lost_before = lost < LOST_AT_ONCE ? lost : LOST_AT_ONCE;
    recording->frame += out->lost_before;
}

static void finish_file(struct recording *recording)
{
    if (recording->sound)
        sf_close(recording->sound);
    recording->sound = NULL;
    recording->next_file++;
}

/* Makes the file of the present frame readable. A file that was good when the run began and now cannot be
 * read is lost sound. */
static void begin_file(struct recording *recording, const struct file *file)
{
    SF_INFO info = {0};
    recording->sound = sf_open(file->path, SFM_READ, &info);
    bool same = recording->sound && info.samplerate == recording->rate_hz &&
                (uint32_t)info.channels == recording->n_channels && (uint64_t)info.frames == file->n_frames;
    sf_count_t at = (sf_count_t)(recording->frame - file->first_frame);
    if (recording->sound && !(same && sf_seek(recording->sound, at, SEEK_SET) == at)) {
        sf_close(recording->sound);
        recording->sound = NULL;
    }
}

static enum status read_recording(void *input, float *samples, uint32_t max_frames, struct input_piece *out)
{
    struct recording *recording = input;
    struct input_piece piece = {0};
    while (recording->next_file < recording->n_files && piece.n_frames == 0 && piece.lost_before == 0) {
        const struct file *file = &recording->files[recording->next_file];
        uint64_t end = file->first_frame + file->n_frames;
        if (recording->frame < file->first_frame) {
            lose(recording, file->first_frame, &piece);
            break;
        }
        if (!recording->sound && recording->frame < end)
            begin_file(recording, file);
        uint64_t left = recording->frame < end ? end - recording->frame : 0;
        sf_count_t want = (sf_count_t)(left < max_frames ? left : max_frames);
        sf_count_t got = recording->sound && want > 0 ? sf_readf_float(recording->sound, samples, want) : 0;
        piece.n_frames = got > 0 ? (uint32_t)got : 0;
        recording->frame += piece.n_frames;
        if (piece.n_frames == 0 && recording->frame < end)
            lose(recording, end, &piece);
        if (recording->frame >= end)
            finish_file(recording);
    }
    if (piece.n_frames == 0 && piece.lost_before == 0)
        return STATUS_END;
    *out = piece;
    return STATUS_OK;
}

static enum status skip_recording(void *input, double seconds)
{
    struct recording *recording = input;
    const struct file *last = &recording->files[recording->n_files - 1];
    uint64_t frame = (uint64_t)llround(seconds * recording->rate_hz);
    if (!(seconds >= 0) || frame >= last->first_frame + last->n_frames)
        return STATUS_END;
    if (recording->sound)
        sf_close(recording->sound);
    recording->sound = NULL;
    recording->frame = frame;
    recording->next_file = 0;
    for (const struct file *file = recording->files; file->first_frame + file->n_frames <= frame; file++)
        recording->next_file++;
    return STATUS_OK;
}

const struct input_kind input_recording = {
    .name = "recording",
    .needs = {.files = true},
    .is_file = true,
    .open = open_recording,
    .read = read_recording,
    .close = close_recording,
    .skip = skip_recording,
};
