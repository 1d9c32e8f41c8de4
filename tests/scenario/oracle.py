#!/usr/bin/python3
"""The watch against an independent oracle (tests/support/permit_oracle.py) on random sequences of events under every
permit of config/permits: whether a start is allowed and which clauses hold it back, how much of the pre-watch is done,
which animals count as inside and until when, and what observer and crew are told while the source sounds and in breaks.

HUSHWATCH_LENGTH=short 20, check 150, long 2,500 sequences a permit in one piece; HUSHWATCH_PIECE=K (from 0) takes the
Kth piece, so that 40 pieces of HUSHWATCH_LENGTH=long are 100,000 a permit. HUSHWATCH_PERMIT names one permit alone. In
one sequence of HUSHWATCH_EVERY_MOMENT (200) the oracle looks again at every time that any clause could name after anything
that happened, so that no moment is missed that both sides might have forgotten."""
import json
import os
import random
import subprocess
import sys
import time

sys.path.insert(0, "tests/support")
import permit_oracle as oracle
from permit_day import Day
from sun import check_light
from permit_oracle import MIN, S

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
PROGRAM = os.path.join(BUILD, "tests/support/watch_facts")
COUNT = {"short": 20, "long": 2500}.get(os.environ.get("HUSHWATCH_LENGTH"), 150)
EVERY = int(os.environ.get("HUSHWATCH_EVERY_MOMENT", "200"))
PIECE = int(os.environ.get("HUSHWATCH_PIECE", "0"))
SPECIES = ["", "killer whale", "bottlenose dolphin", "minke whale", "Hector's dolphin", "New Zealand sea lion"]
# Where the sun is looked at: summer and winter of high latitudes, where it does not set or rise, and places where it
# does, some of them at the turn of the year, where closed seasons may begin; (latitude, longitude, day of UTC).
PLACES = [(78.22, 15.65, 1781913600), (78.22, 15.65, 1797811200), (54.5, 7.5, 1774310400), (54.5, 7.5, 1797811200),
          (-20.0, 120.0, 1781481600), (28.5, -90.0, 1777507200), (28.5, -90.0, 1777593600), (41.0, -71.0, 1798588800),
          (41.0, -71.0, 1798675200), (-45.0, 170.0, 1774310400), (66.0, 13.0, 1797811200), (24.0, 120.0, 1777507200)]
DEAF = {0: True, 1: False, 2: False, 3: True, 4: True}  # gap, clipping, own source, dead channel, too quiet
HOURS = 240  # no sequence lasts longer
STATES = ["soft start", "full power", "hold", "reduced", "stopped", "off", "vibro", "drilling", "line turn", "test"]


def durations(p):
    """The times that the permit's clauses name: their edges are what is tried."""
    out = [m["minutes"] for k in ("pre_watches", "clearances", "breaks") for m in p[k]]
    out += [p[k] for k in ("hole_minutes", "deterrent_least", "deterrent_gap", "turn_longest", "small_longest",
                           "outage_diagnose", "outage_extra", "post_minutes")]
    out += [p["good_minutes"], p["good_within_hours"] * 60]
    out += [m["deeper_minutes"] for m in p["clearances"]]
    return sorted({d for d in out if 0 < d < 1e5}) + [0.5, 5]


def distances(p):
    """About each zone's edge, where P(inside) is 0.1, 0.5 and 0.9, from the centre and from the edge."""
    out = [50, 9000]
    for z in p["zones"]:
        if z["radius_m"] < 1e6:
            out += [z["radius_m"] * f for f in (0.3, 0.7, 0.95, 1, 1.1, 1.25, 1.3, 1.6)] + [z["radius_m"] + 20]
    return [round(d) for d in out]


def step(rng, times):
    dice = rng.random()
    if dice < 0.25:
        return rng.randrange(1, 60) * S
    edge = round((1440 if rng.random() < 0.02 else rng.choice(times)) * MIN)
    return edge + rng.choice([0, 0, -S, S, 1000, -1000, 2000]) if dice < 0.75 else \
        round(rng.random() * edge) // 1000 * 1000 + 1000


def event(rng, p, t, n, seen):
    on_watch = rng.choice(["Ann", "Ann", "Bo", "Bo", "Cy", "Dee"])
    groups = rng.sample(p["all_groups"]["groups"], 1) if rng.random() < 0.4 else [seen["group"]]
    dice = rng.random()
    if dice < 0.14:
        ago = rng.choice([0, 1, 3, 20]) * S
        return {"kind": "call", "group": groups[0], "evidence": rng.choice([10, 10, 10, 5]), "end": max(t - ago, 0)}
    if dice < 0.30:
        e = {"kind": "sighting", "person": on_watch, "group": groups[0]}
        if rng.random() < 0.75:
            e["distance_m"] = rng.choice(distances(p))
        if rng.random() < 0.15:
            e["calf"] = True
        if rng.random() < 0.2:
            e["number"] = rng.choice([2, 3, 5, 6, 10])
        if rng.random() < 0.25:
            e["species"] = rng.choice(SPECIES)
        if rng.random() < 0.12:
            e["leaving"] = True
        if rng.random() < 0.15:
            e["contact"] = rng.randrange(1, 4)
        return e
    if dice < 0.37:
        return {"kind": "distance", "person": on_watch, "contact": rng.randrange(1, 4),
                "distance_m": rng.choice(distances(p))}
    if dice < 0.45:
        return {"kind": "verdict", "person": on_watch, "contact": rng.randrange(1, 4),
                "verdict": rng.choice(["confirm", "dismiss", "left"])}
    if dice < 0.55:
        return {"kind": "release", "person": on_watch}
    if dice < 0.75:
        e = {"kind": "source", "state": rng.choice(STATES[:6] * 3 + STATES[6:])}
        if e["state"] == "line turn" and rng.random() < 0.5:
            e["minutes"] = rng.choice([10, 20, 30, 40, 41, 60])
        return e
    if dice < 0.80:
        e = {"kind": "weather"}
        e[rng.choice(["depth_m", "visibility_m", "sea_state"])] = 0
        for k, choice in (("depth_m", [30, 200, 200.1, 100, 500]), ("visibility_m", [400, 500, 1500, 1499, 5000]),
                          ("sea_state", [1, 3, 3.5, 4, 6])):
            if k in e or rng.random() < 0.2:
                e[k] = rng.choice(choice)
        return e
    if dice < 0.84 and (p["deterrent"] or p["quieting"]):
        return {"kind": rng.choice(["deterrent"] * p["deterrent"] + ["quieting"] * p["quieting"]),
                "answer": rng.choice(["on", "on", "off"])}
    if dice < 0.89:
        long = rng.choice([0.5, 5, 10, 12, 40, 700])
        cause = rng.choice([0, 0, 0, 1, 2, 3, 3, 4])
        return {"kind": "unheard", "start": max(0, t - round(long * S)), "end": t - rng.choice([0, 0, 1]) * 10**8,
                "channel": rng.choice([0, 0, 1, 2]), "cause": cause, "deaf": DEAF[cause]}
    if dice < 0.91:
        return {"kind": "override", "person": "Dee", "answer": "on", "reason": rng.choice(list(oracle.REASONS))}
    if dice < 0.92:
        return {"kind": "override", "person": "Dee", "answer": "off"}
    if dice < 0.94:
        return {"kind": "restart"}
    if dice < 0.96:
        return {"kind": "job", "job": "pile 1", "answer": rng.choice(["open", "open", "close"])}
    return {"kind": rng.choice(["sign-on", "sign-off"]), "person": rng.choice(["Ann", "Bo", "Cy"]),
            "watch": rng.choice(["visual", "acoustic", "visual", "acoustic", "crew"])}


def pieces(rng, t, cause):
    """A stretch that is not heard, as a stream tells it: pieces of 10 s, each known at its end."""
    return [{"kind": "unheard", "start": t + i * 10 * S, "end": t + (i + 1) * 10 * S, "channel": 0, "cause": cause,
             "deaf": DEAF[cause], "at": t + (i + 1) * 10 * S} for i in range(rng.choice([2, 3, 6, 20]))]


def burst(rng, t):
    """Impulses as a source makes them; some are known later than they were heard."""
    step, lag = rng.choice([1, 2, 8, 20]) * S, rng.choice([0, 0, S // 2])
    return [{"kind": "impulse", "at": t + i * step + lag, "time": t + i * step} for i in range(rng.choice([1, 2, 2, 3, 5]))]


def hole(rng, p, t):
    """Two things in a row that keep the watch from being kept: nobody looks, the program is down, nothing is heard."""
    limit = p["hole_minutes"] if p["hole_minutes"] > 0 else p["breaks"][-1]["minutes"]
    out = []
    for what in rng.sample(["away", "down", "deaf", "deaf"], 2):
        lasts = round(min(limit, 60) * rng.choice([0.2, 0.45, 0.5, 0.55, 0.8, 0.99]) * 60) * S
        if what == "away":
            out += [{"kind": "sign-off", "person": "Ann", "watch": "visual", "at": t},
                    {"kind": "sign-on", "person": "Ann", "watch": "visual", "at": t + lasts}]
        elif what == "down":
            out.append({"kind": "restart", "at": t + lasts, "down": t})
        else:
            out.append({"kind": "unheard", "start": t, "end": t + lasts, "channel": 0, "cause": 0, "deaf": True,
                        "at": t + lasts})
        t += lasts
    return out


def prepared(rng, p, add, t):
    """The watch that the permit needs, often complete, so that starts are reached. When it is done."""
    for person, watch in (("Ann", "visual"), ("Bo", "acoustic"), ("Cy", "visual"), ("Eli", "acoustic")):
        if rng.random() < (0.95 if person in ("Ann", "Bo") else 0.4 + 0.5 * (p["least_visual"] > 1)):
            add({"kind": "sign-on", "person": person, "watch": watch}, t)
    if rng.random() < 0.7:
        add({"kind": "job", "job": "pile 1", "answer": "open"}, t)
    if p["quieting"] and rng.random() < 0.8:
        add({"kind": "quieting", "answer": "on"}, t)
    if rng.random() < 0.6:
        need = max(r["minutes"] for r in p["pre_watches"])
        if p["deterrent"] and rng.random() < 0.9:
            t += round(max(0, need - p["deterrent_least"]) * MIN)
            add({"kind": "deterrent", "answer": "on"}, t)
            t += round(p["deterrent_least"] * MIN)
        else:
            t += round(need * MIN)
        if rng.random() < 0.8:
            add({"kind": "release", "person": "Ann"}, t)
            if rng.random() < 0.7:
                t += rng.randrange(1, 20) * S
                add({"kind": "source", "state": "soft start"}, t)
    return t


def sequence(rng, p, suns):
    """5 to 20 events, and now and then a burst of impulses or a stretch of deafness in pieces."""
    s = dict(rng.choice(suns), depth=rng.choice([None, 30, 200, 201]), half=rng.choice([0, 20]),
             channels=rng.choice([1, 1, 2]), events=[])
    times, seen = durations(p), {"group": rng.choice(p["all_groups"]["groups"])}

    def add(e, at):
        s["events"].append(dict(e, at=at))
    t = prepared(rng, p, add, 0)
    for n in range(rng.randrange(5, 14)):
        before = t
        t += step(rng, times)
        if t > (HOURS - 48) * 60 * MIN:
            break
        dice = rng.random()
        if dice < 0.12:
            many = (burst(rng, t) if dice < 0.08 else pieces(rng, t, rng.choice([0, 3])) if dice < 0.1 else
                    hole(rng, p, t))
            s["events"] += many
            t = many[-1]["at"]
            continue
        e = event(rng, p, t, n, seen)
        if e["kind"] == "restart":
            e["down"] = rng.randrange(before, t) // 1000 * 1000 if t > before + 1000 else t
            e["down"] = max(before, e["down"])
        if e["kind"] == "unheard":
            e["end"] = max(e["end"], e["start"] + 1000)
            e["end"] = min(e["end"], t)
            if e["end"] <= e["start"]:
                continue
        seen["group"] = e.get("group", seen["group"])
        add(e, t)
    edges = [t + round(m * MIN) for m in times] + [at for at, _ in s["lights"][1:] if t < at < t + 300 * MIN]
    s["checks"] = sorted({at + d for at in rng.sample(edges, min(4, len(edges))) for d in (0, 1000)})
    return s


def lines(s, groups):
    out = ["new %s %g %s %d" % ("-" if s["depth"] is None else s["depth"], s["half"], s["sun"], s["channels"])]
    checks = s["checks"]
    for i, e in enumerate(s["events"]):
        at, kind = e["at"], e["kind"]
        if kind == "call":
            out.append("c %d %d %g %d" % (at, groups.index(e["group"]), e["evidence"], e["end"]))
        elif kind == "unheard":
            out.append("u %d %d %d %d %d" % (at, e["start"], e["end"], e["channel"], e["cause"]))
        elif kind == "impulse":
            out.append("i %d %d" % (at, e["time"]))
        elif kind == "restart":
            out.append("r %d %d" % (at, e["down"]))
        else:
            name = {"source": "source state", "override": "safety override"}.get(kind, kind)
            fields = {k: v for k, v in e.items() if k not in ("at", "kind") and v not in (None, "")}
            if "state" in fields:
                fields["source_state"] = fields.pop("state")
            if kind in ("verdict", "override"):
                fields["text"] = "reason"
            out.append("n %d %s|%s" % (at, name, "|".join(
                "%s=%s" % (k, {True: "true"}.get(v, v) if isinstance(v, bool) else v) for k, v in fields.items())))
        if i + 1 == len(s["events"]) or s["events"][i + 1]["at"] > at:
            out.append("? %d" % at)
    last = s["events"][-1]["at"]
    out += ["? %d" % c for c in checks if c > last]
    return out


def expected(s, p, answers):
    """(when, what the oracle says, what the watch says) at every moment that is asked about; whose an impulse is comes
    from the watch, and is no part of this comparison (tests/unit/whose.c)."""
    day = Day(oracle.Oracle(p, s, s["events"]))
    for i, e in enumerate(s["events"]):
        if e["kind"] == "impulse":
            e["whose"] = next(answers)
        day.take(e)
        if i + 1 == len(s["events"]) or s["events"][i + 1]["at"] > e["at"]:
            yield e["at"], day.facts(e["at"]), next(answers)
    last = s["events"][-1]["at"]
    for c in s["checks"]:
        if c > last:
            yield c, day.facts(c), next(answers)


def compare(want, got):
    """Words of what differs."""
    word = got.split()
    inside = {int(c.split(":")[0]): int(c.split(":")[1]) for c in word[8:]}
    pairs = [("phase", want["phase"], int(word[0])), ("pre-watch complete", want["complete"], word[1] == "1"),
             ("pre-watch", want["credit"] // 1000, int(word[2]) // 1000),
             ("start allowed", want["allowed"], word[3] == "1"), ("inside", want["inside"], inside)]
    if want["held"] is not None:
        pairs.append(("clauses that hold", want["held"], int(word[4])))
    pairs += [(who, want[who], int(w)) for who, w in (("observer", word[5]), ("crew", word[6]))
              if want[who] is not None]
    if want["spoken"] is not None:
        pairs.append(("spoken for", want["spoken"], word[7] == "1"))
    return ["%s: oracle %s, watch %s" % pair for pair in pairs if pair[1] != pair[2]]


def ask(mode, name, text):
    done = subprocess.run([PROGRAM, mode, name], input=text, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
                          universal_newlines=True)
    if done.returncode:
        raise RuntimeError("%s: %s" % (name, done.stderr))
    return done.stdout.splitlines()


def suns_of(p):
    """What may be given of time and place: nothing, or a place and a time from which the watch says when it is light.
    What it says is held against the sun; that it says whole minutes is taken from it."""
    rng, given = random.Random(p["id"]), []
    for latitude, longitude, day in PLACES:
        for _ in range(4):
            given.append((day + rng.randrange(86400), latitude, longitude))
    # So that light, or a day of the year, changes while the work is on.
    for latitude, longitude, day in PLACES[2:]:
        given += [(day + 86400 - rng.randrange(7200), latitude, longitude)]
    answers = ask("light", p["id"], "".join("%d %r %r %d\n" % (g + (HOURS,)) for g in given))
    suns = [{"sun": "- - -", "zero_s": None, "lights": [(0, "unknown")]}] * (len(given) // 2)
    problems = []
    for (zero_s, latitude, longitude), line in zip(given, answers):
        lights = [(int(at), name) for at, name in (word.split(":") for word in line.split())]
        problems += [] if PIECE else check_light(zero_s, latitude, longitude, lights, p["after_sunrise"], p["before_sunset"], HOURS)
        merged = [lights[0]] + [b for a, b in zip(lights, lights[1:]) if a[1] != b[1]]
        suns.append({"sun": "%d %r %r" % (zero_s, latitude, longitude), "zero_s": zero_s, "lights": merged})
    return suns, problems


def run(p, count, first_seed):
    groups = p["all_groups"]["groups"]
    suns, problems = suns_of(p)
    sequences = [sequence(random.Random("%s %d" % (p["id"], first_seed + i)), p, suns) for i in range(count)]
    answers = iter(ask("play", p["id"], "\n".join("\n".join(lines(s, groups)) for s in sequences) + "\n"))
    facts, met = 0, {"allowed": 0, "stop": 0, "inside": 0, "by ear": 0}
    for i, s in enumerate(sequences):
        if i % EVERY == 0:
            s["durations"] = {round(m * MIN) for m in durations(p)} | {0, oracle.GAP, 11 * S, 60 * S, round(p["countdown_s"] * S)}
        bad = None
        for at, want, got in expected(s, p, answers):
            differs = compare(want, got)
            facts += 1
            met["allowed"] += want["allowed"]
            met["stop"] += want["crew"] == oracle.STOP
            met["inside"] += bool(want["inside"])
            if differs and bad is None:
                bad = "%s, seed %d, at %.6f s: %s" % (p["id"], first_seed + i, at / 1e9, "; ".join(differs))
        if bad:
            problems.append(bad)
    return problems, facts, met


def main():
    ids = sorted(f[:-4] for f in os.listdir("config/permits") if f.endswith(".cfg"))
    only = os.environ.get("HUSHWATCH_PERMIT")
    failed = 0
    for n, name in enumerate([i for i in ids if not only or i == only], 1):
        values = subprocess.run([PROGRAM, "permit", name], stdout=subprocess.PIPE, universal_newlines=True).stdout
        p = json.loads(values)
        problems, facts, met = run(p, COUNT, PIECE * COUNT)
        good = not problems and met["allowed"] > 0 and met["inside"] > 0
        print("%s %d - %s: %d sequences" % ("ok" if good else "not ok", n, name, COUNT))
        for problem in problems[:int(os.environ.get("HUSHWATCH_SHOW", "3"))]:
            print("# " + problem)
        print("# figure %s: %d moments compared, start allowed at %d, stop at %d, an animal inside at %d; %d "
              "sequences differ" % (name, facts, met["allowed"], met["stop"], met["inside"], len(problems)))
        sys.stdout.flush()
        failed += not good
    return failed > 0


if __name__ == "__main__":
    sys.exit(main())
