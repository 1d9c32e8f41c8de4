"""What a permit's clauses say of a sequence of events, worked out from the whole history at each moment: brute force
over the clauses, without the watch's table of phases and without its timers.

Times are whole nanoseconds. An event is a dictionary: kind, at (when it became known), and its fields. What a
detection, a word of a person or a measure means is looked up in the list of events that were known by then; only
what an order to the crew leaves behind (it was asked, it was passed, it stays) is carried from moment to moment."""
import bisect
import functools
import math
import time

MIN, S = 60 * 10**9, 10**9
GAP, DECAY_S, ACT, SPREAD = 300 * S, 300.0, 8.0, 0.2
(OFF, PRE_WATCH, READY, DELAY, DETERRENT, SOFT, HOLD, FULL, REDUCED, VIBRO, DRILLING, TURN, TEST, BREAK, SHUTDOWN,
 POST) = range(16)
LOG, PREPARE, A_DELAY, A_HOLD, A_REDUCE, A_STOP = range(6)
CARRY_ON, MAY_START, RESUME, NEW_SOFT_START, DO_NOT_START, PREPARE_TO_STOP, HOLD_POWER, REDUCE_POWER, STOP = range(9)
WORDS = {PREPARE: PREPARE_TO_STOP, A_HOLD: HOLD_POWER, A_REDUCE: REDUCE_POWER, A_STOP: STOP}
SAID = {"soft start": SOFT, "full power": FULL, "hold": HOLD, "reduced": REDUCED, "vibro": VIBRO,
        "drilling": DRILLING, "line turn": TURN, "test": TEST}
SOUNDS = set(SAID.values())
C_DETERRENT, C_QUIETING, C_START = 2, 4, 16  # bits: their numbers in the watch
REASONS = {"life": 1, "refusal": 2, "instability": 4}
NEVER = 1 << 62


@functools.lru_cache(maxsize=None)
def minutes(value):
    return NEVER if math.isinf(value) else round(value * 60e9)


@functools.lru_cache(maxsize=None)
def p_inside(distance_m, reach_m):
    """Log-normal about the stated distance (docs/watch.md)."""
    if math.isinf(reach_m):
        return 1.0
    if distance_m <= 0:
        return 1.0
    if reach_m <= 0:
        return 0.0
    return 0.5 * math.erfc(-math.log(reach_m / distance_m) / SPREAD / math.sqrt(2))


class Animal:
    """A contact as its history up to a moment makes it."""

    def __init__(self, number, group):
        self.number, self.group = number, group
        self.calls, self.seen, self.calf, self.party, self.species = [], False, False, 0, ""
        self.last, self.act, self.state = -1, False, "open"
        self.distance, self.distance_at = None, -1
        self.detections = []  # [at, zone, stated or assumed]; what was let go is taken out
        self.vouched, self.confirmed, self.sure, self.word_at = False, False, False, -1
        self.since = None     # when the present episode began
        self.ended = []       # (when, how)


class Oracle:
    def __init__(self, permit, day, events):
        """day: what is given of the day (depth, half, channels, lights, zero_s); lights are (from when, what it is)."""
        self.p, self.events, self.depth0, self.half = permit, events, day["depth"], day["half"]
        self.channels, self.zero_s, self.durations = day["channels"], day["zero_s"], day.get("durations")
        self.lights = [at for at, _ in day["lights"]]
        self.light_names = [name for _, name in day["lights"]]
        self.rows, self.cache = permit["clearances"], {}
        self.upto = 0  # events that have come

    def light(self, t):
        return self.light_names[bisect.bisect_right(self.lights, t) - 1]

    # ---- who is on watch, how deep the water is, what measures are at work: the newest word of each
    def people(self, upto):
        on = set()
        for e in self.events[:upto]:
            if e["kind"] == "sign-on":
                on.add((e["person"], e["watch"]))
            elif e["kind"] == "sign-off":
                on.discard((e["person"], e["watch"]))
        return on

    def newest(self, upto, kind, field):
        key = (upto, kind, field)
        if key not in self.cache:
            self.cache[key] = next((e for e in reversed(self.events[:upto])
                                    if e["kind"] == kind and e.get(field) is not None), None)
        return self.cache[key]

    def depth(self, upto):
        e = self.newest(upto, "weather", "depth_m")
        return e["depth_m"] if e else self.depth0

    def row(self, upto):
        """The longest pre-watch of those that hold at this depth; of all where nobody knows it."""
        if upto not in self.cache:
            depth, rows = self.depth(upto), self.p["pre_watches"]
            self.cache[upto] = (max(rows, key=lambda r: r["minutes"]) if depth is None else
                                [r for i, r in enumerate(rows) if i == 0 or depth > r["deeper"]][-1])
        return self.cache[upto]

    def count(self, on, watch):
        return len([1 for person, w in on if w == watch])

    def kept_as(self, on, watch):
        return self.count(on, watch) >= max(1, self.p["least_" + watch])

    def kept(self, upto, on):
        row = self.row(upto)
        return ((not row["visual"] or self.kept_as(on, "visual")) and
                (not row["acoustic"] or self.kept_as(on, "acoustic")))

    def observer(self, on, person):
        return (person, "visual") in on or (person, "acoustic") in on

    def breaks(self, t):
        dark = self.light(t) == "dark"
        return [b for b in self.p["breaks"] if not (b["daylight"] and dark)] or self.p["breaks"][:1]

    # ---- conditions of a start
    def conditions(self, t, upto, on, last_end, deaf, history):
        p, held = self.p, 0
        if p["deterrent"] and not self.deterrent_good(t, upto, last_end):
            held |= C_DETERRENT
        e = self.newest(upto, "quieting", "answer")
        if p["quieting"] and not (e and e["answer"] == "on"):
            held |= C_QUIETING
        if p["start"] and self.start_held(t, upto, on, deaf, history):
            held |= C_START
        return held

    def deterrent_good(self, t, upto, last_end):
        spans, on = [], None
        for e in self.events[:upto]:
            if e["kind"] != "deterrent":
                continue
            if e["answer"] == "on" and on is None:
                on = e["at"]
            elif e["answer"] == "off" and on is not None:
                spans.append((on, e["at"]))
                on = None
        if on is not None:
            spans.append((on, None))
        if not spans:
            return False
        start, end = spans[-1]
        if end is not None and end <= last_end:
            return False  # it stood for a start that is over
        worked = (t if end is None else end) - start
        if end is not None and t > end + minutes(self.p["deterrent_gap"]):
            return False
        return worked >= minutes(self.p["deterrent_least"])

    def poor(self, t, upto):
        p = self.p
        visibility, sea = (self.newest(upto, "weather", f) for f in ("visibility_m", "sea_state"))
        return (self.light(t) == "dark" or
                (p["least_visibility"] > 0 and visibility is not None and
                 visibility["visibility_m"] < p["least_visibility"]) or
                (sea is not None and sea["sea_state"] > p["most_sea_state"]))

    def closed(self, t):
        """Whether the day of the year, both ends included, is of the closed season; it may go over the new year."""
        first, last = self.p["closed_from"], self.p["closed_to"]
        if not first or self.zero_s is None:
            return False
        day = time.gmtime(self.zero_s + t // S)
        today = 100 * day.tm_mon + day.tm_mday
        return first <= today <= last if first <= last else not last < today < first

    def start_held(self, t, upto, on, deaf, history):
        p, (good, orders) = self.p, history
        if self.closed(t):
            return True
        if not (p["dark"] or p["good_minutes"] > 0 or p["most_orders"] > 0) or not self.poor(t, upto):
            return False
        if p["dark"] == 2 or (p["dark"] == 1 and (not self.kept_as(on, "acoustic") or deaf)):
            return True
        since = max(0, t - minutes(p["good_within_hours"] * 60))
        kept = sum(max(0, min(b, t) - max(a, since)) for a, b in good)
        return ((p["good_minutes"] > 0 and kept < minutes(p["good_minutes"])) or
                (p["most_orders"] > 0 and len([o for o in orders if o > t - 24 * 60 * MIN]) >= p["most_orders"]))

    # ---- animals: which counts as inside, until when
    def listed(self, row, a):
        if not row["species"]:
            return True
        if not a.species:
            return bool(row["species_unknown"])
        return a.species.lower() in [s.lower() for s in row["species"]]

    def clearance(self, a):
        rows = [r for r in self.rows if a.group in r["groups"] and self.listed(r, a)]
        if not rows:
            return 0, False
        row, depth = rows[-1], self.depth(self.upto)
        long = row["deeper_minutes"] if row["deeper_minutes"] > 0 else row["minutes"]
        needed = max(long, row["minutes"]) if depth is None else long if depth > row["deeper"] else row["minutes"]
        return minutes(needed), row["leaving_ends"]

    def covers(self, z, a):
        return (a.group in z["groups"] and ((z["seen"] and a.seen) or (z["heard"] and a.calls)) and
                (not z["calf_only"] or a.calf) and (z["least_number"] <= 1 or a.party >= z["least_number"]) and
                self.listed(z, a))

    def reach(self, z):
        return z["radius_m"] + (self.half if z["edge"] else 0)

    def clear_at(self, a, t):
        """When the last zone is clear of it; -1 where it holds nothing."""
        if not a.act or a.state == "dismissed":
            return -1
        clear = max([d[0] for d in a.detections], default=-NEVER) + self.clearance(a)[0]
        return clear if a.detections and clear > t else -1

    def zones_of(self, a, t):
        if not a.act or a.state == "dismissed":
            return []
        needed = self.clearance(a)[0]
        return [z for i, z in enumerate(self.p["zones"])
                if any(d[1] == i and d[0] + needed > t for d in a.detections)]

    def detect(self, a, when):
        policy = self.p["unknown"][self.p["all_groups"]["groups"].index(a.group)]
        for i, z in enumerate(self.p["zones"]):
            if not self.covers(z, a):
                continue
            if a.distance is not None:
                p = p_inside(a.distance, self.reach(z))
                # A call that is known late says no more than the newer word on where the animal was.
                newer = any(d[1] == i and d[2] == "stated" and d[0] >= when for d in a.detections)
                if p >= self.p["p_prepare"] and not newer:
                    a.detections.append([when, i, "stated"])
                a.sure |= p >= self.p["p_act"]
            elif policy != "ignore":
                a.detections.append([when, i, "assumed"])
                a.sure |= policy == "inside"

    def place(self, a, distance, when, on, person, t):
        before, old = self.clear_at(a, t), (a.distance, a.distance_at, list(a.detections), a.sure)
        if a.since is None:
            a.sure = False
        a.distance, a.distance_at = distance, when
        outside = {i for i, z in enumerate(self.p["zones"])
                   if p_inside(distance, self.reach(z)) < self.p["p_prepare"]}
        # A distance outside ends what was only assumed, and corrects what was stated for that very moment.
        a.detections = [d for d in a.detections
                        if not (d[1] in outside and (d[2] == "assumed" or d[0] == when))]
        self.detect(a, when)
        after = self.clear_at(a, t)
        if before >= 0 and after < before and not self.observer(on, person):
            a.distance, a.distance_at, a.detections, a.sure = old
            return
        if before >= 0 and after < 0:
            self.end_episode(a, t, "word")

    def end_episode(self, a, t, how):
        a.ended.append((t, how))
        a.since = None
        a.vouched = a.confirmed = a.sure = False

    def left(self, a, on, person, t):
        if self.observer(on, person) and self.clearance(a)[1]:
            a.state, a.detections = "left", []
            self.end_episode(a, t, "word")

    def take(self, animals, e, on):
        """One event in the history of all animals."""
        t, kind = e["at"], e["kind"]
        if kind == "call" or (kind == "sighting" and e.get("contact") not in [a.number for a in animals]):
            near = [a for a in animals if a.group == e["group"] and a.state != "dismissed" and
                    (a.since is not None or (e["end"] - S // 2 if kind == "call" else t) - a.last <= GAP)]
            if not near:
                near = [Animal(len(animals) + 1, e["group"])]
                animals.append(near[0])
            a = near[-1]
        else:
            a = next((a for a in animals if a.number == e.get("contact")), None)
            if a is None:
                return
        if a.since is None and kind in ("call", "sighting"):
            a.sure = False
        if kind == "call":
            a.calls.append((t, e["evidence"]))
            a.state, a.last = "open", max(a.last, e["end"]) if a.last >= 0 else e["end"]
            if sum(x * math.exp(-(t - at) / 1e9 / DECAY_S) for at, x in a.calls) >= ACT:
                a.act = True
            if a.distance is not None and e["end"] - a.distance_at > GAP:
                a.distance = None
            self.detect(a, e["end"])
        elif kind == "sighting":
            a.state, a.seen, a.act, a.last = "open", True, True, t
            if self.observer(on, e["person"]):
                a.vouched, a.word_at = True, t
            a.calf |= bool(e.get("calf"))
            a.party = max(a.party, e.get("number") or 0)
            a.species = e.get("species") or a.species
            if a.distance is not None and t - a.distance_at > GAP:
                a.distance = None
            if e.get("distance_m") is not None:
                self.place(a, e["distance_m"], t, on, e["person"], t)
            else:
                self.detect(a, t)
            if e.get("leaving"):
                self.left(a, on, e["person"], t)
        elif kind == "distance":
            if self.observer(on, e["person"]):
                a.vouched, a.word_at = True, t
            self.place(a, e["distance_m"], a.last, on, e["person"], t)
            if self.clear_at(a, t) >= 0:
                a.state = "open"
        elif kind == "verdict" and e["verdict"] == "left":
            self.left(a, on, e["person"], t)
        elif kind == "verdict" and self.observer(on, e["person"]):
            if e["verdict"] == "dismiss":
                a.state = "dismissed"
                self.end_episode(a, t, "dismissed")
            else:
                a.act, a.confirmed, a.word_at = True, True, t
                if a.state == "dismissed" or self.clear_at(a, t) >= 0:
                    a.state = "open"

    def pass_time(self, animals, t):
        """Episodes that are over by time."""
        for a in animals:
            clear = max([d[0] for d in a.detections], default=-NEVER) + self.clearance(a)[0]
            if a.since is not None and a.act and a.state == "open" and clear <= t:
                self.end_episode(a, clear, "time")
                a.state = "cleared"

    def begin_episodes(self, animals, t):
        for a in animals:
            if a.since is None and self.clear_at(a, t) >= 0 and a.state == "open":
                a.since = t
                a.vouched &= a.word_at == t
                a.confirmed &= a.word_at == t
