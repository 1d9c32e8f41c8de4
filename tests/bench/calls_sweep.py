#!/usr/bin/python3
"""Draws detection probability over signal-to-noise ratio for each class, from the bench's pieces.

calls_sweep.py FOLDER OUT.svg"""
import json
import os
import sys
from xml.sax.saxutils import escape

WIDTH, HEIGHT, LEFT, TOP, ACROSS = 300, 190, 46, 34, 3
INK, OURS, TRAIN, IDEAL, VOICE = "#222222", "#0b4f8a", "#b35a00", "#777777", "#2f6b2f"
STYLES = {"found": (OURS, "2.2", ""), "train of 8": (TRAIN, "2.2", "1 4"), "ideal": (IDEAL, "1.4", "6 4"),
          "voice": (VOICE, "2.2", "")}


def load(folder, piece):
    path = os.path.join(folder, piece + ".json")
    if not os.path.exists(path):
        return {"rows": [], "digest": "", "seed": ""}
    with open(path) as file:
        return json.load(file)


def curves(folder):
    """(class, unit of the axis, {name: (levels, shares)}, goal line) for each class."""
    out = []
    trains = {row["class"]: row for row in load(folder, "trains")["rows"]}
    for row in load(folder, "pulses")["rows"]:
        lines = {"found": (row["levels_db"], row["pd"]), "ideal": (row["levels_db"], row["pd_ideal"])}
        if row["class"] in trains:
            train = trains.pop(row["class"])
            lines["train of 8"] = (train["levels_db"], train["pd"])
        out.append((row["class"], "2E/N0 of a pulse, dB", lines))
    for row in load(folder, "tones")["rows"]:
        lines = {"found": (row["levels_db"], row["pd"]), "ideal": (row["levels_db"], row["pd_ideal"])}
        out.append((row["class"], "cell power over noise, FFT %d at %g kHz, dB" % (row["fft"], row["rate_hz"] / 1000), lines))
    return out


def voices(folder):
    """Likewise, of calls as the simulator makes them."""
    units = {"train": "envelope's peak over noise, %g kHz, dB", "tone": "cell power over median noise, %g kHz, dB"}
    return [(row["class"], units[row["form"]] % (row["rate_hz"] / 1000), {"voice": (row["levels_db"], row["pd"])}, row["sound"])
            for row in load(folder, "voices")["rows"]]


def panel(svg, x0, y0, title, unit, lines, sound=""):
    every = [level for levels, _ in lines.values() for level in levels]
    low, high = min(every), max(every)
    across, down = WIDTH - LEFT - 14, HEIGHT - TOP - 40

    def at(level, share):
        return x0 + LEFT + (level - low) / (high - low) * across, y0 + TOP + (1 - share) * down

    svg.append('<text x="%g" y="%g" font-weight="bold" font-size="13">%s</text>' % (x0 + LEFT, y0 + 22, escape(title)))
    for share in (0, 0.5, 0.9, 1):
        (xa, y), (xb, _) = at(low, share), at(high, share)
        svg.append('<path d="M%.1f %.1fH%.1f" stroke="%s" stroke-width="%s"/>' % (
            xa, y, xb, INK if share == 0 else "#cccccc", "1" if share in (0, 0.9) else "0.6"))
        svg.append('<text x="%.1f" y="%.1f" text-anchor="end" font-size="10">%g</text>' % (xa - 5, y + 3.5, share))
    for tick in range(int(low), int(high) + 1):
        if tick % 2 == 0 and tick >= low:
            x, y = at(tick, 0)
            svg.append('<path d="M%.1f %.1fv4" stroke="%s"/>' % (x, y, INK))
            svg.append('<text x="%.1f" y="%.1f" text-anchor="middle" font-size="10">%d</text>' % (x, y + 15, tick))
    svg.append('<text x="%.1f" y="%.1f" text-anchor="middle" font-size="10">%s</text>' % (
        x0 + LEFT + across / 2, y0 + HEIGHT - 8, escape(unit)))
    if sound not in ("", title):
        svg.append('<text x="%.1f" y="%.1f" text-anchor="end" font-size="10">%s</text>' % (
            x0 + LEFT + across - 4, y0 + TOP + down - 8, escape(sound)))
    for name in ("ideal", "train of 8", "found", "voice"):
        if name in lines:
            colour, width, dashes = STYLES[name]
            points = " ".join("%.1f,%.1f" % at(level, share) for level, share in zip(*lines[name]))
            svg.append('<polyline points="%s" fill="none" stroke="%s" stroke-width="%s" stroke-dasharray="%s" '
                       'stroke-linecap="round"/>' % (points, colour, width, dashes))


def section(svg, y, title, drawn):
    """Panels under a title; gives where they end."""
    svg.append('<text x="20" y="%d" font-weight="bold" font-size="15">%s</text>' % (y + 22, escape(title)))
    for i, one in enumerate(drawn):
        panel(svg, i % ACROSS * WIDTH, y + 30 + i // ACROSS * HEIGHT, *one)
    return y + 30 + -(-len(drawn) // ACROSS) * HEIGHT


def main():
    folder, out = sys.argv[1], sys.argv[2]
    parts = [(title, drawn) for title, drawn in (
        ("Test pulses and tones that fill the class's limits, beside the ideal", curves(folder)),
        ("Calls as the simulator makes them, each class by itself at its own false alarms", voices(folder))) if drawn]
    if not parts:
        sys.exit("no results in " + folder)
    body, y = [], 0
    for title, drawn in parts:
        y = section(body, y, title, drawn) + 10
    legend = [("found", "found, at 1 false alarm an hour"), ("train of 8", "a train of 8 pulses, at 0.1 false trains an hour"),
              ("ideal", "the ideal: energy detector that knows the noise; sum along the true contour"),
              ("voice", "share of simulated calls of which the class gave a call")]
    width, height = ACROSS * WIDTH, y + 18 * len(legend) + 30
    svg = ['<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %d %d" font-family="sans-serif" fill="%s">' % (
        width, height, INK), '<rect width="%d" height="%d" fill="#ffffff"/>' % (width, height)] + body
    for name, text in legend:
        colour, line, dashes = STYLES[name]
        svg.append('<path d="M20 %dh30" stroke="%s" stroke-width="%s" stroke-dasharray="%s" stroke-linecap="round"/>' % (
            y + 10, colour, line, dashes))
        svg.append('<text x="58" y="%d" font-size="11">%s</text>' % (y + 14, escape(text)))
        y += 18
    about = [load(folder, piece) for piece in ("pulses", "trains", "tones", "voices")]
    svg.append('<text x="20" y="%d" font-size="11">In white Gaussian noise. Seed %s, catalogue %s.</text>' % (
        y + 16, ", ".join(sorted({str(a["seed"]) for a in about if a["rows"]})),
        ", ".join(sorted({a["digest"][:16] for a in about if a["rows"]}))))
    svg.append("</svg>")
    with open(out, "w") as file:
        file.write("\n".join(svg) + "\n")
    print("written: " + out)


main()
