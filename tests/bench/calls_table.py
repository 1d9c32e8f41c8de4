#!/usr/bin/python3
"""The table of the detectors' bench, from the pieces that tests/bench/calls/main.c left.

calls_table.py FOLDER [DOCUMENT]: prints it as Markdown, writes FOLDER/table.json and, into the document, what it
printed in place of what stands between its two markers. Pieces of another catalogue than the newest piece's are left
out, and said to be. A row: what, of what, figure, goal, whether it is met, number of trials, seed, and of what is no animal how much of it
was recognised."""
import json
import math
import os
import sys

from scipy import stats

PIECES = ["pulses", "trains", "tones", "seas", "confounders", "pool", "voices", "costs", "mixed"]
TONE_GOALS = {"right whale upcall": 4.0, "delphinid whistle": 6.0}
BUDGET = 7.0
MARKERS = ("<!-- table of bench-calls -->\n", "<!-- end of the table -->\n")


def load(folder):
    kept = {}
    for piece in PIECES:
        path = os.path.join(folder, piece + ".json")
        if os.path.exists(path):
            with open(path) as file:
                kept[piece] = (os.path.getmtime(path), json.load(file))
    if not kept:
        sys.exit("no results in " + folder)
    digest = max(kept.values())[1]["digest"]
    stale = sorted(p for p, (_, k) in kept.items() if k["digest"] != digest)
    return digest, {p: k for p, (_, k) in kept.items() if k["digest"] == digest}, stale


def number(x, unit, digits=1):
    return "not reached" if x is None else "%.*f %s" % (digits, x, unit)


class Table:
    def __init__(self):
        self.rows = []

    def add(self, what, of, figure, goal="", met=None, trials="", seed="", heard=""):
        self.rows.append({"what": what, "of": of, "figure": figure, "goal": goal, "trials": str(trials), "heard": heard,
                          "met": "" if met is None else "yes" if met else "**no**", "seed": str(seed)})


def pulses(table, piece):
    for row in piece["rows"]:
        loss = row["loss_db"]
        table.add("single pulse, Pd 0.9 at 1/h", row["class"],
                  "%s over the ideal energy detector, %s over the matched filter (2E/N0 %s; envelope %s)" % (
                      number(loss, "dB", 2), number(row["over_matched_db"], "dB", 2), number(row["pd90_db"], "dB"),
                      number(row["pd90_envelope_db"], "dB")),
                  "at most 1.5 dB", loss is not None and loss <= 1.5, row["trials"], piece["seed"])
        if row["check_hours"] > 0:
            low, high = stats.chi2.ppf([0.025], 2 * row["check_false"])[0] / 2 if row["check_false"] else 0, \
                stats.chi2.ppf(0.975, 2 * row["check_false"] + 2) / 2
            table.add("the same threshold in hours of noise", row["class"],
                      "%d false in %.1f h: %.2f/h (95 %%: %.2f to %.2f)" % (
                          row["check_false"], row["check_hours"], row["check_false"] / row["check_hours"],
                          low / row["check_hours"], high / row["check_hours"]), "1/h inside the interval",
                      low <= row["check_hours"] <= high, "", piece["seed"])


def trains(table, piece):
    for row in piece["rows"]:
        gain = row["gain_db"]
        table.add("train of 8, 4 % jitter, Pd 0.9 at 0.1/h", row["class"],
                  "%s below the single-pulse ideal" % number(gain, "dB"), "at least 1.5 dB",
                  gain is not None and gain >= 1.5, row["trials"], piece["seed"])


def tones(table, piece):
    for row in piece["rows"]:
        goal = TONE_GOALS.get(row["class"])
        loss = row["loss_db"]
        table.add("tone, Pd 0.9 at 1/h", row["class"],
                  "%s over the sum along the true contour (cell %s, FFT %d at %.0f kHz); %d false in %.1f h of noise" % (
                      number(loss, "dB"), number(row["pd90_db"], "dB"), row["fft"], row["rate_hz"] / 1000,
                      row["noise_false"], row["noise_hours"]),
                  "at most %g dB" % goal if goal else "", None if goal is None else loss is not None and loss <= goal,
                  row["trials"], piece["seed"])


def percent(x):
    return "-" if x is None else "%.1f %%" % (100 * x)


def sea_goals(sea, voice):
    """Least recall and precision."""
    if "airguns" in sea:
        return 0.80, 0.90
    return {"delphinid whistle": (0.85, 0.90), "sperm whale clicks": (0.95, None),
            "beaked whale clicks": (0.85, 0.95)}.get(voice, (None, None))


def seas(table, piece):
    for sea in piece["rows"]:
        for row in sea["voices"]:
            recall, precision = sea_goals(sea["sea"], row["voice"])
            goal = "" if recall is None else "recall %.0f %%" % (100 * recall) + (
                "" if precision is None else ", precision %.0f %%" % (100 * precision))
            met = None if recall is None else (row["recall"] or 0) >= recall and (
                precision is None or (row["precision"] or 0) >= precision)
            trials = "%d clicks" % row["pulses"] if row["pulses"] else "%d calls" % row["calls"]
            table.add("sea: %s, %.0f min" % (sea["sea"], sea["minutes"]), "%s at %.0f dB" % (row["voice"], row["snr_db"]),
                      "recall %s, precision %s (right group %s)" % (
                          percent(row["recall"]), percent(row["precision"]), percent(row["right_group"])),
                      goal, met, trials, piece["seed"])
        first = sea["first_voice"]
        if first and "porpoise" in sea["voices"][0]["voice"]:
            table.add("sea: " + sea["sea"], "porpoise against everything else", "d' %.2f" % first["d"], "at least 4",
                      first["d"] >= 4, "%d clicks, %d others" % (first["own"], first["others"]), piece["seed"])


def judged_calls(pieces):
    """Class, certainty and right of every animal's call; what a confounder makes is always wrong."""
    return [(call[0], call[3], call[2]) for piece in pieces for row in piece["rows"] for call in row["judged"]]


def score(calls):
    """Brier score, base rate, skill over it (None where all are right, or none)."""
    n = len(calls)
    base = sum(c[2] for c in calls) / n
    brier = sum((c[1] - c[2]) ** 2 for c in calls) / n
    return brier, base, 1 - brier / (base * (1 - base)) if 0 < base < 1 else None


def skill_text(calls):
    brier, base, skill = score(calls)
    return "Brier score %.3f, base rate %.2f, skill %s" % (brier, base, "-" if skill is None else "%.2f" % skill)


def calibration(table, of, calls, seed):
    if not calls:
        return
    for b in range(5):
        here = [c for c in calls if min(4, int(5 * c[1])) == b]
        count, hits, stated = len(here), sum(c[2] for c in here), sum(c[1] for c in here)
        if count > 0:
            low, high = stats.beta.ppf(0.025, hits, count - hits + 1) if hits else 0, \
                stats.beta.ppf(0.975, hits + 1, count - hits) if hits < count else 1
            table.add("certainty %.1f to %.1f" % (b / 5, (b + 1) / 5), of,
                      "stated %.2f, right %.2f (95 %%: %.2f to %.2f)" % (stated / count, hits / count, low, high),
                      "stated inside the interval", low <= stated / count <= high, "%d calls" % count, seed)
    skill = score(calls)[2]
    table.add("certainty", of, skill_text(calls), "skill above 0", skill is not None and skill > 0,
              "%d calls" % len(calls), seed)
    for name in sorted({c[0] for c in calls}):
        here = [c for c in calls if c[0] == name]
        table.add("certainty of a class", name, "stated %.2f; %s" % (sum(c[1] for c in here) / len(here), skill_text(here)),
                  "", None, "%d calls" % len(here), seed)


def delays(table, piece):
    best = {}
    for sea in piece["rows"]:
        for row in sea["delays"]:
            if row["n"] > best.get(row["class"], ({"n": 0},))[0]["n"]:
                best[row["class"]] = (row, sea)
    for name, (row, sea) in sorted(best.items()):
        over = row["p99_s"] - row["natural_delay_s"]
        table.add("from a call's end to its entry", name, "%.3f s (50th), %.3f s (99th): %d and %d samples at %.0f kHz" % (
            row["p50_s"], row["p99_s"], round(row["p50_s"] * sea["rate_hz"]), round(row["p99_s"] * sea["rate_hz"]),
            sea["rate_hz"] / 1000), "natural delay %.2f s and at most 0.1 s" % row["natural_delay_s"], over <= 0.1,
            row["n"], piece["seed"])


def voices(table, piece):
    """Each class by itself on its own call: found from what level, and when known."""
    for row in piece["rows"]:
        levels, shares = row["levels_db"], row["pd"]
        reached = next((levels[i - 1] + (0.9 - shares[i - 1]) / (shares[i] - shares[i - 1]) * (levels[i] - levels[i - 1])
                        for i in range(1, len(levels)) if shares[i] >= 0.9 > shares[i - 1]), None)
        table.add("simulated call, Pd 0.9", row["class"], "%s (%s, at %g kHz)" % (
            number(reached, "dB"), "envelope's peak over noise" if row["form"] == "train" else "cell over median noise",
            row["rate_hz"] / 1000), "", None, row["trials"], piece["seed"])
    for row in piece["rows"]:
        if row["n_delays"] == 0:
            continue
        p50, p99, natural, rate = row["delay_p50_s"], row["delay_p99_s"], row["natural_delay_s"], row["rate_hz"]
        table.add("class by itself: from a call's end to its entry", row["class"],
                  "%.3f s (50th), %.3f s (99th): %d and %d samples at %g kHz" % (
                      p50, p99, round(p50 * rate), round(p99 * rate), rate / 1000),
                  "by design waits %.2f s, and at most 0.1 s" % natural, p99 <= natural + 0.1, row["n_delays"], piece["seed"])


def upper(n):
    return stats.chi2.ppf(0.95, 2 * n + 2) / 2


def recognised(sums):
    """Share of the sounds that are truly there, and plain, that were given as what they are."""
    if not sums["as"]:
        return "no class"
    if not sums["present"]:
        return "none plain"
    return "%.1f %% of %s (%s)" % (100 * sums["recognised"] / sums["present"],
                                   "%.1f h" % (sums["present"] / 3600) if sums["lasts"] else "%d" % sums["present"],
                                   sums["as"])


def pooled(rows):
    sounds = {}
    for row in rows:
        sums = sounds.setdefault(row["sound"], {"hours": 0, "looks": 0, "acts": 0, "calls": {}, "render_s": 0, "listen_s": 0,
                                                "present": 0, "recognised": 0, "as": "", "lasts": False})
        for key in ("hours", "looks", "acts", "render_s", "listen_s"):
            sums[key] += row[key]
        for name, n in row["calls"].items():
            sums["calls"][name] = sums["calls"].get(name, 0) + n
        heard = row.get("recognised")
        if heard:
            sums.update({"as": heard["as"], "lasts": heard["lasts"]})
            for key in ("present", "recognised"):
                sums[key] += heard[key]
    return sounds


def confounders(table, rows, seed):
    sounds = pooled(rows)
    every = {k: sum(s[k] for s in sounds.values()) for k in ("hours", "looks", "acts", "render_s", "listen_s")}
    for sound, sums in list(sounds.items()) + [("all together", every)]:
        hours, looks, acts = sums["hours"], sums["looks"], sums["acts"]
        made = ", ".join("%d %s" % (n, name) for name, n in sorted(sums.get("calls", {}).items(), key=lambda i: -i[1]))
        table.add("confounder" if sound != "all together" else "confounders", sound,
                  "act %.2f a day (at most %.2f with 95 %%), look %.2f an hour (at most %.2f)%s" % (
                      24 * acts / hours, 24 * upper(acts) / hours, looks / hours, upper(looks) / hours,
                      "; calls: " + made if made else ""),
                  "act 0.4 a day, look 1 an hour", 24 * acts / hours <= 0.4 and looks / hours <= 1,
                  "%.2f h" % hours, seed, recognised(sums) if "as" in sums else "")
    spent_s = every["render_s"] + every["listen_s"]
    table.add("confounders", "time", "%.2f simulated hours a minute of processor (%.0f %% of it is making the sound)" % (
        every["hours"] / spent_s * 60, 100 * every["render_s"] / spent_s), "", None, "%.2f h" % every["hours"], seed)


def costs(table, piece):
    for row in piece["rows"]:
        goal = row["class"] == "all"
        table.add("cost of " + ("all classes" if goal else "a class by itself"),
                  "" if goal else row["class"], "%.1f ns a sample at %.0f kHz: %.2f of the bare spectra" % (
                      row["ns_per_sample"], row["rate_hz"] / 1000, row["ratio"]),
                  "the whole watch at most %g" % BUDGET if goal else "", row["ratio"] <= BUDGET if goal else None, "",
                  piece["seed"])


def confusion(pieces):
    """Class against sound: calls given, over all seas and confounders."""
    cells, sounds = {}, []
    for sea in pieces.get("seas", {"rows": []})["rows"]:
        for name, row in sea["confusion"].items():
            for sound, n in row.items():
                sounds += [] if sound in sounds else [sound]
                cells[name, sound] = cells.get((name, sound), 0) + n
    for row in pieces.get("confounders", {"rows": []})["rows"] + pieces.get("pool", {"rows": []})["rows"]:
        sounds += [] if row["sound"] in sounds else [row["sound"]]
        for name, n in row["calls"].items():
            cells[name, row["sound"]] = cells.get((name, row["sound"]), 0) + n
    names = sorted({name for name, _ in cells})
    lines = ["| sound | " + " | ".join(names) + " |", "|---" * (len(names) + 1) + "|"]
    for sound in sounds:
        lines.append("| %s | %s |" % (sound, " | ".join(str(cells.get((n, sound), "")) for n in names)))
    return lines


def write_into(document, text):
    with open(document) as file:
        whole = file.read()
    before, rest = whole.split(MARKERS[0])
    after = rest.split(MARKERS[1])[1]
    with open(document, "w") as file:
        file.write(before + MARKERS[0] + text + MARKERS[1] + after)


def main():
    folder = sys.argv[1] if len(sys.argv) > 1 else "build/bench-calls"
    digest, pieces, stale = load(folder)
    table = Table()
    for name, rows in (("pulses", pulses), ("trains", trains), ("tones", tones), ("seas", seas),
                       ("seas", delays), ("voices", voices), ("costs", costs)):
        if name in pieces:
            rows(table, pieces[name])
    for of, names in (("seas and confounders", ("seas", "confounders")), ("mixed seas", ("mixed",))):
        used = [pieces[name] for name in names if name in pieces]
        if used:
            calibration(table, of, judged_calls(used), used[0]["seed"])
    rows = pieces.get("confounders", {"rows": []})["rows"] + pieces.get("pool", {"rows": []})["rows"]
    if rows:
        seeds = sorted({str(p["seed"]) for p in [pieces[k] for k in ("confounders",) if k in pieces]} |
                       {str(r["seed"]) for r in pieces.get("pool", {"rows": []})["rows"]})
        confounders(table, rows, seeds[0] + (" and %d more" % (len(seeds) - 1) if len(seeds) > 1 else ""))
    lines = ["Catalogue (SHA-256 of the files of config/calls in byte order): `%s`." % digest, "",
             "| what | of what | figure | goal | met | trials | seed | recognised |", "|---|---|---|---|---|---|---|---|"]
    lines += ["| %(what)s | %(of)s | %(figure)s | %(goal)s | %(met)s | %(trials)s | %(seed)s | %(heard)s |" % r for r in table.rows]
    lines += ["", "What each class's calls truly were, in seas and confounders (counts of calls):", ""] + confusion(pieces)
    if stale:
        lines += ["", "Left out, of another catalogue: " + ", ".join(stale) + "."]
    text = "\n".join(lines) + "\n"
    print(text, end="")
    if len(sys.argv) > 2:
        write_into(sys.argv[2], text)
    with open(os.path.join(folder, "table.json"), "w") as file:
        json.dump({"digest": digest, "rows": table.rows}, file, indent=1)


main()
