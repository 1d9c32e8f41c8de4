#include "capture/options.h"
#include "flow.h"
#include <errno.h>
#include <getopt.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>

#define MAX_RATE_HZ 384000.0 /* PortAudio 19.6.0, src/common/pa_front.c, SampleRateIsValid */
#define MIN_RATE_HZ 1000.0
#define MIN_LATENCY_S 0.2
#define MAX_LATENCY_S 5.0

const char capture_usage[] =
    "usage: hushwatch-capture --list\n"
    "       hushwatch-capture --memory FD --device NAME_OR_NUMBER --rate HZ --channels N [--latency S] "
    "[--parent PID]\n"
    "\n"
    "Puts the sound of a device into the ring in shared memory that hushwatchd made, until it is ended.\n"
    "hushwatchd starts it; people use --list to see which devices there are.\n"
    "\n"
    "  --list       the devices with inputs: number, name, input channels, default rate in Hz\n"
    "  --memory     number of the open file that holds the ring\n"
    "  --device     a device's number, its name, or a part of its name that no other has\n"
    "  --rate       1000 to 384000 Hz\n"
    "  --channels   1 to 16\n"
    "  --latency    of the device's buffer, 0.2 to 5 s (default 0.2)\n"
    "  --parent     process without which this one ends\n"
    "\n"
    "Exit: 2 wrong use, unknown device, or a rate or channel count that the device does not have;\n"
    "      3 the device or the sound system failed.\n";

static bool read_number(const char *name, const char *text, double min, double max, double *out)
{
    char *end;
    errno = 0;
    double value = strtod(text, &end);
    if (errno || end == text || *end || !(value >= min && value <= max)) {
        fprintf(stderr, "hushwatch-capture: --%s %s: allowed are %.10g to %.10g\n", name, text, min, max);
        return false;
    }
    *out = value;
    return true;
}

static bool read_option(int option, const char *value, struct capture_options *out)
{
    double number = 0;
    bool good = true;
    switch (option) {
    case 'h':
        out->help = true;
        break;
    case 'l':
        out->list = true;
        break;
    case 'd':
        out->device = value;
        break;
    case 'm':
        good = read_number("memory", value, 0, INT_MAX, &number);
        out->memory_fd = (int)number;
        break;
    case 'p':
        good = read_number("parent", value, 1, INT_MAX, &number);
        out->parent = (pid_t)number;
        break;
    case 'r':
        good = read_number("rate", value, MIN_RATE_HZ, MAX_RATE_HZ, &out->rate_hz);
        break;
    case 'c':
        good = read_number("channels", value, 1, FLOW_MAX_CHANNELS, &number);
        out->n_channels = (uint32_t)number;
        break;
    case 't':
        good = read_number("latency", value, MIN_LATENCY_S, MAX_LATENCY_S, &out->latency_s);
        break;
    default:
        good = false;
    }
    return good;
}

enum status capture_options_read(int argc, char **argv, struct capture_options *out)
{
    static const struct option known[] = {{"help", no_argument, NULL, 'h'},
                                          {"list", no_argument, NULL, 'l'},
                                          {"memory", required_argument, NULL, 'm'},
                                          {"device", required_argument, NULL, 'd'},
                                          {"rate", required_argument, NULL, 'r'},
                                          {"channels", required_argument, NULL, 'c'},
                                          {"latency", required_argument, NULL, 't'},
                                          {"parent", required_argument, NULL, 'p'},
                                          {NULL, 0, NULL, 0}};
    struct capture_options read = {.memory_fd = -1, .latency_s = MIN_LATENCY_S};
    for (int option; (option = getopt_long(argc, argv, "", known, NULL)) != -1;)
        if (!read_option(option, optarg, &read))
            return STATUS_BAD_ARGUMENT;
    bool complete = read.memory_fd >= 0 && read.device && read.rate_hz > 0 && read.n_channels > 0;
    if (optind < argc || !(read.help || read.list || complete)) {
        fputs("hushwatch-capture: --list, or --memory, --device, --rate and --channels; see --help\n",
              stderr);
        return STATUS_BAD_ARGUMENT;
    }
    *out = read;
    return STATUS_OK;
}
