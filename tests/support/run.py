#!/usr/bin/python3
"""Runs the test programs and scripts and counts their TAP lines.

run.py --build DIR [--short | --long] [FILTER ...]

Every C file of a test folder is a program under DIR/tests, every .sh and .py there a script; each prints TAP
("ok 1 - name", "not ok 2 - name", "ok 3 # SKIP why"). A program that prints no TAP line, or ends with another exit
code than 0, counts as a failure. A skip that tests/support/may-skip.txt does not name fails. FILTER words are parts of
paths: "unit", "replay/humpback". The environment says HUSHWATCH_BUILD, HUSHWATCH_SHARED and, with --short or --long,
HUSHWATCH_LENGTH=short | long (else "check")."""
import argparse
import concurrent.futures
import os
import re
import subprocess
import sys
import time

FOLDERS = ["unit", "reference", "scenario", "replay", "system", "browser"]
ALONE = ["system", "browser"]  # they measure deadlines: one at a time
LIMIT_S = {"short": 900, "check": 420, "long": 1200}
TAP = re.compile(r"^(ok|not ok)\b\s*(\d+)?\s*(?:-\s*)?(.*?)\s*(?:#\s*(SKIP)\b\s*(.*))?$", re.IGNORECASE)

RERUN = re.compile(r"^# rerun (\d+) of (\d+) ledgers identical$")


def discover(build, filters):
    found = []
    for folder in FOLDERS:
        for name in sorted(os.listdir(os.path.join("tests", folder))) if os.path.isdir("tests/" + folder) else []:
            path = os.path.join("tests", folder, name)
            if name.endswith(".c") and folder != "browser":
                command = [os.path.join(build, path[:-2])]
            elif name.endswith(".sh"):
                command = ["sh", path]
            elif name.endswith(".py"):
                command = ["/usr/bin/python3", path]
            else:
                continue
            if not filters or any(f in path for f in filters):
                found.append((folder, path, command))
    return found


def run_one(path, command, environment, limit):
    start = time.monotonic()
    try:
        done = subprocess.run(command, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, env=environment, timeout=limit)
        code, output = done.returncode, done.stdout.decode("utf-8", "replace")
    except subprocess.TimeoutExpired as error:
        code, output = "time limit of %d s" % limit, (error.stdout or b"").decode("utf-8", "replace")
    except OSError as error:
        code, output = str(error), ""
    return path, code, output, time.monotonic() - start


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--build", default="build")
    parser.add_argument("--short", action="store_true")
    parser.add_argument("--long", action="store_true")
    parser.add_argument("filters", nargs="*")
    options = parser.parse_args()
    length = "short" if options.short else "long" if options.long else "check"
    environment = dict(os.environ, HUSHWATCH_BUILD=os.path.abspath(options.build), HUSHWATCH_LENGTH=length,
                       HUSHWATCH_SHARED=os.path.abspath("../shared"), CMOCKA_MESSAGE_OUTPUT="TAP",
                       PYTHONDONTWRITEBYTECODE="1", ASAN_OPTIONS="detect_leaks=1:abort_on_error=0",
                       LSAN_OPTIONS="suppressions=" + os.path.abspath("tests/support/leaks.supp") + ":print_suppressions=0",
                       UBSAN_OPTIONS="print_stacktrace=1", TSAN_OPTIONS="halt_on_error=0:exitcode=66")
    with open("tests/support/may-skip.txt") as allowed_file:
        allowed = [line.split("#")[0].strip() for line in allowed_file]
    passed, failed, skipped = 0, 0, 0
    same, ledgers = 0, 0  # ledgers that were derived again
    failures = []

    def take(result):
        nonlocal passed, failed, skipped, same, ledgers
        path, code, output, seconds = result
        ok, bad, skip = 0, [], 0
        for line in output.splitlines():
            again = RERUN.match(line)
            if again:
                same, ledgers = same + int(again.group(1)), ledgers + int(again.group(2))
            match = TAP.match(line)
            if not match:
                continue
            name, is_skip = (match.group(3) or "").strip(), match.group(4)
            if match.group(1).lower() == "not ok":
                bad.append(name)
            elif is_skip:
                name = name or (match.group(5) or "").strip()
                if any(a and a in path + ": " + name + " " + (match.group(5) or "") for a in allowed):
                    skip += 1
                else:
                    bad.append(name + " (skipped, and not on the list)")
            else:
                ok += 1
        if code != 0 and not bad:
            bad.append("ended with %s" % code)
        if not ok and not bad and not skip:
            bad.append("printed no test line")
        passed, failed, skipped = passed + ok, failed + len(bad), skipped + skip
        print("%-48s %4d ok %3d failed %3d skipped %7.1f s" % (path, ok, len(bad), skip, seconds), flush=True)
        if bad:
            failures.append(path)
            print("\n".join("    " + line for line in output.splitlines()[-60:]))
            for name in bad:
                print("    FAILED %s: %s" % (path, name), flush=True)
        elif any(line.startswith("# figure") for line in output.splitlines()):
            print("\n".join("    " + line[2:] for line in output.splitlines() if line.startswith("# figure")), flush=True)

    tests = discover(options.build, options.filters)
    together = [t for t in tests if t[0] not in ALONE]
    alone = [t for t in tests if t[0] in ALONE]
    with concurrent.futures.ThreadPoolExecutor(2) as pool:
        for future in [pool.submit(run_one, p, c, environment, LIMIT_S[length]) for _, p, c in together]:
            take(future.result())
    for _, path, command in alone:
        take(run_one(path, command, environment, LIMIT_S[length]))
    if ledgers:
        print("figure: %d of %d ledgers that the tests made are the same when derived again" % (same, ledgers))
    if failures:
        print("failed in: " + " ".join(failures))
    print("%d passed, %d failed, %d skipped" % (passed, failed, skipped), flush=True)
    return 1 if failed or not passed else 0


sys.exit(main())
