/* Why nothing was found; see listen.h. */
#include "listen/listen_inner.h"
#include <string.h>

/* How many candidates each class rejected, by name; out[class_index][rejection]. */
static void get_rejections(const struct listen *listen, uint64_t out[CATALOGUE_MAX_CLASSES][REJECT_COUNT])
{
    uint64_t one[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    memset(out, 0, sizeof one);
    for (uint32_t i = 0; i < listen->setup.n_channels; i++) {
        if (!listen->ears[i].listens)
            continue;
        memset(one, 0, sizeof one);
        tones_get_rejections(listen->ears[i].tones, one);
        pulses_get_rejections(listen->ears[i].pulses, one);
        for (uint32_t c = 0; c < CATALOGUE_MAX_CLASSES; c++)
            for (uint32_t r = 0; r < REJECT_COUNT; r++)
                out[c][r] += one[c][r];
    }
    for (uint32_t c = 0; c < CATALOGUE_MAX_CLASSES; c++) {
        out[c][REJECT_OWN_SOURCE] += listen->n_hidden[c];
        out[c][REJECT_NOT_AN_ANIMAL] += listen->n_covered[c];
    }
}

/* A rhythm is a machine's where an animal's class listens in its band. */
static bool hears_rhythm(const struct listen *listen, const struct ear *ear, const struct call_class *class)
{
    for (uint32_t c = 0; c < listen->setup.catalogue->n_classes; c++) {
        const struct call_class *animal = &listen->setup.catalogue->classes[c];
        if (animal->low_hz < class->high_hz && animal->high_hz > class->low_hz &&
            pulses_is_hearable(ear->pulses, c))
            return true;
    }
    return false;
}

static bool can_hear(const struct listen *listen, uint32_t class_index)
{
    const struct call_class *class = &listen->setup.catalogue->classes[class_index];
    if (class->sound.manner == MANNER_IMPULSE)
        return listen->measuring.reference > 0;
    if (listen->others && others_can_hear(listen->others, class_index))
        return true;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++) {
        const struct ear *ear = &listen->ears[i];
        if (ear->listens && class->sound.manner == MANNER_RHYTHM && hears_rhythm(listen, ear, class))
            return true;
        if (ear->listens &&
            (tones_can_hear(ear->tones, class_index) || pulses_is_hearable(ear->pulses, class_index)))
            return true;
    }
    return false;
}

static void account_for_impulses(const struct listen *listen, struct class_account *out)
{
    struct impulse_rejections why;
    impulse_finder_get_rejections(listen->ears[listen->measuring.reference - 1].impulses, &why);
    *out = (struct class_account){.name = "impulse",
                                  .hearable = true,
                                  .n_found = listen->n_impulses,
                                  .rejected = {[REJECT_TOO_WEAK] = why.too_weak,
                                               [REJECT_ECHO] = why.echo,
                                               [REJECT_TOO_HIGH] = why.high,
                                               [REJECT_NOT_SUDDEN] = why.slow,
                                               [REJECT_LIKE_A_CALL] = why.call}};
}

uint32_t listen_get_accounts(const struct listen *listen, struct class_account out[LISTEN_MAX_ACCOUNTS])
{
    const struct catalogue *catalogue = listen->setup.catalogue;
    uint64_t rejections[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    get_rejections(listen, rejections);
    for (uint32_t c = 0; c < catalogue->n_classes; c++) {
        memcpy(out[c].name, catalogue->classes[c].name, sizeof out[c].name);
        out[c].group = catalogue->classes[c].group;
        out[c].hearable = can_hear(listen, c);
        out[c].n_found = listen->n_found[c];
        memcpy(out[c].rejected, rejections[c], sizeof out[c].rejected);
    }
    if (listen->measuring.reference == 0)
        return catalogue->n_classes;
    account_for_impulses(listen, &out[catalogue->n_classes]);
    return catalogue->n_classes + 1;
}

enum group_hearing listen_group_hearing(const struct class_account *accounts, uint32_t n, enum group group)
{
    enum group_hearing best = GROUP_VISUAL_ONLY;
    for (uint32_t i = 0; i < n; i++)
        if (accounts[i].group == group && best != GROUP_BY_EAR)
            best = accounts[i].hearable ? GROUP_BY_EAR : GROUP_NOT_CARRIED;
    return best;
}

const char *group_hearing_text(enum group_hearing hearing)
{
    static const char *const names[] = {"by ear", "not carried by the rate", "visual only"};
    return names[hearing];
}
