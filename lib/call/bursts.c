/* Bursts of tone, and chips that hop; see bursts.h. */
#include "call/bursts.h"
#include "base/units.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_PEAKS 12
#define MAX_OPEN 24
#define MAX_ALIKE 64
#define MOST_HARMONICS 14
#define HARMONIC_RATIO 4.0 /* mean over that beside it: 6 dB */
#define STAND_OUT 12.6F    /* 11 dB */
#define BESIDE_NEAR 5      /* bins beside a peak that it must stand above: from here ... */
#define BESIDE_FAR 9       /* ... to here */
#define UP 1.012F          /* steps of the background: a median */
#define DOWN (1 / 1.012F)
#define UP_SLOW 1.002F    /* where a tone stands: 12 s for 20 dB */
#define REACH_BINS 1.3    /* from where the contour points to */
#define TAIL 0.06         /* 12 dB below the burst: its reverberation */
#define GAP_FRAMES 2      /* that a burst may miss */
#define STRAIGHT_BINS 0.3 /* root mean square about the line */
#define ALIKE_BINS 0.35
#define ALIKE_LENGTH 0.1
#define CHIP_GAP 4.0    /* frames between chips of a block */
#define CHIP_SPREAD 2.5 /* of their lengths, frames */
#define LONGEST_CHIP_S 0.12
#define TURNS 0.3 /* least share of chips at which the hopping turns: a sweep never does */

/* Of an open tone that may be a machine's: a call beside it waits. */
#define HOLD_S 0.1
#define HOLD_DB 25.0
#define HOLD_RATIO 1.6

struct peak {
    double bin, power, ratio;
    bool taken;
};

/* Sums of a straight-line fit of bin over frame. */
struct burst {
    bool used;
    uint64_t start, last; /* numbers of frames */
    double start_frame;
    double n, t, tt, b, tb, bb, ratio, power, last_bin;
    double harmonic[MOST_HARMONICS + 1], beside[MOST_HARMONICS + 1]; /* sums of power at each, and by it */
};

/* A burst that is over. */
struct straight {
    double start_frame, end_frame, hz, extent_hz, low_hz, high_hz, snr_db, mean_square, harmonics_to_hz;
    uint32_t class_index;
    bool told;
};

struct block {
    double start_frame, end_frame, low_hz, high_hz, last_hz, last_hop_hz;
    double n, turns, sum, squares, ratio, power; /* of the chips' lengths in frames */
};

struct bursts {
    struct other_setup setup;
    float *background; /* [n / 2 + 1] */
    uint64_t n_frames;
    uint32_t low_bin, high_bin;
    struct burst open[MAX_OPEN];
    uint32_t n_alike;
    struct straight alike[MAX_ALIKE]; /* ring */
    struct block block;
    uint64_t known_frame;
    const struct found_sink *sink;
};

static bool has_manner(const struct call_class *class)
{
    return class->sound.manner == MANNER_BURST || class->sound.manner == MANNER_HOPS;
}

enum status bursts_create(const struct other_setup *setup, struct bursts **out)
{
    struct bursts *bursts = calloc(1, sizeof *bursts);
    if (!bursts)
        return STATUS_NO_MEMORY;
    bursts->setup = *setup;
    bursts->background = calloc(setup->n / 2 + 1, sizeof *bursts->background);
    if (!bursts->background) {
        free(bursts);
        return STATUS_NO_MEMORY;
    }
    double low = INFINITY, high = 0;
    for (uint32_t c = 0; c < setup->n_classes; c++)
        if (has_manner(&setup->classes[c])) {
            low = fmin(low, setup->classes[c].low_hz);
            high = fmax(high, setup->classes[c].high_hz);
        }
    if (high > low) {
        bursts->low_bin = (uint32_t)fmax(BESIDE_FAR + 1, floor(low / setup->bin_hz));
        bursts->high_bin = (uint32_t)fmin(setup->n / 2.0 - BESIDE_FAR - 1, ceil(high / setup->bin_hz));
    }
    *out = bursts;
    return STATUS_OK;
}

void bursts_destroy(struct bursts *bursts)
{
    if (!bursts)
        return;
    free(bursts->background);
    free(bursts);
}

void bursts_reset(struct bursts *bursts)
{
    memset(bursts->open, 0, sizeof bursts->open);
    bursts->block = (struct block){0};
    bursts->n_frames = 0;
}

/* ---- what is over */

static void tell(struct bursts *bursts, const struct straight *burst)
{
    const struct found_call found = {.class_index = burst->class_index,
                                     .start_frame = burst->start_frame,
                                     .end_frame = burst->end_frame,
                                     .known_frame = bursts->known_frame,
                                     .low_hz = burst->low_hz,
                                     .high_hz = burst->high_hz,
                                     .snr_db = burst->snr_db,
                                     .mean_square_pa2 = burst->mean_square,
                                     .harmonics_to_hz = burst->harmonics_to_hz};
    bursts->sink->take(bursts->sink->context, &found);
}

/* The class that allows least, of those that the burst fits; n_classes: none. */
static uint32_t class_of(const struct bursts *bursts, const struct straight *burst, double length_s)
{
    uint32_t best = bursts->setup.n_classes;
    double least = INFINITY;
    for (uint32_t c = 0; c < bursts->setup.n_classes; c++) {
        const struct call_class *class = &bursts->setup.classes[c];
        const struct other_shape *sound = &class->sound;
        if (sound->manner != MANNER_BURST || burst->hz < class->low_hz || burst->hz > class->high_hz ||
            length_s < sound->min_s || length_s > sound->max_s || burst->snr_db < sound->min_snr_db ||
            fabs(burst->extent_hz) > sound->max_extent_hz)
            continue;
        double allowance = log(class->high_hz / class->low_hz) * log(sound->max_s / sound->min_s);
        if (allowance < least) {
            least = allowance;
            best = c;
        }
    }
    return best;
}

static bool is_alike(const struct bursts *bursts, const struct straight *a, const struct straight *b)
{
    double near_hz = ALIKE_BINS * bursts->setup.bin_hz;
    double length_a = a->end_frame - a->start_frame, length_b = b->end_frame - b->start_frame;
    return a->class_index == b->class_index && fabs(a->hz - b->hz) <= near_hz &&
           fabs(a->extent_hz - b->extent_hz) <= 2 * near_hz &&
           fabs(length_a - length_b) <= fmax(1.5 * bursts->setup.n, ALIKE_LENGTH * length_a);
}

/* Recognised once it has come often enough; then those before it are told with it, oldest first. */
static void take_straight(struct bursts *bursts, struct straight *burst)
{
    const struct other_shape *sound = &bursts->setup.classes[burst->class_index].sound;
    uint32_t n = bursts->n_alike < MAX_ALIKE ? bursts->n_alike : MAX_ALIKE, alike = 1;
    struct straight *found[MAX_ALIKE];
    uint32_t n_found = 0;
    for (uint32_t i = 0; i < n; i++) {
        struct straight *earlier = &bursts->alike[(bursts->n_alike - n + i) % MAX_ALIKE];
        if (!is_alike(bursts, burst, earlier) ||
            burst->start_frame - earlier->end_frame > sound->memory_s * bursts->setup.rate_hz)
            continue;
        alike++;
        found[n_found++] = earlier;
    }
    if (alike >= sound->min_repeats) {
        for (uint32_t i = 0; i < n_found; i++)
            if (!found[i]->told) {
                tell(bursts, found[i]);
                found[i]->told = true;
            }
        tell(bursts, burst);
        burst->told = true;
    }
    bursts->alike[bursts->n_alike++ % MAX_ALIKE] = *burst;
}

static uint32_t hops_class(const struct bursts *bursts, const struct block *block)
{
    double mean = block->sum / block->n * bursts->setup.frame_s,
           middle = (block->low_hz + block->high_hz) / 2;
    double spread = sqrt(fmax(0, block->squares / block->n - pow(block->sum / block->n, 2)));
    for (uint32_t c = 0; c < bursts->setup.n_classes; c++) {
        const struct call_class *class = &bursts->setup.classes[c];
        const struct other_shape *sound = &class->sound;
        if (sound->manner == MANNER_HOPS && middle >= class->low_hz && middle <= class->high_hz &&
            mean >= sound->min_s && mean <= sound->max_s && block->n >= sound->min_repeats &&
            block->high_hz - block->low_hz <= sound->max_extent_hz && spread <= CHIP_SPREAD &&
            block->turns >= TURNS * block->n)
            return c;
    }
    return bursts->setup.n_classes;
}

static void end_block(struct bursts *bursts)
{
    struct block *block = &bursts->block;
    uint32_t c = block->n > 0 ? hops_class(bursts, block) : bursts->setup.n_classes;
    if (c < bursts->setup.n_classes) {
        const struct straight whole = {.start_frame = block->start_frame,
                                       .end_frame = block->end_frame,
                                       .low_hz = block->low_hz,
                                       .high_hz = block->high_hz,
                                       .snr_db = units_power_db(block->ratio / block->n),
                                       .mean_square = block->power / block->n,
                                       .class_index = c};
        tell(bursts, &whole);
    }
    *block = (struct block){0};
}

/* Whether it follows another chip directly: then it is no burst of its own. */
static bool add_chip(struct bursts *bursts, const struct burst *chip, double hz)
{
    struct block *block = &bursts->block;
    double end = chip->start_frame + (double)(chip->last - chip->start + 1) * bursts->setup.n;
    if (block->n > 0 && chip->start_frame > block->end_frame + CHIP_GAP * bursts->setup.n)
        end_block(bursts);
    if (block->n > 0 && fabs(hz - block->last_hz) < bursts->setup.bin_hz / 2 &&
        chip->start_frame >= block->end_frame)
        return false;
    if (block->n == 0)
        *block = (struct block){.start_frame = chip->start_frame, .low_hz = hz, .high_hz = hz};
    double frames = (double)(chip->last - chip->start + 1);
    block->n++;
    block->sum += frames;
    block->squares += frames * frames;
    block->ratio += chip->ratio / chip->n;
    block->power += chip->power / chip->n;
    block->end_frame = fmax(block->end_frame, end);
    block->low_hz = fmin(block->low_hz, hz);
    block->high_hz = fmax(block->high_hz, hz);
    if (block->n > 1) {
        block->turns += (hz - block->last_hz) * block->last_hop_hz < 0;
        block->last_hop_hz = hz - block->last_hz;
    }
    block->last_hz = hz;
    return block->n > 1;
}

static void end_burst(struct bursts *bursts, struct burst *burst)
{
    const struct other_setup *setup = &bursts->setup;
    double frames = (double)(burst->last - burst->start + 1), mean_t = burst->t / burst->n;
    double mean_b = burst->b / burst->n, var_t = burst->tt / burst->n - mean_t * mean_t;
    double slope = var_t > 0 ? (burst->tb / burst->n - mean_t * mean_b) / var_t : 0;
    double rest = burst->bb / burst->n - mean_b * mean_b - slope * slope * var_t;
    double half = fabs(slope) * frames / 2;
    struct straight straight = {.start_frame = burst->start_frame,
                                .end_frame = burst->start_frame + frames * setup->n,
                                .hz = mean_b * setup->bin_hz,
                                .extent_hz = slope * frames * setup->bin_hz,
                                .low_hz = (mean_b - half) * setup->bin_hz,
                                .high_hz = (mean_b + half) * setup->bin_hz,
                                .snr_db = units_power_db(burst->ratio / burst->n),
                                .mean_square = burst->power / burst->n};
    for (uint32_t k = 2; k <= MOST_HARMONICS; k++)
        if (burst->harmonic[k] > HARMONIC_RATIO * burst->beside[k])
            straight.harmonics_to_hz = k * straight.hz;
    burst->used = false;
    if (frames * setup->frame_s <= LONGEST_CHIP_S && add_chip(bursts, burst, straight.hz))
        return;
    straight.class_index = class_of(bursts, &straight, frames * setup->frame_s);
    if (straight.class_index < setup->n_classes && sqrt(fmax(0, rest)) <= STRAIGHT_BINS &&
        burst->n >= 0.8 * frames)
        take_straight(bursts, &straight);
}

/* ---- a frame */

static double level_beside(const float *power, uint32_t bin)
{
    double sum = 0;
    for (uint32_t k = BESIDE_NEAR; k <= BESIDE_FAR; k++)
        sum += power[bin - k] + power[bin + k];
    return sum / (2 * (BESIDE_FAR - BESIDE_NEAR + 1));
}

static bool any_stands_out(const struct bursts *bursts, const float *power, uint32_t bin)
{
    return lanes_any(lanes_load(power + bin) > lanes_all(STAND_OUT) * lanes_load(bursts->background + bin));
}

/* The strongest local maxima that stand out. */
static uint32_t find_peaks(const struct bursts *bursts, const float *power, struct peak out[MAX_PEAKS])
{
    uint32_t n = 0;
    for (uint32_t i = bursts->low_bin; i < bursts->high_bin; i++) {
        if (i + LANES <= bursts->high_bin && !any_stands_out(bursts, power, i)) {
            i += LANES - 1; /* most bins hold nothing */
            continue;
        }
        if (!(power[i] > STAND_OUT * bursts->background[i]) || power[i] < power[i - 1] ||
            power[i] <= power[i + 1] || !(power[i] > STAND_OUT * level_beside(power, i)))
            continue;
        double rest = fmax(bursts->background[i], level_beside(power, i));
        double a = log(fmax(power[i - 1], 1e-30F)), b = log(power[i]), c = log(fmax(power[i + 1], 1e-30F));
        double bend = a - 2 * b + c;
        struct peak peak = {.bin = i + (bend < 0 ? 0.5 * (a - c) / bend : 0),
                            .power = (double)power[i - 1] + power[i] + power[i + 1],
                            .ratio = power[i] / fmax(rest, 1e-30)};
        uint32_t at = n < MAX_PEAKS ? n++ : MAX_PEAKS;
        for (; at > 0 && out[at - 1].power < peak.power; at--)
            if (at < MAX_PEAKS)
                out[at] = out[at - 1];
        if (at < MAX_PEAKS)
            out[at] = peak;
    }
    return n;
}

static void learn(struct bursts *bursts, const float *power)
{
    float *background = bursts->background;
    for (uint32_t i = bursts->low_bin; i < bursts->high_bin; i++) {
        float up = power[i] > 8 * background[i] ? UP_SLOW : UP;
        background[i] *= power[i] > background[i] ? up : DOWN;
    }
}

/* The first second: the mean of what is heard, at first with steps that halve. */
static void learn_first(struct bursts *bursts, const float *power)
{
    float share = 1.0F / (float)(bursts->n_frames + 1);
    for (uint32_t i = bursts->low_bin; i < bursts->high_bin; i++)
        bursts->background[i] += share * (0.7F * power[i] + 1e-20F - bursts->background[i]);
}

static void add_point(struct burst *burst, uint64_t number, const struct peak *peak)
{
    double t = (double)(number - burst->start);
    burst->n++;
    burst->t += t;
    burst->tt += t * t;
    burst->b += peak->bin;
    burst->tb += t * peak->bin;
    burst->bb += peak->bin * peak->bin;
    burst->ratio += peak->ratio;
    burst->power += peak->power;
    burst->last = number;
    burst->last_bin = peak->bin;
}

/* What stands at whole multiples of a burst: machines drive their transducers hard. */
static void add_harmonics(struct burst *burst, const float *power, uint32_t n_bins)
{
    for (uint32_t k = 2; k <= MOST_HARMONICS; k++) {
        uint32_t bin = (uint32_t)lround(k * burst->last_bin);
        if (bin + BESIDE_FAR >= n_bins)
            return;
        burst->harmonic[k] += fmaxf(power[bin], fmaxf(power[bin - 1], power[bin + 1]));
        burst->beside[k] += 1.8 * level_beside(power, bin); /* as much as the greatest of three in noise */
    }
}

/* Where the contour points to: along its fit once that is sure. */
static double expected(const struct burst *burst, uint64_t number)
{
    double mean_t = burst->t / burst->n, mean_b = burst->b / burst->n;
    double var_t = burst->tt / burst->n - mean_t * mean_t;
    if (burst->n < 4 || var_t <= 0)
        return burst->last_bin;
    double slope = (burst->tb / burst->n - mean_t * mean_b) / var_t;
    return mean_b + slope * ((double)(number - burst->start) - mean_t);
}

static void carry_on(struct bursts *bursts, const float *power, struct peak *peaks, uint32_t n_peaks)
{
    uint64_t number = bursts->n_frames;
    for (uint32_t k = 0; k < MAX_OPEN; k++) {
        struct burst *burst = &bursts->open[k];
        struct peak *best = NULL;
        double least = REACH_BINS;
        if (!burst->used)
            continue;
        for (uint32_t i = 0; i < n_peaks; i++) {
            double off = fabs(peaks[i].bin - expected(burst, number));
            if (!peaks[i].taken && off <= least && peaks[i].power > TAIL * burst->power / burst->n) {
                least = off;
                best = &peaks[i];
            }
        }
        if (best) {
            best->taken = true;
            add_point(burst, number, best);
            add_harmonics(burst, power, bursts->setup.n / 2 + 1);
        } else if (number - burst->last > GAP_FRAMES)
            end_burst(bursts, burst);
    }
}

static void open_new(struct bursts *bursts, const struct other_frame *frame, const struct peak *peak)
{
    for (uint32_t k = 0; k < MAX_OPEN; k++) {
        struct burst *burst = &bursts->open[k];
        if (burst->used)
            continue;
        *burst = (struct burst){
            .used = true, .start = bursts->n_frames, .start_frame = (double)frame->start_frame};
        add_point(burst, bursts->n_frames, peak);
        return;
    }
}

void bursts_push(struct bursts *bursts, const struct other_frame *frame, const struct found_sink *sink)
{
    struct peak peaks[MAX_PEAKS];
    bursts->sink = sink;
    bursts->known_frame = frame->start_frame + frame->n - 1;
    if ((double)bursts->n_frames * bursts->setup.frame_s < 0.5) {
        learn_first(bursts, frame->power);
        bursts->n_frames++;
        return;
    }
    uint32_t n = find_peaks(bursts, frame->power, peaks);
    carry_on(bursts, frame->power, peaks, n);
    for (uint32_t i = 0; i < n; i++)
        if (!peaks[i].taken)
            open_new(bursts, frame, &peaks[i]);
    if (bursts->block.n > 0 &&
        (double)frame->start_frame > bursts->block.end_frame + (GAP_FRAMES + 3) * (double)bursts->setup.n)
        end_block(bursts);
    learn(bursts, frame->power);
    bursts->n_frames++;
}

bool bursts_hold(const struct bursts *bursts, const struct found_call *call)
{
    for (uint32_t k = 0; k < MAX_OPEN; k++) {
        const struct burst *burst = &bursts->open[k];
        double hz = burst->last_bin * bursts->setup.bin_hz;
        if (burst->used && burst->n * bursts->setup.frame_s >= HOLD_S &&
            burst->start_frame <= call->end_frame &&
            burst->ratio >= burst->n * units_power_ratio(call->snr_db + HOLD_DB) &&
            call->high_hz >= hz / HOLD_RATIO && call->low_hz <= hz * HOLD_RATIO)
            return true;
    }
    return false;
}

void bursts_finish(struct bursts *bursts, uint64_t known_frame, const struct found_sink *sink)
{
    bursts->sink = sink;
    bursts->known_frame = known_frame;
    for (uint32_t k = 0; k < MAX_OPEN; k++)
        if (bursts->open[k].used)
            end_burst(bursts, &bursts->open[k]);
    end_block(bursts);
}
