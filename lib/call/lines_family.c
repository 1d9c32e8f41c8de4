/* What a line belongs to: its harmonics, its class, what both channels hold of it; see lines_family.h. */
#include "call/lines_family.h"
#include <math.h>

#define FAMILY_ERROR 0.006
#define MOST_HARMONICS 12

/* How many lines stand at whole multiples of the one at hz. */
static uint32_t harmonics(const struct line *lines, uint32_t n, double hz, double bin_hz)
{
    uint32_t count = 0;
    for (uint32_t i = 0; i < n; i++) {
        double multiple = round(lines[i].hz / hz);
        count += multiple >= 2 && multiple <= MOST_HARMONICS &&
                 fabs(lines[i].hz - multiple * hz) <= FAMILY_ERROR * lines[i].hz + bin_hz / 2;
    }
    return count;
}

/* Whether the line or one of which it is a multiple leads a family in the class's band. */
static bool is_of_family(const struct call_class *class, const struct line *all, uint32_t n,
                         const struct line *line, double bin_hz)
{
    for (uint32_t i = 0; i < n; i++) {
        double multiple = round(line->hz / all[i].hz);
        if (multiple >= 1 && multiple <= MOST_HARMONICS && all[i].hz >= class->low_hz &&
            all[i].hz <= class->high_hz &&
            fabs(line->hz - multiple * all[i].hz) <= FAMILY_ERROR * line->hz + bin_hz / 2 &&
            harmonics(all, n, all[i].hz, bin_hz) >= class->sound.min_harmonics)
            return true;
    }
    return false;
}

uint32_t family_class(const struct other_setup *setup, const struct line *all, uint32_t n,
                      const struct line *line, double bin_hz)
{
    uint32_t best = setup->n_classes;
    double least = INFINITY;
    for (uint32_t c = 0; c < setup->n_classes; c++) {
        const struct call_class *class = &setup->classes[c];
        const struct other_shape *sound = &class->sound;
        bool fits = sound->min_harmonics > 0 ? is_of_family(class, all, n, line, bin_hz)
                                             : line->hz >= class->low_hz && line->hz <= class->high_hz;
        if (!fits || line->age * LINES_PERIOD_S < sound->min_s ||
            !(sound->manner == MANNER_LINE || (sound->manner == MANNER_PICK_UP && line->same)))
            continue;
        double allowance = log(class->high_hz / class->low_hz) +
                           (sound->manner == MANNER_PICK_UP ? -100.0 : 0.0) -
                           (sound->min_harmonics > 0 ? 50.0 : 0.0);
        if (allowance < least) {
            least = allowance;
            best = c;
        }
    }
    return best;
}

static bool is_multiple(const struct line *line, const struct line *of, double bin_hz)
{
    double multiple = round(line->hz / of->hz);
    return multiple >= 1 && fabs(line->hz - multiple * of->hz) <= FAMILY_ERROR * line->hz / 2 + bin_hz / 2;
}

static bool is_root(const struct line *all, uint32_t i, double bin_hz)
{
    for (uint32_t k = 0; k < i; k++)
        if (is_multiple(&all[i], &all[k], bin_hz))
            return false;
    return true;
}

void family_agree(struct line *all, uint32_t n, double bin_hz)
{
    bool same[LINES_MOST] = {false};
    for (uint32_t i = 0; i < n; i++) {
        double power = 0, alike = 0;
        if (!is_root(all, i, bin_hz))
            continue;
        for (uint32_t k = i; k < n; k++)
            if (is_multiple(&all[k], &all[i], bin_hz)) {
                power += all[k].power;
                alike += all[k].same ? all[k].power : 0;
            }
        for (uint32_t k = i; k < n && 3 * alike >= 2 * power; k++)
            same[k] = same[k] || is_multiple(&all[k], &all[i], bin_hz);
    }
    for (uint32_t i = 0; i < n; i++)
        all[i].same = same[i];
}
