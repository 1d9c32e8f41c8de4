#!/usr/bin/python3
"""The watch against an independent oracle (tests/support/permit_oracle.py) on random sequences of events under every
permit of config/permits: whether a start is allowed and which clauses hold it back, how much of the pre-watch is done,
which animals count as inside and until when, and what observer and crew are told while the source sounds and in breaks.

HUSHWATCH_LENGTH=short 20, check 150, long 2,500 sequences a permit in one piece; HUSHWATCH_PIECE=K (from 0) takes the
Kth piece, so that 40 pieces of HUSHWATCH_LENGTH=long are 100,000 a permit. HUSHWATCH_PERMIT names one permit alone."""
import json
import os
import random
import subprocess
import sys

sys.path.insert(0, "tests/support")
import permit_oracle as oracle
from permit_day import Day
from permit_oracle import MIN, S

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
PROGRAM = os.path.join(BUILD, "tests/support/watch_facts")
COUNT = {"short": 20, "long": 2500}.get(os.environ.get("HUSHWATCH_LENGTH"), 150)
PIECE = int(os.environ.get("HUSHWATCH_PIECE", "0"))
SPECIES = ["", "killer whale", "bottlenose dolphin", "minke whale", "Hector's dolphin", "New Zealand sea lion"]
# When the sun is up all day, or not at all, in Longyearbyen (78.22 N, 15.65 E): midsummer and December.
LIGHTS = {"unknown": "- - -", "day": "1781956800 78.22 15.65", "dark": "1797854400 78.22 15.65"}
STATES = ["soft start", "full power", "hold", "reduced", "stopped", "off", "vibro", "drilling", "line turn", "test"]


def durations(p):
    """The times that the permit's clauses name: their edges are what is tried."""
    out = [m["minutes"] for k in ("pre_watches", "clearances", "breaks") for m in p[k]]
    out += [p[k] for k in ("hole_minutes", "deterrent_least", "deterrent_gap", "turn_longest", "small_longest",
                           "outage_diagnose", "outage_extra", "post_minutes")]
    out += [p["good_minutes"], p["good_within_hours"] * 60]
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
    edge = round(rng.choice(times) * MIN)
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
    if dice < 0.85:
        if p["deterrent"] or p["quieting"]:
            return {"kind": rng.choice(["deterrent"] * p["deterrent"] + ["quieting"] * p["quieting"]),
                    "answer": rng.choice(["on", "on", "off"])}
        return {"kind": "unheard", "start": max(t - 30 * S, 0), "end": t}
    if dice < 0.89:
        long = rng.choice([0.5, 5, 10, 12, 40, 700])
        return {"kind": "unheard", "start": max(0, t - round(long * S)), "end": t - rng.choice([0, 0, 1]) * 10**8}
    if dice < 0.91:
        return {"kind": "override", "person": "Dee", "answer": "on", "reason": rng.choice(list(oracle.REASONS))}
    if dice < 0.92:
        return {"kind": "override", "person": "Dee", "answer": "off"}
    if dice < 0.95:
        return {"kind": "restart"}
    return {"kind": rng.choice(["sign-on", "sign-off"]), "person": rng.choice(["Ann", "Bo", "Cy"]),
            "watch": rng.choice(["visual", "acoustic"])}


def sequence(rng, p):
    """5 to 20 events; most begin with the watch that the permit needs, so that starts are reached."""
    light = rng.choice(list(LIGHTS))
    s = {"light": light, "depth": rng.choice([None, 30, 200, 201]), "half": rng.choice([0, 20]), "events": []}
    times, t, seen = durations(p), 0, {"group": rng.choice(p["all_groups"]["groups"])}

    def add(e, at):
        s["events"].append(dict(e, at=at))
    for person, watch in (("Ann", "visual"), ("Bo", "acoustic"), ("Cy", "visual"), ("Eli", "acoustic")):
        if rng.random() < (0.95 if person in ("Ann", "Bo") else 0.4 + 0.5 * (p["least_visual"] > 1)):
            add({"kind": "sign-on", "person": person, "watch": watch}, t)
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
    for n in range(rng.randrange(5, 14)):
        before = t
        t += step(rng, times)
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
    s["checks"] = sorted({e["at"] for e in s["events"]} | {t + round(m * MIN) + d for m in times for d in (0, 1000)})
    return s


def lines(s, groups):
    out = ["new %s %g %s" % ("-" if s["depth"] is None else s["depth"], s["half"], LIGHTS[s["light"]])]
    checks, k = s["checks"], 0
    for i, e in enumerate(s["events"]):
        at, kind = e["at"], e["kind"]
        if kind == "call":
            out.append("c %d %d %g %d" % (at, groups.index(e["group"]), e["evidence"], e["end"]))
        elif kind == "unheard":
            out.append("u %d %d %d" % (at, e["start"], e["end"]))
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


def expected(s, p):
    o = oracle.Oracle(p, s["events"], s["depth"], s["half"], s["light"])
    day, out = Day(o), []
    for i, e in enumerate(s["events"]):
        day.take(e)
        if i + 1 == len(s["events"]) or s["events"][i + 1]["at"] > e["at"]:
            out.append((e["at"], day.facts(e["at"])))
    last = s["events"][-1]["at"]
    return out + [(c, day.facts(c)) for c in s["checks"] if c > last]


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
    return ["%s: oracle %s, watch %s" % pair for pair in pairs if pair[1] != pair[2]]


def run(p, count, first_seed):
    groups = p["all_groups"]["groups"]
    sequences = [sequence(random.Random("%s %d" % (p["id"], first_seed + i)), p) for i in range(count)]
    text = "\n".join("\n".join(lines(s, groups)) for s in sequences) + "\n"
    done = subprocess.run([PROGRAM, "play", p["id"]], input=text, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
                          universal_newlines=True)
    if done.returncode:
        return ["%s: %s" % (p["id"], done.stderr)], 0, {}
    answers, problems, facts, met = iter(done.stdout.splitlines()), [], 0, {"allowed": 0, "stop": 0, "inside": 0}
    for i, s in enumerate(sequences):
        bad = None
        for at, want in expected(s, p):
            differs = compare(want, next(answers))
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
    ids = sorted(f[:-4] for f in os.listdir("config/permits") if f.endswith(".cfg") and f != "demonstration.cfg")
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
