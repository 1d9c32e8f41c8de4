/* What recognised sounds cover; see covers.h. */
#include "listen/covers.h"
#include <math.h>
#include <string.h>

#define COVERED 0.5         /* share of a call's time, and of its band, that must be covered */
#define COVERED_BY_LINE 0.8 /* of its band */
#define WINDOW_BINS 2.0     /* to which a tone is told at least, in bins of its spectrum */
#define BAND_SHARE 0.03     /* how exactly two detectors tell a frequency, as a share of it ... */
#define BAND_HZ 2.0         /* ... and beside it */
#define SAME_S 0.015        /* how exactly two detectors tell a time, beside the window */
#define RHYTHM_ERROR 0.03   /* of an interval */
#define MOST_MULTIPLE 4     /* missed pulses */

#define SKIRT_RATIO 1.41  /* half an octave beside a machine's tone ... */
#define SKIRT_DB 25.0     /* ... and so much weaker ... */
#define SKIRT_AFTER_S 0.5 /* ... while it lasts, and so long after */
#define SNAPS_BEATS 12
#define SNAPS_LIKE_HZ 100000.0
#define OVER_LINE_DB 30.0
#define LINE_GOES_ON_S 60.0 /* a line that wanders is not told without a gap */
#define SWELL_DB 5.0        /* by which noise that swells rises over its mean: (1 + 0.7)^2 */

void covers_reset(struct covers *covers, const struct call_class *classes, uint32_t n_classes, double rate_hz)
{
    memset(covers, 0, sizeof *covers);
    covers->classes = classes;
    covers->n_classes = n_classes;
    covers->rate_hz = rate_hz;
}

static uint32_t remembered(uint32_t n)
{
    return n < COVERS_REMEMBERED ? n : COVERS_REMEMBERED;
}

/* A line keeps its frequency, and slow branches tell theirs finely: one that passes beside it, or across, is
 * none of it. */
static bool shares_band(const struct covers *covers, const struct found_call *sound,
                        const struct found_call *call)
{
    double pad = BAND_HZ + BAND_SHARE * call->high_hz, share = COVERED;
    if (covers->classes[sound->class_index].sound.manner == MANNER_LINE && call->n_pulses == 0) {
        pad = fmin(pad, WINDOW_BINS / covers->classes[call->class_index].tone.window_s);
        share = COVERED_BY_LINE;
    }
    double low = fmax(sound->low_hz - pad, call->low_hz), high = fmin(sound->high_hz + pad, call->high_hz);
    return high >= low && high - low >= share * (call->high_hz - call->low_hz);
}

/* Pulses of one interval are of one machine; a whole multiple is the same with pulses missed. */
static bool shares_rhythm(const struct found_call *sound, const struct found_call *call)
{
    if (call->n_pulses == 0)
        return true;
    if (!(sound->interval_frames > 0) || !(call->interval_frames > 0))
        return false;
    double ratio = call->interval_frames / sound->interval_frames;
    double whole = round(fmax(ratio, 1 / ratio));
    return whole <= MOST_MULTIPLE && fabs(fmax(ratio, 1 / ratio) / whole - 1) <= RHYTHM_ERROR;
}

/* A tone that begins and ends with a burst and runs through its frequency is it, however far its ends stray
 * in the noise around. */
static bool is_the_same(const struct covers *covers, const struct found_call *sound,
                        const struct found_call *call)
{
    const struct call_class *class = &covers->classes[call->class_index];
    double near_frames = (class->tone.window_s + SAME_S) * covers->rate_hz,
           pad = BAND_HZ + BAND_SHARE * call->high_hz;
    return covers->classes[sound->class_index].sound.manner == MANNER_BURST && class->form == CALL_TONE &&
           fabs(sound->start_frame - call->start_frame) <= near_frames &&
           fabs(sound->end_frame - call->end_frame) <= near_frames && sound->low_hz >= call->low_hz - pad &&
           sound->high_hz <= call->high_hz + pad;
}

static enum manner manner_of(const struct covers *covers, const struct found_call *sound)
{
    return covers->classes[sound->class_index].sound.manner;
}

/* A machine's tone has skirts: what its keying and its transducer make beside it, and what its surroundings
 * give back. */
static bool is_skirt(const struct covers *covers, const struct found_call *sound,
                     const struct found_call *call)
{
    enum manner manner = manner_of(covers, sound);
    double after = SKIRT_AFTER_S * covers->rate_hz;
    return (manner == MANNER_BURST || manner == MANNER_HOPS) && call->n_pulses == 0 &&
           call->snr_db <= sound->snr_db - SKIRT_DB && call->high_hz >= sound->low_hz / SKIRT_RATIO &&
           call->low_hz <= sound->high_hz * SKIRT_RATIO &&
           fmin(call->end_frame, sound->end_frame + after) - fmax(call->start_frame, sound->start_frame) >=
               COVERED * (call->end_frame - call->start_frame);
}

/* Stands out of noise no farther than its swelling alone might. */
static bool is_weak(const struct covers *covers, const struct found_call *call)
{
    const struct call_class *class = &covers->classes[call->class_index];
    double least_db = class->form == CALL_TONE ? class->tone.min_snr_db : class->train.min_snr_db;
    return call->snr_db < least_db + SWELL_DB;
}

/* What lasts is told once it has, for as long again it goes on. */
static double goes_on_until(const struct found_call *sound)
{
    return 2 * sound->end_frame - sound->start_frame;
}

/* Frames of a train that has the rhythm of the swells. */
static double swelling_frames(const struct covers *covers, const struct found_call *sound,
                              const struct found_call *call)
{
    if (call->n_pulses == 0 || !is_weak(covers, call) || !shares_rhythm(sound, call))
        return 0;
    return fmax(0, fmin(goes_on_until(sound), call->end_frame) - fmax(sound->start_frame, call->start_frame));
}

/* The harmonics of a loud machine go on above what is recognised of them, and where their peaks come together
 * the limiter of transients makes more of them: contours far weaker than the line that they belong to. */
static bool is_over_line(const struct found_call *sound, const struct found_call *call)
{
    return call->n_pulses == 0 && call->low_hz > sound->high_hz &&
           call->snr_db <= sound->snr_db - OVER_LINE_DB;
}

/* Among many snaps some fall into a rhythm for a few beats; they are as broad as dolphins' clicks, not as
 * porpoises'. */
static bool is_like_snaps(const struct covers *covers, const struct found_call *call)
{
    return call->n_pulses > 0 && call->n_pulses < SNAPS_BEATS &&
           covers->classes[call->class_index].low_hz < SNAPS_LIKE_HZ;
}

bool covers_doubts(const struct covers *covers, const struct found_call *call)
{
    bool doubts = false, weak = is_weak(covers, call);
    for (uint32_t i = 0; i < remembered(covers->n_sounds) && !doubts; i++) {
        const struct found_call *sound = &covers->sounds[i];
        enum manner manner = manner_of(covers, sound);
        if (is_skirt(covers, sound, call))
            return true;
        double until = manner == MANNER_LINE ? sound->end_frame + LINE_GOES_ON_S * covers->rate_hz
                                             : goes_on_until(sound);
        bool snaps = manner == MANNER_SNAPS && is_like_snaps(covers, call);
        doubts = (snaps || (manner == MANNER_BEATS && weak) ||
                  (manner == MANNER_LINE && weak && is_over_line(sound, call))) &&
                 call->end_frame > sound->start_frame && call->start_frame < until;
    }
    return doubts;
}

/* Frames of the call that the sound covers. A train is as wide as its class's band: the edges of bursts and
 * chips in it make pulses there. */
static double covered_frames(const struct covers *covers, const struct found_call *sound,
                             const struct found_call *call)
{
    enum manner manner = manner_of(covers, sound);
    if (manner == MANNER_SNAPS)
        return 0; /* they have no rhythm; see covers_doubts */
    if (manner == MANNER_BEATS)
        return swelling_frames(covers, sound, call);
    bool edges = (manner == MANNER_BURST || manner == MANNER_HOPS) && call->n_pulses > 0 &&
                 sound->high_hz >= call->low_hz && sound->low_hz <= call->high_hz;
    if (is_the_same(covers, sound, call))
        return call->end_frame - call->start_frame;
    if (!edges && (!shares_band(covers, sound, call) || !shares_rhythm(sound, call)))
        return 0;
    /* A tone is told to within its window: one that only touches the sound is full of it. */
    double window =
        call->n_pulses == 0 ? covers->classes[call->class_index].tone.window_s * covers->rate_hz : 0;
    return fmax(0, fmin(sound->end_frame + window, call->end_frame) -
                       fmax(sound->start_frame - window, call->start_frame));
}

static bool is_enough(double frames, const struct found_call *call)
{
    return frames > 0 && frames >= COVERED * (call->end_frame - call->start_frame);
}

double covers_evidence(const struct covers *covers, const struct found_call *call)
{
    double evidence = covers->classes[call->class_index].evidence, frames = 0, taken = 0;
    for (uint32_t i = 0; i < remembered(covers->n_sounds); i++) {
        double more = covered_frames(covers, &covers->sounds[i], call);
        frames += more;
        if (more > 0)
            taken = fmax(taken, -covers->classes[covers->sounds[i].class_index].evidence);
    }
    return is_enough(frames, call) ? fmax(0, evidence - taken) : evidence;
}

void covers_keep_call(struct covers *covers, const struct found_call *call, uint64_t counter)
{
    covers->calls[covers->n_calls++ % COVERS_REMEMBERED] = (struct covered_call){counter, *call};
}

uint32_t covers_take_sound(struct covers *covers, const struct joined_call *sound,
                           uint64_t out_against[CALL_MAX_AGAINST])
{
    uint32_t n = 0;
    if (!(covers->classes[sound->found.class_index].evidence < 0))
        return 0;
    covers->sounds[covers->n_sounds++ % COVERS_REMEMBERED] = sound->found;
    for (uint32_t i = 0; i < remembered(covers->n_calls) && n < CALL_MAX_AGAINST; i++) {
        struct covered_call *call = &covers->calls[i];
        double frames = 0;
        if (call->counter == 0 || covered_frames(covers, &sound->found, &call->found) <= 0)
            continue;
        for (uint32_t k = 0; k < remembered(covers->n_sounds); k++)
            frames += covered_frames(covers, &covers->sounds[k], &call->found);
        if (!is_enough(frames, &call->found))
            continue;
        out_against[n++] = call->counter;
        call->counter = 0;
    }
    return n;
}

static void gather(struct gathered *gathered, const struct joined_call *sound)
{
    struct joined_call *all = &gathered->all;
    if (gathered->n++ == 0) {
        *all = *sound;
        return;
    }
    struct found_call sum = sound->found.snr_db > all->found.snr_db ? sound->found : all->found;
    if (sound->found.snr_db > all->found.snr_db)
        all->channel = sound->channel;
    sum.start_frame = fmin(all->found.start_frame, sound->found.start_frame);
    sum.end_frame = fmax(all->found.end_frame, sound->found.end_frame);
    sum.low_hz = fmin(all->found.low_hz, sound->found.low_hz);
    sum.high_hz = fmax(all->found.high_hz, sound->found.high_hz);
    sum.n_pulses = all->found.n_pulses + sound->found.n_pulses;
    all->found = sum;
}

bool covers_gives_now(struct covers *covers, const struct joined_call *sound, bool urgent)
{
    struct gathered *gathered = &covers->gathered[sound->found.class_index];
    uint64_t known = sound->found.known_frame;
    if (!urgent &&
        (gathered->n > 0 || (gathered->given && (double)known < (double)gathered->given_frame +
                                                                    COVERS_ENTRY_S * covers->rate_hz))) {
        gather(gathered, sound);
        return false;
    }
    gathered->given = true;
    if (gathered->n == 0)
        gathered->given_frame = known;
    return true;
}

void covers_give(struct covers *covers, uint64_t end_frame, bool all, const struct gathered_sink *sink)
{
    for (uint32_t c = 0; c < covers->n_classes; c++) {
        struct gathered *gathered = &covers->gathered[c];
        if (gathered->n == 0 ||
            (!all && (double)end_frame < (double)gathered->given_frame + COVERS_ENTRY_S * covers->rate_hz))
            continue;
        sink->take(sink->context, &gathered->all, gathered->n);
        gathered->n = 0;
        gathered->given = true;
        gathered->given_frame = end_frame;
    }
}
