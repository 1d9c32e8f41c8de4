/* A sound device without hardware: an ALSA plugin whose sound is a frame counter, paced by the monotonic
 * clock.
 *
 *   pcm_type.pcm_feed { lib "libasound_module_pcm_feed.so" }
 *   pcm.feed { type pcm_feed rate 48000 channels 2 epoch "FILE" ... hint { show on description "feed" } }
 *
 * Its sample clock runs on from the epoch, whether anyone listens or not, like that of a real converter. The
 * epoch is a monotonic time in ns in a file, which the first to start the device writes: the clock and its
 * faults go on over new processes. Samples are S16_LE: channel 1 has the low 16 bits of the frame's number,
 * channel 2 the high 16 bits, each further channel the low bits plus its index: 32 bits wrap after 6 hours at
 * 192 kHz.
 *
 * Faults, in seconds since the epoch (0: never):
 *   ppm                      the clock's error in parts per million
 *   stall_at, stall_until    gives nothing and says nothing; what it sampled meanwhile is lost
 *   unplug_at, replug_at     every call fails with ENODEV; what was open at the unplugging stays dead
 *   overrun_at               the hardware says EPIPE once */
#include <alsa/asoundlib.h>
#include <alsa/pcm_external.h>
#include <fcntl.h>
#include <math.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <sys/timerfd.h>
#include <time.h>
#include <unistd.h>

#define BYTES_PER_SAMPLE 2

struct feed {
    snd_pcm_ioplug_t io;
    int timer;
    long rate, channels, ppm;
    double stall_at, stall_until, unplug_at, replug_at, overrun_at;
    const char *epoch_path;
    double epoch_s, started_s; /* started_s is device time */
    bool overrun_done;
    uint64_t base; /* the first frame of this start, among those given */
};

static double monotonic_s(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + (double)t.tv_nsec * 1e-9;
}

/* Reads the epoch, or writes it when there is none yet. */
static int read_epoch(struct feed *feed)
{
    if (feed->epoch_s > 0)
        return 0;
    long long ns = (long long)(monotonic_s() * 1e9);
    int fd = open(feed->epoch_path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
    if (fd >= 0) {
        dprintf(fd, "%lld\n", ns);
        close(fd);
    } else {
        FILE *file = fopen(feed->epoch_path, "re");
        bool good = file && fscanf(file, "%lld", &ns) == 1;
        if (file)
            fclose(file);
        if (!good)
            return -EIO;
    }
    feed->epoch_s = (double)ns * 1e-9;
    return 0;
}

static double device_s(const struct feed *feed)
{
    return monotonic_s() - feed->epoch_s;
}

static uint64_t sampled(const struct feed *feed, double t_s)
{
    return (uint64_t)(t_s * (double)feed->rate * (1 + (double)feed->ppm * 1e-6));
}

static uint64_t stalled(const struct feed *feed)
{
    return sampled(feed, feed->stall_until) - sampled(feed, feed->stall_at);
}

/* How many frames the device has given up to a time: those sampled in a stall are not among them. */
static uint64_t given(const struct feed *feed, double t_s)
{
    if (feed->stall_at <= 0 || t_s < feed->stall_at)
        return sampled(feed, t_s);
    if (feed->stall_until <= 0 || t_s < feed->stall_until)
        return sampled(feed, feed->stall_at);
    return sampled(feed, t_s) - stalled(feed);
}

/* The counter of the k-th frame given. */
static uint64_t counter_of(const struct feed *feed, uint64_t k)
{
    bool after = feed->stall_at > 0 && feed->stall_until > 0 && k >= sampled(feed, feed->stall_at);
    return after ? k + stalled(feed) : k;
}

static bool gone(const struct feed *feed)
{
    double t_s = device_s(feed);
    if (feed->unplug_at <= 0 || t_s < feed->unplug_at)
        return false;
    bool back = feed->replug_at > 0 && t_s >= feed->replug_at;
    return !back || (feed->started_s > 0 && feed->started_s < feed->unplug_at);
}

static int feed_prepare(snd_pcm_ioplug_t *io)
{
    return gone(io->private_data) ? -ENODEV : 0;
}

static int set_timer(struct feed *feed, double period_s)
{
    long ns = period_s > 0 ? (long)(fmin(fmax(period_s, 5e-4), 0.5) * 1e9) : 0;
    struct itimerspec spec = {{0, ns}, {0, ns}};
    return timerfd_settime(feed->timer, 0, &spec, NULL) ? -errno : 0;
}

static int feed_start(snd_pcm_ioplug_t *io)
{
    struct feed *feed = io->private_data;
    if (gone(feed))
        return -ENODEV;
    feed->started_s = device_s(feed);
    feed->base = given(feed, feed->started_s);
    return set_timer(feed, (double)io->period_size / (double)feed->rate / 4);
}

static int feed_stop(snd_pcm_ioplug_t *io)
{
    return set_timer(io->private_data, 0);
}

/* Frames given since the start. */
static uint64_t position(const struct feed *feed)
{
    return given(feed, device_s(feed)) - feed->base;
}

static snd_pcm_sframes_t feed_pointer(snd_pcm_ioplug_t *io)
{
    struct feed *feed = io->private_data;
    if (gone(feed)) {
        snd_pcm_ioplug_set_state(io, SND_PCM_STATE_DISCONNECTED);
        return -ENODEV;
    }
    if (feed->overrun_at > 0 && !feed->overrun_done && device_s(feed) >= feed->overrun_at) {
        feed->overrun_done = true;
        if (feed->started_s < feed->overrun_at)
            return -EPIPE;
    }
    uint64_t now = position(feed);
    if (now - io->appl_ptr > io->buffer_size)
        return -EPIPE;
    return (snd_pcm_sframes_t)(now % io->buffer_size);
}

static snd_pcm_sframes_t feed_transfer(snd_pcm_ioplug_t *io, const snd_pcm_channel_area_t *areas,
                                       snd_pcm_uframes_t offset, snd_pcm_uframes_t n)
{
    struct feed *feed = io->private_data;
    uint64_t first =
        io->appl_ptr + (offset + io->buffer_size - io->appl_ptr % io->buffer_size) % io->buffer_size;
    int16_t *out = (int16_t *)(void *)((char *)areas[0].addr + (areas[0].first + areas[0].step * offset) / 8);
    for (snd_pcm_uframes_t i = 0; i < n; i++) {
        uint64_t k = counter_of(feed, feed->base + first + i);
        for (long c = 0; c < feed->channels; c++)
            *out++ = (int16_t)(uint16_t)(c == 1 ? k >> 16 : k + (uint64_t)c);
    }
    return (snd_pcm_sframes_t)n;
}

static int feed_revents(snd_pcm_ioplug_t *io, struct pollfd *fds, unsigned n, unsigned short *revents)
{
    struct feed *feed = io->private_data;
    uint64_t ticks;
    *revents = 0;
    if (n == 0 || !(fds[0].revents & POLLIN))
        return 0;
    if (read(feed->timer, &ticks, sizeof ticks) < 0)
        return 0;
    if (gone(feed))
        *revents = POLLERR | POLLHUP;
    else if (position(feed) - io->appl_ptr >= io->period_size)
        *revents = POLLIN;
    return 0;
}

static int feed_close(snd_pcm_ioplug_t *io)
{
    struct feed *feed = io->private_data;
    close(feed->timer);
    free(feed);
    return 0;
}

static const snd_pcm_ioplug_callback_t calls = {.prepare = feed_prepare,
                                                .start = feed_start,
                                                .stop = feed_stop,
                                                .pointer = feed_pointer,
                                                .transfer = feed_transfer,
                                                .poll_revents = feed_revents,
                                                .close = feed_close};

static int read_key(struct feed *feed, snd_config_t *node)
{
    struct {
        const char *name;
        long *number;
        double *seconds;
    } keys[] = {{"rate", &feed->rate, NULL},
                {"channels", &feed->channels, NULL},
                {"ppm", &feed->ppm, NULL},
                {"stall_at", NULL, &feed->stall_at},
                {"stall_until", NULL, &feed->stall_until},
                {"unplug_at", NULL, &feed->unplug_at},
                {"replug_at", NULL, &feed->replug_at},
                {"overrun_at", NULL, &feed->overrun_at}};
    const char *id;
    if (snd_config_get_id(node, &id) < 0)
        return -EINVAL;
    if (strcmp(id, "epoch") == 0)
        return snd_config_get_string(node, &feed->epoch_path);
    for (size_t i = 0; i < sizeof keys / sizeof keys[0]; i++)
        if (strcmp(id, keys[i].name) == 0)
            return keys[i].number ? snd_config_get_integer(node, keys[i].number)
                                  : snd_config_get_ireal(node, keys[i].seconds);
    return strcmp(id, "type") == 0 || strcmp(id, "hint") == 0 || strcmp(id, "comment") == 0 ? 0 : -EINVAL;
}

static int set_limits(struct feed *feed)
{
    unsigned access[] = {SND_PCM_ACCESS_RW_INTERLEAVED, SND_PCM_ACCESS_MMAP_INTERLEAVED};
    unsigned format[] = {SND_PCM_FORMAT_S16_LE}, frame = (unsigned)feed->channels * BYTES_PER_SAMPLE;
    const struct {
        int what;
        unsigned min, max;
    } ranges[] = {{SND_PCM_IOPLUG_HW_CHANNELS, (unsigned)feed->channels, (unsigned)feed->channels},
                  {SND_PCM_IOPLUG_HW_RATE, (unsigned)feed->rate, (unsigned)feed->rate},
                  {SND_PCM_IOPLUG_HW_PERIOD_BYTES, 64 * frame, 65536 * frame},
                  {SND_PCM_IOPLUG_HW_PERIODS, 2, 1024}};
    int error = snd_pcm_ioplug_set_param_list(&feed->io, SND_PCM_IOPLUG_HW_ACCESS, 2, access);
    if (error >= 0)
        error = snd_pcm_ioplug_set_param_list(&feed->io, SND_PCM_IOPLUG_HW_FORMAT, 1, format);
    for (size_t i = 0; i < sizeof ranges / sizeof ranges[0] && error >= 0; i++)
        error = snd_pcm_ioplug_set_param_minmax(&feed->io, ranges[i].what, ranges[i].min, ranges[i].max);
    return error;
}

static int open_feed(struct feed *feed, const char *name, snd_pcm_stream_t stream, int mode)
{
    int error = read_epoch(feed);
    if (error < 0)
        return error;
    if (gone(feed))
        return -ENODEV;
    feed->timer = timerfd_create(CLOCK_MONOTONIC, TFD_NONBLOCK | TFD_CLOEXEC);
    if (feed->timer < 0)
        return -errno;
    feed->io.version = SND_PCM_IOPLUG_VERSION;
    feed->io.name = "frame counter";
    feed->io.callback = &calls;
    feed->io.private_data = feed;
    feed->io.poll_fd = feed->timer;
    feed->io.poll_events = POLLIN;
    error = snd_pcm_ioplug_create(&feed->io, name, stream, mode);
    if (error < 0) {
        close(feed->timer);
        return error;
    }
    return 0;
}

SND_PCM_PLUGIN_DEFINE_FUNC(pcm_feed)
{
    (void)root;
    if (stream != SND_PCM_STREAM_CAPTURE)
        return -EINVAL;
    struct feed *feed = calloc(1, sizeof *feed);
    if (!feed)
        return -ENOMEM;
    feed->rate = 48000;
    feed->channels = 2;
    int error = 0;
    snd_config_iterator_t at, next;
    snd_config_for_each(at, next, conf)
    {
        if (error >= 0)
            error = read_key(feed, snd_config_iterator_entry(at));
    }
    if (error >= 0 && (!feed->epoch_path || feed->channels < 1 || feed->channels > 64))
        error = -EINVAL;
    if (error >= 0)
        error = open_feed(feed, name, stream, mode);
    if (error < 0) {
        free(feed);
        return error;
    }
    error = set_limits(feed);
    if (error < 0) {
        snd_pcm_ioplug_delete(&feed->io); /* closes, which frees */
        return error;
    }
    *pcmp = feed->io.pcm;
    return 0;
}
SND_PCM_PLUGIN_SYMBOL(pcm_feed);
