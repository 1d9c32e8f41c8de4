/* From a source to a hydrophone; see path.h. */
#include "scene/path.h"
#include "base/units.h"
#include "sea/sound_speed.h"
#include <math.h>

struct path_sea path_sea_of(const struct scene *scene)
{
    const struct scene_sea *sea = &scene->sea;
    return (struct path_sea){
        .scene = scene,
        .speed_m_s = sea_sound_speed_m_s(sea->temperature_c, sea->salinity, sea->depth_m, sea->latitude_deg),
        .absorption = absorption_of(sea->temperature_c, sea->salinity, sea->depth_m, sea->ph),
    };
}

double path_range_m(const struct path_sea *sea, const struct scene_place *from, uint32_t hydrophone,
                    bool by_surface)
{
    const struct scene_place *to = &sea->scene->hydrophones[hydrophone].place;
    double dx = to->x_m - from->x_m, dy = to->y_m - from->y_m;
    double dz = by_surface ? to->z_m + from->z_m : to->z_m - from->z_m;
    return fmax(1.0, sqrt(dx * dx + dy * dy + dz * dz));
}

static double range_at(const struct path_sea *sea, const struct scene_track *track, uint32_t hydrophone,
                       bool by_surface, double time_s)
{
    struct scene_place place = scene_track_at(track, time_s);
    return path_range_m(sea, &place, hydrophone, by_surface);
}

double path_retarded_range_m(const struct path_sea *sea, const struct scene_track *track, uint32_t hydrophone,
                             bool by_surface, double time_s)
{
    /* Each round divides the error by the Mach number: below 1e-9 m after three. */
    double range_m = range_at(sea, track, hydrophone, by_surface, time_s);
    for (int i = 0; i < 3 && track->speed_m_s != 0; i++)
        range_m = range_at(sea, track, hydrophone, by_surface, time_s - range_m / sea->speed_m_s);
    return range_m;
}

/* One sound of an emission (all of it, or one pulse) on its way along one path. */
struct way {
    double start_range_m, end_range_m;
    double arrives_s, ends_s; /* at the hydrophone */
};

static struct way way_of(const struct path_sea *sea, const struct emission *emission, double given_s,
                         double length_s, uint32_t hydrophone, bool by_surface)
{
    double end_s = given_s + length_s;
    if (emission->reach != REACH_SEA)
        return (struct way){1, 1, given_s, end_s};
    struct way way;
    way.start_range_m = range_at(sea, &emission->track, hydrophone, by_surface, given_s);
    way.end_range_m = emission->track.speed_m_s == 0
                          ? way.start_range_m
                          : range_at(sea, &emission->track, hydrophone, by_surface, end_s);
    way.arrives_s = given_s + way.start_range_m / sea->speed_m_s;
    way.ends_s = end_s + way.end_range_m / sea->speed_m_s;
    return way;
}

void path_heard(const struct path_sea *sea, const struct emission *emission, uint32_t hydrophone,
                double *out_start_s, double *out_end_s)
{
    double last_s = emission->n_pulses > 0 ? emission->pulse_s[emission->n_pulses - 1] : 0;
    double length_s = emission_sound_s(emission);
    bool both = sea->scene->sea.surface_reflection > 0;
    *out_start_s = way_of(sea, emission, emission->start_s, length_s, hydrophone, false).arrives_s;
    *out_end_s = way_of(sea, emission, emission->start_s + last_s, length_s, hydrophone, both).ends_s;
}

static void add_way(const struct path_sea *sea, const struct emission *emission, const struct sound *sound,
                    const struct way *way, double factor, uint32_t hydrophone, uint64_t first_frame,
                    uint32_t n, float *out)
{
    double rate_hz = sea->scene->rate_hz, first_s = (double)first_frame / rate_hz;
    if (way->ends_s <= first_s || way->arrives_s >= first_s + n / rate_hz)
        return;
    double gain[SOUND_MAX_PARTS], middle_m = (way->start_range_m + way->end_range_m) / 2;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        double loss_db = emission->reach == REACH_SEA
                             ? middle_m * absorption_db_m(&sea->absorption, sound_part_hz(sound, k))
                             : 0;
        gain[k] = units_amplitude_ratio(-loss_db);
    }
    double amplitude = factor * emission->amplitude;
    double slowness = sound->length_s / (way->ends_s - way->arrives_s);
    uint64_t variant = emission->reach == REACH_EACH ? hydrophone : 0;
    sound_add(sound, variant, gain, amplitude / way->start_range_m, amplitude / way->end_range_m,
              (first_s - way->arrives_s) * slowness, slowness / rate_hz, n, out);
}

/* A sound that is given at a time, by both paths. */
static void add_sound(const struct path_sea *sea, const struct emission *emission, const struct sound *sound,
                      double given_s, double factor, uint32_t hydrophone, uint64_t first_frame, uint32_t n,
                      float *out)
{
    if (sound->length_s <= 0)
        return;
    double reflection = emission->reach == REACH_SEA ? sea->scene->sea.surface_reflection : 0;
    struct way way = way_of(sea, emission, given_s, sound->length_s, hydrophone, false);
    add_way(sea, emission, sound, &way, factor, hydrophone, first_frame, n, out);
    if (reflection > 0) {
        way = way_of(sea, emission, given_s, sound->length_s, hydrophone, true);
        add_way(sea, emission, sound, &way, -reflection * factor, hydrophone, first_frame, n, out);
    }
}

void path_add(const struct path_sea *sea, const struct emission *emission, uint32_t hydrophone,
              uint64_t first_frame, uint32_t n, float *out)
{
    uint32_t n_sounds = emission->n_pulses > 0 ? emission->n_pulses : 1;
    for (uint32_t i = 0; i < n_sounds; i++) {
        double given_s = emission->start_s + (emission->n_pulses > 0 ? emission->pulse_s[i] : 0);
        if (given_s >= (double)(first_frame + n) / sea->scene->rate_hz)
            break;
        double factor = emission->n_pulses > 0 ? (double)emission->pulse_gain[i] : 1.0;
        add_sound(sea, emission, &emission->sound, given_s, factor, hydrophone, first_frame, n, out);
        add_sound(sea, emission, &emission->tail, given_s, factor, hydrophone, first_frame, n, out);
    }
}
