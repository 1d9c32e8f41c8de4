#!/usr/bin/python3
"""The real daemon on a sound device without hardware: a stop is in force, then the device stalls, is unplugged, the capture
program is stopped, the watch thread is blocked. Each is seen within 3 s, the stop stays, and what was lost is unheard time."""
import glob
import os
import signal
import subprocess
import sys
import time

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "support"))
from daemon import Daemon  # noqa: E402
from watch import BUILD, ROOT, ask, check, figure, finish, folder, settings, skip, verify  # noqa: E402

STALL, UNPLUG = (20.0, 24.0), (34.0, 39.0)


def preloaded(place):
    """The fault injector; a sanitizer's own library must come before it."""
    for name in ("asan", "tsan"):
        if os.path.basename(BUILD) == name:
            found = subprocess.run(["gcc", "-print-file-name=lib%s.so" % name], capture_output=True, text=True)
            return found.stdout.strip() + ":" + place + "/block_watch.so"
    return place + "/block_watch.so"


def sound_device(place):
    """An ALSA configuration with one device, and the environment that makes it the only one."""
    with open(place + "/asound.conf", "w") as out:
        out.write('pcm_type.pcm_feed { lib "%s/libasound_module_pcm_feed.so" }\n' % BUILD)
        out.write('pcm.feed { type pcm_feed rate 48000 channels 2 epoch "%s/epoch" stall_at %.1f stall_until %.1f '
                  'unplug_at %.1f replug_at %.1f hint { show on description "feed" } }\n' %
                  (place, STALL[0], STALL[1], UNPLUG[0], UNPLUG[1]))
    return {"ALSA_CONFIG_PATH": "/usr/share/alsa/alsa.conf:%s/asound.conf" % place, "JACK_NO_START_SERVER": "1",
            "PULSE_SERVER": "unix:/nonexistent", "HUSHWATCH_BLOCK": place + "/block",
            "LD_PRELOAD": preloaded(place)}


def device_s(place):
    with open(place + "/epoch") as file:
        return time.monotonic() - int(file.read()) * 1e-9


def wait_until(place, seconds):
    while device_s(place) < seconds:
        time.sleep(0.02)


def is_deaf(state):
    return any("CANNOT HEAR" in fault for fault in state["faults"])


def stop_is_in_force(daemon, name):
    advice = daemon.advice("crew") or {}
    check("%s: the stop is still in force" % name, advice.get("advice") == "stop", advice)


def bring_to_a_stop(daemon):
    for fields in ({"kind": "sign-on", "person": "A. Eyes", "watch": "visual"},
                   {"kind": "sign-on", "person": "B. Ears", "watch": "acoustic"},
                   {"kind": "job", "person": "C. Crew", "job": "pile 1", "answer": "open"}):
        status, answer = daemon.note(**fields)
        if status != 200:
            check("a note is taken", False, (fields, answer))
    ready = daemon.wait_for(lambda s: s["phase"]["release_possible"], 12)
    check("the pre-watch accrues on live sound", ready, daemon.state()["phase"])
    daemon.note(kind="release", person="A. Eyes")
    daemon.note(kind="source state", person="C. Crew", source_state="soft start")
    daemon.note(kind="sighting", person="A. Eyes", group="porpoise", distance_m=100)
    stop = daemon.wait_for(lambda s: (daemon.advice("crew", s) or {}).get("advice") == "stop", 8)
    check("a sighting close by brings a stop", stop, daemon.state()["advice"][:3])


def seen_and_heard_again(daemon, place, name, begins, ends):
    wait_until(place, begins)
    deaf = daemon.wait_for(is_deaf, 3.5, 0.05)
    figure("%s: seen after %.1f s" % (name, device_s(place) - begins))
    check("%s is seen within 3 s" % name, deaf and device_s(place) - begins <= 3.0, daemon.state()["faults"])
    stop_is_in_force(daemon, name)
    wait_until(place, ends)
    again = daemon.wait_for(lambda s: not is_deaf(s), 6, 0.05)
    figure("%s: listening again %.1f s after its return" % (name, device_s(place) - ends))
    check("%s: listening again within 5 s of its return" % name, again and device_s(place) - ends <= 5.0,
          daemon.state()["streams"])


def stopped_capture(daemon, place):
    children = subprocess.run(["pgrep", "-P", str(daemon.process.pid), "hushwatch-captu"], capture_output=True, text=True)
    pid = int(children.stdout.split()[0])
    start = time.monotonic()
    os.kill(pid, signal.SIGSTOP)
    deaf = daemon.wait_for(is_deaf, 3.5, 0.05)
    figure("capture program stopped: seen after %.1f s" % (time.monotonic() - start))
    check("a stopped capture program is seen within 3 s", deaf and time.monotonic() - start <= 3.0)
    stop_is_in_force(daemon, "a stopped capture program")
    check("another one takes its place", daemon.wait_for(lambda s: not is_deaf(s), 7))


def blocked_watch(daemon, place):
    open(place + "/block", "w").close()
    time.sleep(0.5)
    first, start = daemon.state()["watch_s"], time.monotonic()
    time.sleep(2.0)
    still = daemon.state()["watch_s"] == first
    stop_is_in_force(daemon, "a blocked watch thread")
    os.unlink(place + "/block")
    check("a blocked watch thread is seen by watch time that stands still", still)
    check("it goes on afterwards and catches up", daemon.wait_for(
        lambda s: s["watch_s"] > first + (time.monotonic() - start) - 1.0, 8), daemon.state()["watch_s"])


def live(place):
    subprocess.run(["gcc", "-O2", "-shared", "-fPIC", "-o", place + "/block_watch.so",
                    ROOT + "/tests/support/block_watch.c"], check=True)
    config = settings(place + "/site.cfg", permit="tests/system/seconds-permit.cfg",
                      stream='name = "hydrophones"; input = "device"; device = "feed"; rate_hz = 48000; latency_s = 0.2;',
                      channels='{ role = "both"; }, { role = "both"; }', more="pages = { port = 0; }; silence_s = 600;"
                           # The device plays a frame counter, which is no sea: nothing that it sounds like may count.
                           " contact = { look_evidence = 90.0; act_evidence = 95.0; };")
    daemon = Daemon(config, sound_device(place))
    with daemon:
        check("the device is heard", daemon.wait_for(lambda s: s["streams"][0]["hearing"], 10), daemon.errors())
        bring_to_a_stop(daemon)
        seen_and_heard_again(daemon, place, "a stall", *STALL)
        stopped_capture(daemon, place)
        seen_and_heard_again(daemon, place, "an unplugged device", *UNPLUG)
        if os.path.basename(BUILD) == "tsan":  # its own interceptor takes the wait before the injector sees it
            skip("a blocked watch thread", "skipped: the injector does not reach under ThreadSanitizer")
        else:
            blocked_watch(daemon, place)
        seconds, code = daemon.terminate()
        check("SIGTERM ends it in under 1 s", seconds < 1.0 and code == 0, (seconds, code, daemon.errors()))
    ledger = place + "/watch.ledger"
    gaps = ask(ledger, "SELECT sum(end_s - start_s) FROM unheard WHERE cause = 'gap' AND channel = 0")[0][0] or 0
    least = STALL[1] - STALL[0] + UNPLUG[1] - UNPLUG[0]
    figure("unheard time of a stall, a stopped program and an absence: %.1f s" % gaps)
    check("what was lost is unheard time", gaps >= least - 0.5, gaps)
    check("the ledger tells the stream's health", len(ask(ledger, "SELECT seq FROM entry WHERE kind = 'health'")) >= 4)
    check("the ledger verifies", verify(ledger).returncode == 0)


with folder() as place_of_test:
    live(place_of_test)
finish()
