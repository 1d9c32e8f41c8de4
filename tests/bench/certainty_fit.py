#!/usr/bin/python3
"""Fits what the measures of a call say about it, on what tests/bench/calls/main.c left, and judges it on other seeds.

certainty_fit.py FIT_FOLDER... [--judge FOLDER...]

The calls of the pieces 'seas', 'confounders' and 'mixed' of the first folders are fitted: for tones and for trains a
logistic model (Cox 1958, J. R. Stat. Soc. B 20, 215) with a weight for each measure and a constant for each class,
held small by a normal prior (precision 3 for weights of standardised measures and for the constants' distances from their mean).
A class with fewer than 10 calls has no constant of its own: it takes the mean of its form. A weight may only have the
sign that the measure's nature gives it, else it is 0: that loud machines are among the bench's sounds must not make a
loud animal doubtful. Printed: the tone and train groups of config/calls/certainty.cfg, the `certainty` of each class with
calls, and how well it does where it was not fitted: on each sea and confounder by a fit without it, and on the folders
to be judged, with how far this fit is from what the calls state there (95 %: bootstrap over seas and confounders, Efron 1979,
Ann. Stat. 7, 1). Brier score (1950, Mon. Weather Rev. 78, 1); skill is over the base rate of the judged calls."""
import json
import os
import sys
from collections import Counter

import numpy as np
from scipy import optimize, stats

# Name and sign.
MEASURES = {"tone": {"length": 1, "bend": 1, "jump": -1, "occupancy": -1, "contrast": 1, "strength": 1},
            "train": {"excess": 1, "strays": -1, "jitter": -1, "likeness": 1, "length": -1, "bandwidth": 1, "strength": 1}}
SHRINK_WEIGHTS, SHRINK_CLASSES = 3.0, 3.0
FEW = 10  # calls; 9 right of 9 still leave a share of 0.66 to 1 (95 %; Clopper and Pearson 1934, Biometrika 26, 404)
MIXED = 0.1  # what a call of a mixed sea counts: there most kinds that there are call, at sea few
LEAST, MOST = 0.01, 0.99


def load(folders):
    calls = []
    for folder in folders:
        for piece in ("seas", "confounders", "mixed"):
            path = os.path.join(folder, piece + ".json")
            if os.path.exists(path):
                with open(path) as file:
                    for i, row in enumerate(json.load(file)["rows"]):
                        where = row.get("sea") or row["sound"]
                        calls += [(where, c[0], c[1], c[2], c[3], c[4:], (path, i)) for c in row["judged"]]
    return calls


def within(log_odds):
    return min(MOST, max(LEAST, 1 / (1 + np.exp(-log_odds))))


class Model:
    """Of one form."""

    def __init__(self, calls, signs):
        n_measures = len(signs)
        numbers = Counter(c[1] for c in calls)
        self.classes = sorted(name for name in numbers if numbers[name] >= FEW)
        self.few = sorted(set(numbers) - set(self.classes))
        x = np.array([c[5][:n_measures] for c in calls], float)
        y = np.array([c[3] for c in calls], float)
        self.usual, self.spread = x.mean(0), x.std(0) + 1e-9
        n, k = len(calls), len(self.classes)
        a = np.zeros((n, 1 + n_measures + k))
        a[:, 0] = 1
        a[:, 1:1 + n_measures] = (x - self.usual) / self.spread
        for i, c in enumerate(calls):
            if c[1] in self.classes:
                a[i, 1 + n_measures + self.classes.index(c[1])] = 1
        count = np.array([MIXED if c[0] == "mixed" else 1 for c in calls])
        hold = np.r_[1e-6, np.full(n_measures, SHRINK_WEIGHTS), np.full(k, SHRINK_CLASSES)]

        def cost(b):
            z = a @ b
            p = 1 / (1 + np.exp(-z))
            return (count * (np.logaddexp(0, z) - y * z)).sum() + (hold * b * b).sum() / 2, a.T @ (count * (p - y)) + hold * b

        bounds = [(None, None)] + [(0, None) if sign > 0 else (None, 0) for sign in signs.values()] + [(None, None)] * k
        b = optimize.minimize(cost, np.zeros(a.shape[1]), jac=True, bounds=bounds, method="L-BFGS-B",
                              options={"maxiter": 2000, "ftol": 1e-12}).x
        self.mean, self.weight = b[0], b[1:1 + n_measures] / self.spread
        self.constant = dict(zip(self.classes, b[0] + b[1 + n_measures:]))

    def find(self, call):
        measures = np.array(call[5][:len(self.weight)], float)
        z = self.constant.get(call[1], self.mean) + self.weight @ (measures - self.usual)
        return within(z)


def fit(calls):
    return {form: Model([c for c in calls if c[2] == form], signs) for form, signs in MEASURES.items()}


def judge(title, pairs):
    """Pairs of stated certainty and right."""
    p, y = (np.array(v, float) for v in zip(*pairs))
    base = y.mean()
    brier = ((p - y) ** 2).mean()
    skill = 1 - brier / (base * (1 - base)) if 0 < base < 1 else float("nan")
    print("%-34s %5d calls, base rate %.3f, stated %.3f, Brier %.4f, skill %.2f" % (title, len(y), base, p.mean(), brier, skill))
    return p, y


def bins(p, y):
    for b in range(5):
        here = (np.minimum(4, np.floor(5 * p)) == b)
        n, hits = int(here.sum()), int(y[here].sum())
        if n:
            low = stats.beta.ppf(0.025, hits, n - hits + 1) if hits else 0
            high = stats.beta.ppf(0.975, hits + 1, n - hits) if hits < n else 1
            stated = p[here].mean()
            print("  %.1f to %.1f: %5d calls, stated %.3f, right %.3f (95 %%: %.3f to %.3f) %s" % (
                b / 5, b / 5 + 0.2, n, stated, hits / n, low, high, "inside" if low <= stated <= high else "OUTSIDE"))


def compare(stated, found, calls):
    """Brier score of the second less that of the first, with the spread that other seas and confounders would have given."""
    gain = np.array([(f[0] - f[1]) ** 2 - (s[0] - s[1]) ** 2 for s, f in zip(stated, found)])
    sea = np.unique([str(c[6]) for c in calls], return_inverse=True)[1]
    sums, numbers = np.bincount(sea, gain), np.bincount(sea)
    drawn = np.random.default_rng(1).integers(0, len(sums), (2000, len(sums)))
    low, high = np.percentile(sums[drawn].sum(1) / numbers[drawn].sum(1), [2.5, 97.5])
    print("Brier score by this fit less that stated: %+.4f (95 %%: %+.4f to %+.4f)" % (gain.mean(), low, high))


def print_models(models):
    for form, model in models.items():
        print("%s = {" % form)
        for name, weight, usual in zip(MEASURES[form], model.weight, model.usual):
            print("    %s = [%.3f, %.3f]" % (name, weight, usual))
        print("}")
        for name, z in sorted(model.constant.items()):
            print("# %s: certainty = %.2f" % (name, within(z)))
        print("# %s: certainty = %.2f, the mean: fewer than %d calls" % (", ".join(model.few) or "none", within(model.mean), FEW))


def main():
    at = sys.argv.index("--judge") if "--judge" in sys.argv else len(sys.argv)
    calls, others = load(sys.argv[1:at]), load(sys.argv[at + 1:])
    models = fit(calls)
    print_models(models)
    left_out = []
    for where in sorted({c[0] for c in calls}):
        without = fit([c for c in calls if c[0] != where])
        here = [(without[c[2]].find(c), c[3]) for c in calls if c[0] == where]
        judge("without: " + where, here)
        left_out += here
    bins(*judge("each by a fit without its place", left_out))
    if others:
        stated = [(c[4], c[3]) for c in others]
        bins(*judge("other seeds, as the calls state", stated))
        found = [(models[c[2]].find(c), c[3]) for c in others]
        bins(*judge("other seeds, by this fit", found))
        compare(stated, found, others)
        for name in sorted({c[1] for c in others}):
            judge("  " + name + ", stated", [pair for pair, c in zip(stated, others) if c[1] == name])
            judge("  " + name + ", by this fit", [pair for pair, c in zip(found, others) if c[1] == name])


main()
