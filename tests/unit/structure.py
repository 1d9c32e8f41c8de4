#!/usr/bin/python3
"""The shape of the project: layers, purity of lib, lengths, the fixed top level. Prints TAP."""
import os
import re
import subprocess
import sys

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
TOP = {"README.md", "DEVELOPERS.md", "LICENSE", "Makefile", "daemon", "lib", "web", "tests", "config", "systemd", "docs"}
LIBC = {"assert.h", "complex.h", "errno.h", "float.h", "inttypes.h", "limits.h", "math.h", "stdalign.h", "stdarg.h",
        "stdatomic.h", "stdbool.h", "stddef.h", "stdint.h", "stdio.h", "stdlib.h", "string.h", "immintrin.h", "smmintrin.h"}
# A library's header, and the only places that may see it.
OWNERS = {"sqlite3.h": ["daemon/ledger/"], "microhttpd.h": ["daemon/http/"], "portaudio.h": ["daemon/capture/"],
          "libconfig.h": ["daemon/settings/"], "sndfile.h": ["daemon/input/recording.c", "daemon/sound/sound_file.c", "daemon/verb/render.c"],
          "sodium.h": ["lib/record/", "daemon/"], "jansson.h": ["lib/record/", "daemon/http/"],
          "fftw3.h": ["lib/dsp/", "lib/level/decidecades.c", "lib/scene/noise.c", "lib/call/pulse_shape.c"],
          "systemd/sd-daemon.h": ["daemon/"],
          "gps.h": ["daemon/feed/"]}
# What lib must not call: print, exit, files, clocks, threads, sockets.
IMPURE = re.compile(r"^(printf|fprintf|vprintf|vfprintf|puts|putchar|perror|exit|_exit|abort|fopen|fopen64|open|open64|"
                    r"read|write|socket|connect|pthread_\w+|clock|clock_gettime|time|gettimeofday|getenv|rand|random|"
                    r"srand|__printf_chk|__fprintf_chk|system|nanosleep|usleep)$")
MAX_FUNCTION, MAX_FILE, MAX_MAIN = 100, 500, 150
results = []


def check(name, problems):
    results.append(not problems)
    for problem in problems:
        print("# " + problem)
    print("%s %d - %s" % ("not ok" if problems else "ok", len(results), name))


def sources(*folders):
    for folder in folders:
        for path, _, files in os.walk(folder):
            for name in sorted(files):
                if name.endswith((".c", ".h")):
                    yield os.path.join(path, name)


def includes(path):
    with open(path) as file:
        return re.findall(r'^#include [<"]([^>"]+)[>"]', file.read(), re.M)


def layering():
    problems = []
    for path in sources("lib", "daemon"):
        for header in includes(path):
            for owned, places in OWNERS.items():
                if header == owned and not any(path.startswith(place) for place in places):
                    problems.append("%s includes %s, which belongs to %s" % (path, header, ", ".join(places)))
            if path.startswith("lib/") and header not in LIBC and header not in OWNERS and \
                    not os.path.exists("lib/" + header):
                problems.append("%s includes %s, which is not of lib" % (path, header))
    return problems


def purity():
    problems = []
    output = subprocess.run(["nm", "-A", BUILD + "/libhushwatch.a"], capture_output=True, text=True, check=True).stdout
    sanitized = "sanitize" in output or "__asan" in output or "__tsan" in output
    for line in output.splitlines():
        match = re.match(r"^[^:]+:([^:]+):\s*(?:[0-9a-f]+ )?\s*(\w) (\S+)", line)
        if not match:
            continue
        name, kind, symbol = match.groups()
        if kind == "U" and IMPURE.match(symbol.split("@")[0]):
            problems.append("%s calls %s" % (name, symbol))
        if kind in "BbDC" or (kind == "d" and not symbol.startswith(".")):
            if not sanitized:
                problems.append("%s has the writable variable %s" % (name, symbol))
    return problems


def relative_read_only(problems):
    """Tables of pointers are writable only to the dynamic loader (section .data.rel.ro)."""
    keep = []
    for problem in problems:
        symbol = problem.split(" ")[-1]
        table = subprocess.run("objdump -t %s/libhushwatch.a | grep -F %s | grep -c data.rel.ro" % (BUILD, symbol),
                               shell=True, capture_output=True, text=True).stdout.strip()
        if "writable" not in problem or table in ("", "0"):
            keep.append(problem)
    return keep


def lengths():
    problems, long_functions = [], 0
    for path in sources("lib", "daemon"):
        with open(path) as file:
            lines = file.read().splitlines()
        if len(lines) > MAX_FILE:
            problems.append("%s has %d lines; at most %d" % (path, len(lines), MAX_FILE))
        if any(re.match(r"^int main\(", line) for line in lines) and len(lines) > MAX_MAIN:
            problems.append("%s has a main and %d lines; at most %d" % (path, len(lines), MAX_MAIN))
        start = None
        for number, line in enumerate(lines, 1):
            if line == "{":
                start = number
            elif line == "}" and start:
                if number - start > MAX_FUNCTION:
                    problems.append("%s:%d a function of %d lines; at most %d" % (path, start, number - start, MAX_FUNCTION))
                long_functions += number - start > 50
                start = None
    print("# figure functions over 50 lines: %d" % long_functions)
    return problems


def top_level():
    files = subprocess.run(["git", "ls-files"], capture_output=True, text=True).stdout.splitlines()
    stray = {f.split("/")[0] for f in files} - TOP
    return ["%s stands at the top level" % s for s in sorted(stray) if not s.startswith(".")]


def web_size():
    with open(BUILD + "/generated/web.c") as file:  # as they are served
        size = file.read().count("0x")
    print("# figure pages together: %d bytes" % size)
    return ["the pages have %d bytes; at most %d" % (size, 150 * 1024)] if size > 150 * 1024 else []


def machine_paths():
    output = subprocess.run(["git", "grep", "-nIE", r"/work/|/root/", "--", ".", ":!LICENSE", ":!tests/unit/structure.py"],
                            capture_output=True, text=True).stdout
    return output.splitlines()


check("includes keep the layers", layering())
check("lib is pure", relative_read_only(purity()))
check("files and functions keep their lengths", lengths())
check("the top level is the fixed set", top_level())
check("the pages are small", web_size())
check("no path of a machine stands in the project", machine_paths())
print("1..%d" % len(results))
sys.exit(0 if all(results) else 1)
