/* A live sound device, by the capture program: started afresh for each attempt, watched by the age of its
 * last block and never by what the sound system says, ended and started again when it is dead. Between, its
 * sound is lost by the clock, and time goes on. */
#include "capture/shared.h"
#include "input/capture_process.h"
#include "input/input.h"
#include "ring/account.h"
#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#define NS_PER_S 1e9
#define WAIT_S 0.25 /* the longest that a read waits, and the pace of gaps while the device is away */
#define LOOK_S 0.01 /* how often a waiting read looks */
#define DEAD_S 1.5  /* without a block for so long, a device is dead: seen in 2 s with time to spare */
#define START_S 3.0 /* a new process may take so long to its first block */
#define OPEN_S 2.0  /* how long opening waits for a first word of the device */
#define BACK_OFF_S 0.25
#define MAX_BACK_OFF_S 1.0 /* with START_S, listening again within 5 s of a device's return */
#define END_S 0.15         /* how long closing waits for the process to go */
#define MIN_LATENCY_S 0.2
#define EXIT_WRONG_USE 2

enum device_state {
    DEVICE_CAPTURING, /* a process is there, or was until now, and its ring is read */
    DEVICE_DRAINING,  /* it is dead; what it left in the ring comes first */
    DEVICE_ENDING,    /* killed, and not gone yet */
    DEVICE_WAITING    /* for the next attempt */
};

struct device {
    char name[128];
    struct capture_plan plan;
    struct capture_process process;
    enum device_state state;
    struct account account;
    struct account_piece piece; /* what is left of the piece at hand */
    struct ring_mark mark;      /* came when the account was full */
    bool has_mark;
    bool started; /* the first read has been */
    bool heard;   /* this process gave a block */
    uint64_t total;
    int64_t started_ns, block_ns; /* of the process; of the last block, or else of the start */
    int64_t next_gap_ns, retry_ns, dead_since_ns;
    double back_off_s;
    uint64_t n_starts;
    char reason[128];
};

static int64_t after(int64_t ns, double seconds)
{
    return ns + (int64_t)(seconds * NS_PER_S);
}

/* Starts a process; when that fails the state says when to try again. */
static enum status start(struct device *device, int64_t now_ns)
{
    enum status status = capture_process_start(&device->process, &device->plan);
    device->heard = false;
    device->started_ns = device->block_ns = now_ns;
    device->n_starts++;
    device->state = status == STATUS_OK ? DEVICE_CAPTURING : DEVICE_ENDING;
    if (status != STATUS_OK)
        snprintf(device->reason, sizeof device->reason, "hushwatch-capture cannot be started: %s",
                 strerror(errno));
    return status;
}

/* The ring is done with: from now on the clock says what is lost. */
static void leave_ring(struct device *device, int64_t now_ns)
{
    account_absent(&device->account, device->total);
    device->piece = (struct account_piece){0};
    device->has_mark = false;
    capture_process_release(&device->process);
    device->next_gap_ns = now_ns;
    device->state = DEVICE_ENDING;
}

/* The device is dead; why, in words. A ring that tells the impossible is left at once. */
static void give_up(struct device *device, int64_t now_ns, const char *why, bool ring_is_good)
{
    if (device->heard || device->n_starts == 1) {
        device->dead_since_ns = device->block_ns;
        device->back_off_s = BACK_OFF_S;
    }
    snprintf(device->reason, sizeof device->reason, "%s", why);
    capture_process_kill(&device->process);
    if (ring_is_good) {
        account_flush(&device->account);
        device->state = DEVICE_DRAINING;
    } else {
        leave_ring(device, now_ns);
    }
}

/* Marks of the ring into the account. STATUS_BAD_FORMAT: they are impossible. */
static enum status take_marks(struct device *device, int64_t now_ns)
{
    struct ring *ring = &device->process.ring;
    for (uint32_t i = 0; i < ring->capacity_marks; i++) {
        uint32_t n = 1;
        if (!device->has_mark) {
            enum status status = ring_get_marks(ring, &device->mark, 1, &n);
            if (status != STATUS_OK || n == 0)
                return status;
            if (device->mark.ns < device->started_ns || device->mark.ns > after(now_ns, 1))
                return STATUS_BAD_FORMAT;
            device->has_mark = true;
            device->heard = true;
            device->block_ns = now_ns;
        }
        enum status status = account_push(&device->account, &device->mark);
        if (status != STATUS_OK)
            return status == STATUS_FULL ? STATUS_OK : status;
        device->has_mark = false;
    }
    return STATUS_OK;
}

static void look_at_capture(struct device *device, int64_t now_ns)
{
    char words[96], why[128];
    uint64_t available;
    bool there = capture_process_is_there(&device->process);
    if (ring_available(&device->process.ring, &available) != STATUS_OK ||
        take_marks(device, now_ns) != STATUS_OK) {
        give_up(device, now_ns, "the capture program's ring tells the impossible", false);
        return;
    }
    double age_s = (double)(now_ns - device->block_ns) / NS_PER_S;
    if (!there) {
        capture_process_get_words(&device->process, words, sizeof words);
        snprintf(why, sizeof why, "%s", *words ? words : "the capture program ended");
        give_up(device, now_ns, why, true);
    } else if (age_s > (device->heard ? DEAD_S : START_S)) {
        give_up(device, now_ns, "the device gives no sound", true);
    } else if (device->heard && !device->account.absent) {
        device->reason[0] = '\0';
    }
}

/* One look at everything; never waits. */
static void look(struct device *device, int64_t now_ns)
{
    capture_process_look(&device->process);
    if (device->state == DEVICE_CAPTURING)
        look_at_capture(device, now_ns);
    if (device->state == DEVICE_ENDING && !capture_process_is_there(&device->process)) {
        device->retry_ns = after(now_ns, device->back_off_s);
        device->back_off_s = fmin(2 * device->back_off_s, MAX_BACK_OFF_S);
        device->state = DEVICE_WAITING;
    }
    if (device->state == DEVICE_WAITING && now_ns >= device->retry_ns)
        start(device, now_ns);
}

/* Throws away up to n frames of the ring; how many went, or a bad status. */
static enum status skip_frames(struct device *device, float *samples, uint32_t max_frames)
{
    uint32_t n = 1;
    while (device->piece.skip > 0 && n > 0) {
        uint32_t most = device->piece.skip < max_frames ? (uint32_t)device->piece.skip : max_frames;
        enum status status = ring_get(&device->process.ring, samples, most, &n);
        if (status != STATUS_OK)
            return status;
        device->piece.skip -= n;
    }
    return STATUS_OK;
}

/* Sound out of the ring: STATUS_OK with a piece, STATUS_END when there is none, STATUS_BAD_FORMAT. */
static enum status take_sound(struct device *device, float *samples, uint32_t max_frames,
                              struct input_piece *out)
{
    struct account_piece *piece = &device->piece;
    for (;;) {
        enum status status = skip_frames(device, samples, max_frames);
        if (status != STATUS_OK || piece->skip > 0)
            return status == STATUS_OK ? STATUS_END : status;
        if (piece->n_frames > 0)
            break;
        if (account_get(&device->account, piece) != STATUS_OK)
            return STATUS_END;
    }
    uint32_t n, most = piece->n_frames < max_frames ? (uint32_t)piece->n_frames : max_frames;
    enum status status = ring_get(&device->process.ring, samples, most, &n);
    if (status != STATUS_OK || n == 0)
        return status == STATUS_OK ? STATUS_END : status;
    out->n_frames = n;
    out->lost_before = piece->lost_before;
    piece->n_frames -= n;
    piece->lost_before = 0;
    device->total += out->lost_before + n;
    return STATUS_OK;
}

/* The ring of a dead process has nothing to give now: leaves it, unless marks were waiting for room. */
static void drain(struct device *device, int64_t now_ns)
{
    bool cut =
        device->piece.skip > 0 || device->piece.n_frames > 0; /* it died between a mark and its frames */
    if (!cut && take_marks(device, now_ns) == STATUS_OK)
        account_flush(&device->account);
    if (cut || device->account.n_pieces == 0)
        leave_ring(device, now_ns);
}

/* What there is to tell now: sound, or the lack of it. */
static enum status take(struct device *device, float *samples, uint32_t max_frames, struct input_piece *out)
{
    int64_t now_ns = capture_now_ns();
    look(device, now_ns);
    if (device->state == DEVICE_CAPTURING || device->state == DEVICE_DRAINING) {
        enum status status = take_sound(device, samples, max_frames, out);
        if (status == STATUS_OK)
            return STATUS_OK;
        if (status != STATUS_END)
            give_up(device, now_ns, "the capture program's ring tells the impossible", false);
        else if (device->state == DEVICE_DRAINING)
            drain(device, now_ns);
    }
    if (!device->account.absent || now_ns < device->next_gap_ns)
        return STATUS_TIMEOUT;
    uint64_t lost = account_declare(&device->account, now_ns);
    device->next_gap_ns = after(now_ns, WAIT_S);
    device->total += lost;
    *out = (struct input_piece){.lost_before = lost};
    return lost > 0 ? STATUS_OK : STATUS_TIMEOUT;
}

static void sleep_s(double seconds)
{
    struct timespec pause = {0, (long)(seconds * NS_PER_S)};
    nanosleep(&pause, NULL);
}

/* The sound that came between opening and the first read is over: the first read begins with the present. */
static void begin(struct device *device, float *samples, uint32_t max_frames)
{
    struct input_piece old;
    bool rest = true;
    for (int i = 0; rest && i < 40 && device->state == DEVICE_CAPTURING; i++) {
        while (device->state == DEVICE_CAPTURING && take(device, samples, max_frames, &old) == STATUS_OK)
            ;
        rest = device->piece.n_frames > 0 || device->account.n_pieces > 0 || account_holds(&device->account);
        if (rest)
            sleep_s(LOOK_S);
    }
    if (device->state == DEVICE_DRAINING)
        leave_ring(device, capture_now_ns());
    device->started = true;
    device->total = 0;
    account_reset(&device->account, device->plan.rate_hz, capture_now_ns());
    if (device->state != DEVICE_CAPTURING)
        account_absent(&device->account, 0);
}

static enum status device_read(void *input, float *samples, uint32_t max_frames, struct input_piece *out)
{
    struct device *device = input;
    if (max_frames == 0)
        return STATUS_BAD_ARGUMENT;
    if (!device->started)
        begin(device, samples, max_frames);
    int64_t until_ns = after(capture_now_ns(), WAIT_S - LOOK_S);
    enum status status = take(device, samples, max_frames, out);
    while (status == STATUS_TIMEOUT && capture_now_ns() < until_ns) {
        sleep_s(LOOK_S);
        status = take(device, samples, max_frames, out);
    }
    return status;
}

/* Waits for a first sign: sound, the program's end, or OPEN_S of nothing. */
static void wait_for_sign(struct device *device)
{
    int64_t until_ns = after(capture_now_ns(), OPEN_S);
    uint64_t available = 0;
    while (capture_process_is_there(&device->process) && available == 0 && capture_now_ns() < until_ns) {
        sleep_s(LOOK_S);
        capture_process_look(&device->process);
        if (ring_available(&device->process.ring, &available) != STATUS_OK)
            return; /* the first read deals with it */
    }
}

static void check(const struct stream_settings *settings, struct problems *problems)
{
    if (*settings->device == '\0')
        problems_add(problems, settings->name, 0, "device",
                     "is missing; allowed: a name or number that hushwatch-capture --list shows");
    if (!(settings->rate_hz >= 1000 && settings->rate_hz <= 384000))
        problems_add(problems, settings->name, 0, "rate_hz",
                     "is %g; allowed: 1000 to 384000 (what PortAudio can)", settings->rate_hz);
    if (settings->n_channels < 1 || settings->n_channels > FLOW_MAX_CHANNELS)
        problems_add(problems, settings->name, 0, "channels", "are %u; allowed: 1 to %d",
                     settings->n_channels, FLOW_MAX_CHANNELS);
    if (!(settings->latency_s >= MIN_LATENCY_S && settings->latency_s <= 5))
        problems_add(problems, settings->name, 0, "latency_s", "is %g; allowed: 0.2 to 5",
                     settings->latency_s);
}

static void device_close(void *input)
{
    struct device *device = input;
    if (!device)
        return;
    capture_process_end(&device->process, END_S);
    free(device);
}

static struct device *create(const struct stream_settings *settings)
{
    struct device *device = calloc(1, sizeof *device);
    if (!device)
        return NULL;
    snprintf(device->name, sizeof device->name, "%s", settings->device);
    device->plan.device = device->name;
    device->plan.rate_hz = settings->rate_hz;
    device->plan.n_channels = settings->n_channels;
    device->plan.latency_s = settings->latency_s;
    device->process.error_fd = -1;
    device->back_off_s = BACK_OFF_S;
    account_reset(&device->account, settings->rate_hz, capture_now_ns());
    return device;
}

static enum status device_open(const struct stream_settings *settings, struct problems *problems, void **out,
                               struct input_facts *out_facts)
{
    unsigned before = problems->count;
    check(settings, problems);
    if (problems->count != before)
        return STATUS_OUT_OF_RANGE;
    struct device *device = create(settings);
    if (!device)
        return STATUS_NO_MEMORY;
    enum status status = start(device, capture_now_ns());
    if (status == STATUS_OK)
        wait_for_sign(device);
    else
        problems_add(problems, settings->name, 0, "device", "%s", device->reason);
    if (status == STATUS_OK && !capture_process_is_there(&device->process) &&
        device->process.exit_code == EXIT_WRONG_USE) {
        char words[CAPTURE_WORDS_SIZE];
        capture_process_get_words(&device->process, words, sizeof words);
        problems_add(problems, settings->name, 0, "device", "%s", *words ? words : "cannot be used");
        status = STATUS_NOT_FOUND;
    }
    if (status != STATUS_OK) {
        device_close(device);
        return status;
    }
    *out_facts = (struct input_facts){.rate_hz = settings->rate_hz,
                                      .n_channels = settings->n_channels,
                                      .live = true,
                                      .start_source = "clock",
                                      .duration_s = NAN};
    *out = device;
    return STATUS_OK;
}

static void device_get_health(void *input, char *out, size_t size)
{
    const struct device *device = input;
    double dead_s = (double)(capture_now_ns() - device->dead_since_ns) / NS_PER_S;
    double ppm = account_ppm(&device->account);
    if (device->reason[0])
        snprintf(out, size, "unheard for %.0f s, attempt %llu: %s", dead_s,
                 (unsigned long long)device->n_starts, device->reason);
    else if (!device->heard)
        snprintf(out, size, "starting");
    else if (isnan(ppm))
        snprintf(out, size, "capturing");
    else
        snprintf(out, size, "capturing, clock %+.0f ppm", ppm);
}

const struct input_kind input_device = {.name = "device",
                                        .needs = {.device = true, .format = true, .most_rate_hz = 384000},
                                        .open = device_open,
                                        .read = device_read,
                                        .close = device_close,
                                        .get_health = device_get_health};
