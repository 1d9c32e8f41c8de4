/* From contours to calls; see tones_judge.h. */
#include "call/tones_judge.h"
#include "base/units.h"
#include "call/certainty.h"
#include "call/tones_related.h"
#include <math.h>
#include <string.h>

#define MIN_CONTRAST 2.0   /* 3 dB over the cells beside it: less is a patch of noise */
#define LINE_OCCUPANCY 0.5 /* of the last half minute: a tone that is nearly always there */
#define TAIL_REACH_S 5.0   /* a tail begins at most so long after its sound ended ... */
#define TAIL_WEAKER 0.1    /* ... with at most this share of its mean square */
#define TAIL_FALL_DB_S 1.5
#define CONTAINED 0.8     /* share of the shorter that lies within the other: overlaps nearly fully */
#define MEMORY_S 12.0     /* how long a given sound still absorbs its pieces */
#define LOOK_AGAIN_S 0.05 /* after a sound was held for an open contour */
#define NEARLY_BEST 0.5   /* classes with so much of the most points are equals */

bool judge_is_same_sound(const struct judge *judge, const struct contour *a, const struct contour *b)
{
    double common = related_overlap(a, b), length[2] = {related_duration(a), related_duration(b)};
    if (related_is_overtone(judge->rate_hz, a, b) || related_is_overtone(judge->rate_hz, b, a))
        return true;
    if (common <= 0)
        return false;
    if (related_is_same_line(a, b) || related_is_harmonic(a, b) || related_is_blurred(a, b) ||
        related_is_blurred(b, a))
        return true;
    bool same_group = (judge->groups[a->tracer] & judge->groups[b->tracer]) != 0;
    /* Another window of the group may see the same sound otherwise, but not elsewhere. */
    if ((a->tracer == b->tracer || !same_group) && related_is_apart(a, b))
        return false;
    if (same_group && related_is_across(a, b))
        return false;
    return common >= CONTAINED * (same_group ? fmin(length[0], length[1]) : fmax(length[0], length[1]));
}

/* A flat contour that dies away where a much stronger sound has just been. */
static bool is_tail(const struct judge *judge, const struct contour *c)
{
    if (!contour_is_flat(c) || c->fall_db_s < TAIL_FALL_DB_S)
        return false;
    double middle = c->hz[TRACE_POINTS / 2];
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++) {
        const struct sound *sound = &judge->sounds[i];
        if (sound->used && sound->start_frame < c->start_frame &&
            c->start_frame < sound->end_frame + TAIL_REACH_S * judge->rate_hz &&
            middle > 0.97 * sound->low_hz && middle < 1.03 * sound->high_hz &&
            c->mean_square < TAIL_WEAKER * sound->strongest)
            return true;
    }
    return false;
}

/* Why the contour is no call of any class, or REJECT_COUNT. */
static enum rejection reject_contour(const struct judge *judge, enum trace_end end, const struct contour *c)
{
    if (end == TRACE_TOO_MANY)
        return REJECT_TOO_MANY;
    if (end == TRACE_STEADY_LINE || (contour_is_flat(c) && c->occupancy > LINE_OCCUPANCY))
        return REJECT_STEADY_LINE;
    if (c->contrast < MIN_CONTRAST && c->sideband_hz <= 0) /* beside a line of a comb lie its others */
        return REJECT_BROADBAND;
    return is_tail(judge, c) ? REJECT_REVERBERATION : REJECT_COUNT;
}

/* 0 as the highest: free. */
static bool lies_within(double x, double low, double high)
{
    return x >= low && (high <= 0 || x <= high);
}

/* Why the contour is no call of this class, or REJECT_COUNT when it is one. */
static enum rejection reject_for_class(const struct judge *judge, const struct judged_class *judged,
                                       const struct contour *c)
{
    const struct call_class *class = judged->class;
    const struct tone_shape *tone = &class->tone;
    double seconds = related_duration(c) / judge->rate_hz, extent = c->high_hz - c->low_hz;
    uint32_t inside = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++)
        inside += c->hz[i] >= class->low_hz && c->hz[i] <= class->high_hz;
    if (c->score < judged->threshold || 10 * log10(c->snr) < tone->min_snr_db)
        return REJECT_TOO_WEAK;
    if (seconds < tone->min_s)
        return REJECT_TOO_SHORT;
    if (seconds > tone->max_s)
        return REJECT_TOO_LONG;
    bool good = lies_within(c->bend_hz, tone->min_bend_hz, tone->max_bend_hz) &&
                lies_within(c->jump_hz, tone->min_jump_hz, tone->max_jump_hz) &&
                lies_within(c->sideband_hz, tone->min_sideband_hz, tone->max_sideband_hz) &&
                inside >= 0.8 * TRACE_POINTS && extent >= tone->min_extent_hz &&
                extent <= tone->max_extent_hz && c->sweep_hz >= tone->min_sweep_hz &&
                c->sweep_hz <= tone->max_sweep_hz;
    return good ? REJECT_COUNT : REJECT_SHAPE;
}

/* Its energy: the strongest contours say what a sound is. */
static double weight_of(const struct contour *c)
{
    return related_duration(c) * c->mean_square;
}

static void add_member(struct sound *sound, const struct contour *c)
{
    double length = related_duration(c);
    bool first = sound->n_members == 0;
    sound->start_frame = first ? c->start_frame : fmin(sound->start_frame, c->start_frame);
    sound->end_frame = first ? c->end_frame : fmax(sound->end_frame, c->end_frame);
    sound->low_hz = first ? c->low_hz : fmin(sound->low_hz, c->low_hz);
    sound->high_hz = first ? c->high_hz : fmax(sound->high_hz, c->high_hz);
    sound->strongest = fmax(sound->strongest, c->mean_square);
    sound->energy[c->tracer] += length * c->mean_square;
    sound->snr_weight += length * c->snr;
    sound->weight += length;
    if (sound->n_members < JUDGE_MAX_MEMBERS) {
        sound->members[sound->n_members++] = *c;
        return;
    }
    uint32_t least = 0;
    for (uint32_t i = 1; i < JUDGE_MAX_MEMBERS; i++)
        if (weight_of(&sound->members[i]) < weight_of(&sound->members[least]))
            least = i;
    if (weight_of(&sound->members[least]) < weight_of(c))
        sound->members[least] = *c;
}

static bool belongs(const struct judge *judge, const struct sound *sound, const struct contour *c)
{
    for (uint32_t i = 0; i < sound->n_members; i++)
        if (judge_is_same_sound(judge, &sound->members[i], c))
            return true;
    return false;
}

/* Two sounds turned out to be one. */
static void join(struct sound *to, struct sound *from)
{
    for (uint32_t i = 0; i < from->n_members; i++)
        add_member(to, &from->members[i]);
    for (uint32_t c = 0; c < CATALOGUE_MAX_CLASSES; c++)
        to->points[c] += from->points[c];
    from->used = false;
}

/* A contour that no class wants but that goes on with a sound which waits to be given: the sound lasts as
 * long. */
static void prolong(struct judge *judge, const struct contour *c)
{
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++) {
        struct sound *sound = &judge->sounds[i];
        if (sound->used && !sound->given && c->end_frame > sound->end_frame && belongs(judge, sound, c)) {
            sound->end_frame = c->end_frame;
            return;
        }
    }
}

/* What is given cannot be changed any more: only weaker contours within its time are absorbed. */
static bool is_piece(const struct sound *given, const struct contour *c)
{
    double common = fmin(given->end_frame, c->end_frame) - fmax(given->start_frame, c->start_frame);
    return common >= CONTAINED * related_duration(c) && c->mean_square < given->strongest;
}

/* The sound that the contour belongs to, a new one, or NULL when it belongs to one that is given already or
 * there is no room; *why says which. */
static struct sound *find_sound(struct judge *judge, const struct contour *c, enum rejection *why)
{
    struct sound *found = NULL, *unused = NULL;
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++) {
        struct sound *sound = &judge->sounds[i];
        if (!sound->used)
            unused = sound;
        else if (belongs(judge, sound, c)) {
            if (sound->given && !is_piece(sound, c))
                continue;
            if (sound->given) {
                *why = REJECT_PART_OF_ANOTHER;
                return NULL;
            }
            if (found)
                join(found, sound);
            else
                found = sound;
        }
    }
    *why = REJECT_TOO_MANY;
    if (!found && unused)
        *unused = (struct sound){.used = true};
    return found ? found : unused;
}

/* Of the classes with nearly the most points the one that lets least through. */
static uint32_t best_class(const struct judge *judge, const struct sound *sound)
{
    double most = 0;
    for (uint32_t i = 0; i < judge->n_classes; i++)
        most = fmax(most, sound->points[i]);
    uint32_t best = 0;
    double least = INFINITY;
    for (uint32_t i = 0; i < judge->n_classes; i++)
        if (sound->points[i] > 0 && sound->points[i] >= NEARLY_BEST * most &&
            judge->classes[i].allowance < least) {
            least = judge->classes[i].allowance;
            best = i;
        }
    return best;
}

/* Sounds that waited for a contour which proves a steady line are pieces of it: where their paths left it is
 * noise. */
static void drop_pieces_of_line(struct judge *judge, const struct contour *line)
{
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++) {
        struct sound *sound = &judge->sounds[i];
        if (!sound->used || sound->given || sound->start_frame < line->start_frame ||
            !belongs(judge, sound, line))
            continue;
        judge->rejections[best_class(judge, sound)][REJECT_STEADY_LINE]++;
        sound->used = false;
    }
}

void judge_take(struct judge *judge, uint32_t tracer, enum trace_end end, const struct contour *contour)
{
    struct contour c = contour ? *contour : (struct contour){0};
    c.tracer = tracer;
    if (contour && end == TRACE_STEADY_LINE)
        drop_pieces_of_line(judge, &c);
    enum rejection all = reject_contour(judge, end, &c), each[CATALOGUE_MAX_CLASSES];
    bool fits = false;
    for (uint32_t i = 0; i < judge->n_classes; i++) {
        if (judge->classes[i].tracer != tracer)
            continue;
        each[i] = all != REJECT_COUNT ? all : reject_for_class(judge, &judge->classes[i], &c);
        fits = fits || each[i] == REJECT_COUNT;
    }
    enum rejection why = REJECT_COUNT;
    struct sound *sound = fits ? find_sound(judge, &c, &why) : NULL;
    if (sound)
        add_member(sound, &c);
    else if (!fits && all == REJECT_COUNT)
        prolong(judge, &c);
    for (uint32_t i = 0; i < judge->n_classes; i++) {
        if (judge->classes[i].tracer != tracer)
            continue;
        if (sound && each[i] == REJECT_COUNT)
            sound->points[i] += weight_of(&c);
        else if (!fits || (!sound && each[i] == REJECT_COUNT))
            judge->rejections[i][fits ? why : each[i]]++;
    }
}

static bool is_due(const struct judge *judge, const struct sound *sound, double frame)
{
    return sound->used && !sound->given &&
           frame >= sound->end_frame +
                        judge->classes[best_class(judge, sound)].class->natural_delay_s * judge->rate_hz;
}

bool judge_is_due(const struct judge *judge, double frame)
{
    if (frame < judge->look_again)
        return false;
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++)
        if (is_due(judge, &judge->sounds[i], frame))
            return true;
    return false;
}

/* What its certainty rests on: its strongest contour in the class's window. */
static void measure(const struct judge *judge, const struct sound *sound, struct found_call *out)
{
    const struct judged_class *best = &judge->classes[out->class_index];
    const struct tone_shape *shape = &best->class->tone;
    const struct contour *c = NULL;
    for (uint32_t i = 0; i < sound->n_members; i++) {
        const struct contour *member = &sound->members[i];
        if (member->tracer == best->tracer && (!c || weight_of(member) > weight_of(c)))
            c = member;
    }
    if (!c)
        return;
    out->measures[TONE_LENGTH] = log(fmax(0.1, c->seconds / shape->min_s));
    out->measures[TONE_BEND] = log(0.1 + c->bend_hz / c->bin_hz);
    out->measures[TONE_JUMP] = log(0.1 + c->jump_hz / c->bin_hz);
    out->measures[TONE_OCCUPANCY] = log(0.01 + c->occupancy);
    out->measures[TONE_CONTRAST] = units_power_db(c->contrast);
    out->measures[TONE_STRENGTH] = fmin(15, out->snr_db - shape->min_snr_db);
}

static void give(const struct judge *judge, struct sound *sound, uint64_t known_frame,
                 const struct found_sink *sink)
{
    double energy = 0;
    sound->end_frame = fmax(sound->end_frame, sound->open_end_frame);
    for (uint32_t i = 0; i < CATALOGUE_MAX_CLASSES; i++)
        energy = fmax(energy, sound->energy[i]);
    struct found_call found = {.class_index = best_class(judge, sound),
                               .start_frame = sound->start_frame,
                               .end_frame = sound->end_frame,
                               .known_frame = known_frame,
                               .low_hz = sound->low_hz,
                               .high_hz = sound->high_hz,
                               .snr_db = 10 * log10(sound->snr_weight / sound->weight),
                               .mean_square_pa2 = energy / (sound->end_frame - sound->start_frame)};
    measure(judge, sound, &found);
    sound->given = true;
    sink->take(sink->context, &found);
}

enum openness { CLOSED, GOES_ON, OVERTONE_OF_OPEN };

/* A sound that goes on lasts as long as what is open of it. What is open and known as soon may name it. */
static enum openness look_at_open(const struct judge *judge, struct sound *sound, double frame,
                                  const struct contour *open, uint32_t n_open)
{
    enum openness openness = CLOSED;
    const double delay_s = judge->classes[best_class(judge, sound)].class->natural_delay_s;
    for (uint32_t i = 0; i < n_open; i++) {
        if (frame >= open[i].end_frame + delay_s * judge->rate_hz)
            continue; /* no longer than the class has */
        bool overtone = true;
        for (uint32_t m = 0; m < sound->n_members; m++)
            overtone = overtone && related_is_overtone(judge->rate_hz, &sound->members[m], &open[i]);
        if (overtone)
            return OVERTONE_OF_OPEN;
        bool waits = judge->delay_s[open[i].tracer] <= delay_s;
        if ((waits || open[i].end_frame > sound->end_frame) && belongs(judge, sound, &open[i])) {
            sound->open_end_frame = fmax(sound->open_end_frame, open[i].end_frame);
            openness = GOES_ON;
        }
    }
    return openness;
}

/* Which sounds are to be given now; holds those that go on and drops overtones of what is still open. */
static void choose(struct judge *judge, uint64_t known_frame, bool all, const struct contour *open,
                   uint32_t n_open, bool ready[JUDGE_MAX_SOUNDS])
{
    judge->look_again = 0;
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++) {
        struct sound *sound = &judge->sounds[i];
        ready[i] = all ? sound->used && !sound->given : is_due(judge, sound, (double)known_frame + 1);
        if (!ready[i] || all)
            continue;
        enum openness openness = look_at_open(judge, sound, (double)known_frame + 1, open, n_open);
        ready[i] = openness == CLOSED;
        if (openness == GOES_ON)
            judge->look_again = (double)known_frame + LOOK_AGAIN_S * judge->rate_hz;
        if (openness == OVERTONE_OF_OPEN) {
            judge->rejections[best_class(judge, sound)][REJECT_PART_OF_ANOTHER]++;
            sound->used = false;
        }
    }
}

void judge_give(struct judge *judge, uint64_t known_frame, bool all, const struct contour *open,
                uint32_t n_open, const struct found_sink *sink)
{
    bool ready[JUDGE_MAX_SOUNDS];
    choose(judge, known_frame, all, open, n_open, ready);
    for (;;) {
        struct sound *next = NULL;
        for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++)
            if (ready[i] && !judge->sounds[i].given &&
                (!next || judge->sounds[i].start_frame < next->start_frame))
                next = &judge->sounds[i];
        if (!next)
            break;
        give(judge, next, known_frame, sink);
    }
    for (uint32_t i = 0; i < JUDGE_MAX_SOUNDS; i++)
        if (judge->sounds[i].given &&
            (double)known_frame > judge->sounds[i].end_frame + MEMORY_S * judge->rate_hz)
            judge->sounds[i].used = false;
}
