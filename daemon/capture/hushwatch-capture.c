/* hushwatch-capture: live sound, in a process of its own, because PortAudio can hang for ever or flood its
 * error output when a device dies. The callback copies, stamps and counts, and nothing else; the process
 * never closes a stream, for that can hang too: it is ended by its parent, or leaves by _exit. */
#include "capture/options.h"
#include "capture/shared.h"
#include <pa_linux_alsa.h>
#include <portaudio.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <unistd.h>

#define EXIT_WRONG_USE 2
#define EXIT_FAILED 3
#define PERIODS                                                                                              \
    16 /* the device's buffer in so many pieces: each gives a stamp, and many stamps count exactly */
#define ACTIVE_CHECK_MS 100

static int take(const void *input, void *output, unsigned long n_frames, const PaStreamCallbackTimeInfo *info,
                PaStreamCallbackFlags flags, void *context)
{
    (void)output;
    struct ring_mark stamp =
        capture_stamp(info->currentTime, info->inputBufferAdcTime, (flags & paInputOverflow) != 0);
    if (input && n_frames <= RING_MAX_FRAMES)
        ring_push(context, input, (uint32_t)n_frames, &stamp);
    return paContinue;
}

/* The devices with inputs: a table for people, or all in one line for a message. */
static void list_devices(FILE *out, bool one_line)
{
    unsigned n_listed = 0;
    if (!one_line)
        fprintf(out, "%6s  %8s  %10s  %s\n", "number", "channels", "rate in Hz", "name");
    for (PaDeviceIndex i = 0; i < Pa_GetDeviceCount(); i++) {
        const PaDeviceInfo *device = Pa_GetDeviceInfo(i);
        if (!device || device->maxInputChannels < 1)
            continue;
        if (one_line)
            fprintf(out, "%s %d (%d channels, %.0f Hz) \"%s\"", n_listed ? "," : "", i,
                    device->maxInputChannels, device->defaultSampleRate, device->name);
        else
            fprintf(out, "%6d  %8d  %10.0f  %s\n", i, device->maxInputChannels, device->defaultSampleRate,
                    device->name);
        n_listed++;
    }
    if (n_listed == 0)
        fputs(one_line ? " none" : "There is no device with inputs.\n", out);
}

/* The device with this number, this name, or alone this part of a name; paNoDevice. */
static PaDeviceIndex find_device(const char *wanted)
{
    PaDeviceIndex found = paNoDevice;
    unsigned n_found = 0;
    bool number = *wanted && strspn(wanted, "0123456789") == strlen(wanted);
    for (PaDeviceIndex i = 0; i < Pa_GetDeviceCount(); i++) {
        const PaDeviceInfo *device = Pa_GetDeviceInfo(i);
        if (!device || device->maxInputChannels < 1)
            continue;
        if (number ? atol(wanted) == i : strcmp(device->name, wanted) == 0)
            return i;
        if (!number && strstr(device->name, wanted)) {
            found = i;
            n_found++;
        }
    }
    return n_found == 1 ? found : paNoDevice;
}

/* Starts the stream; 0, or the exit code after saying why. */
static int start(const struct capture_options *options, struct ring *ring, PaStream **stream)
{
    PaStreamParameters input = {.channelCount = (int)options->n_channels, .sampleFormat = paFloat32};
    input.device = find_device(options->device);
    input.suggestedLatency = options->latency_s;
    if (input.device == paNoDevice) {
        fprintf(stderr,
                "hushwatch-capture: no one device with inputs is \"%s\"; known are:", options->device);
        list_devices(stderr, true);
        fputc('\n', stderr);
        return EXIT_WRONG_USE;
    }
    const PaDeviceInfo *device = Pa_GetDeviceInfo(input.device);
    if (device->maxInputChannels < input.channelCount) {
        fprintf(stderr, "hushwatch-capture: device %s has %d input channels, not %u\n", device->name,
                device->maxInputChannels, options->n_channels);
        return EXIT_WRONG_USE;
    }
    PaError error = Pa_OpenStream(stream, &input, NULL, options->rate_hz, paFramesPerBufferUnspecified,
                                  paClipOff | paDitherOff, take, ring);
    if (error == paNoError)
        error = Pa_StartStream(*stream);
    if (error == paNoError)
        return 0;
    const PaHostErrorInfo *host = Pa_GetLastHostErrorInfo();
    fprintf(stderr, "hushwatch-capture: device %s at %.10g Hz with %u channels: %s%s%s\n", device->name,
            options->rate_hz, options->n_channels, Pa_GetErrorText(error),
            error == paUnanticipatedHostError ? ": " : "",
            error == paUnanticipatedHostError ? host->errorText : "");
    return error == paInvalidSampleRate || error == paInvalidChannelCount ? EXIT_WRONG_USE : EXIT_FAILED;
}

int main(int argc, char **argv)
{
    struct capture_options options;
    struct ring ring;
    PaStream *stream;
    if (capture_options_read(argc, argv, &options) != STATUS_OK)
        return EXIT_WRONG_USE;
    if (options.help)
        return fputs(capture_usage, stdout) < 0 ? EXIT_FAILED : 0;
    if (options.parent > 0) {
        prctl(PR_SET_PDEATHSIG, SIGKILL);
        if (getppid() != options.parent)
            return EXIT_FAILED;
    }
    if (!options.list && !capture_map_ring(options.memory_fd, options.n_channels, &ring))
        return EXIT_WRONG_USE;
    setenv("JACK_NO_START_SERVER", "1", 0); /* asking whether there is a JACK server must not start one */
    PaAlsa_SetNumPeriods(PERIODS);
    /* Who asks for the list gets the list: what lies below PortAudio complains at length of every device that
     * the machine does not have. */
    int own_words = dup(STDERR_FILENO);
    if (options.list && !freopen("/dev/null", "w", stderr))
        return EXIT_FAILED;
    PaError error = Pa_Initialize();
    if (error != paNoError) {
        dprintf(own_words, "hushwatch-capture: PortAudio: %s\n", Pa_GetErrorText(error));
        return EXIT_FAILED;
    }
    if (options.list) {
        list_devices(stdout, false);
        fflush(stdout);
        _exit(0);
    }
    int code = start(&options, &ring, &stream);
    while (code == 0) {
        Pa_Sleep(ACTIVE_CHECK_MS);
        if (Pa_IsStreamActive(stream) != 1) {
            fputs("hushwatch-capture: the sound system ended the stream\n", stderr);
            code = EXIT_FAILED;
        }
    }
    _exit(code);
}
