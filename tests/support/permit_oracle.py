"""What a permit's clauses say of a sequence of events, worked out from the whole history at each moment: brute force
over the clauses, without the watch's table of phases and without its timers.

Times are whole nanoseconds. An event is a dictionary: kind, at (when it became known), and its fields. What a
detection, a word of a person or a measure means is looked up in the list of events that were known by then; only
what an order to the crew leaves behind (it was asked, it was passed, it stays) is carried from moment to moment."""
import math

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


def minutes(value):
    return NEVER if math.isinf(value) else round(value * 60e9)


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
    def __init__(self, permit, events, depth, half_length, light):
        self.p, self.events, self.depth0, self.half, self.light = permit, events, depth, half_length, light
        self.rows = permit["clearances"]

    # ---- who is on watch, how deep the water is, what measures are at work: the newest word of each
    def people(self, t, upto):
        on = set()
        for e in self.events[:upto]:
            if e["at"] <= t and e["kind"] == "sign-on":
                on.add((e["person"], e["watch"]))
            elif e["at"] <= t and e["kind"] == "sign-off":
                on.discard((e["person"], e["watch"]))
        return on

    def newest(self, upto, kind, field):
        for e in reversed(self.events[:upto]):
            if e["kind"] == kind and e.get(field) is not None:
                return e
        return None

    def depth(self, upto):
        e = self.newest(upto, "weather", "depth_m")
        return e["depth_m"] if e else self.depth0

    def row(self, upto):
        """The longest pre-watch of those that hold at this depth; of all where nobody knows it."""
        depth, rows = self.depth(upto), self.p["pre_watches"]
        if depth is None:
            best = rows[0]
            for r in rows:
                if r["minutes"] > best["minutes"]:
                    best = r
            return best
        return [r for i, r in enumerate(rows) if i == 0 or depth > r["deeper"]][-1]

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

    def breaks(self):
        dark = self.light == "dark"
        return [b for i, b in enumerate(self.p["breaks"]) if not (b["daylight"] and dark)] or self.p["breaks"][:1]

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

    def poor(self, upto):
        p = self.p
        visibility, sea = (self.newest(upto, "weather", f) for f in ("visibility_m", "sea_state"))
        return (self.light == "dark" or
                (p["least_visibility"] > 0 and visibility is not None and
                 visibility["visibility_m"] < p["least_visibility"]) or
                (sea is not None and sea["sea_state"] > p["most_sea_state"]))

    def start_held(self, t, upto, on, deaf, history):
        p, (good, orders) = self.p, history
        if not (p["dark"] or p["good_minutes"] > 0 or p["most_orders"] > 0) or not self.poor(upto):
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
        return (minutes(rows[-1]["minutes"]), rows[-1]["leaving_ends"]) if rows else (0, False)

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
                if p >= self.p["p_prepare"]:
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


def measure(spans, other):
    return sum(max(0, min(b, d) - max(a, c)) for a, b in spans for c, d in other)


def union(spans):
    out = []
    for a, b in sorted(spans):
        if out and a <= out[-1][1]:
            out[-1] = (out[-1][0], max(b, out[-1][1]))
        elif b > a:
            out.append((a, b))
    return out


class Day:
    """Goes through the moments at which a clause can change its answer; asks the clauses at each."""

    def __init__(self, oracle):
        self.o, self.p = oracle, oracle.p
        self.t, self.upto, self.animals, self.on = 0, 0, [], set()
        self.phase, self.since, self.quiet, self.last_end, self.released = OFF, 0, -1, -1, False
        self.unallowed, self.unallowed_for, self.override = LOG, None, False
        self.credit, self.accruing, self.from_, self.counted, self.hole, self.down = 0, False, 0, [], None, False
        self.unheard, self.asked, self.passed, self.order = [], {}, set(), {}
        self.turn_minutes, self.out_since, self.out_past, self.heard_only = math.nan, None, [], -1
        self.good, self.good_since, self.orders = [], None, []

    # ---- the pre-watch: time that was kept, heard and silent
    def needed(self):
        return minutes(self.o.row(self.upto)["minutes"])

    def hole_limit(self):
        own = self.p["hole_minutes"]
        return minutes(own if own > 0 else self.o.breaks()[-1]["minutes"])

    def is_kept(self):
        return self.o.kept(self.upto, self.on)

    def complete(self):
        return self.credit >= self.needed() and self.is_kept()

    def deaf(self):
        runs = union(self.unheard)
        return bool(self.o.row(self.upto)["acoustic"] and runs and runs[-1][1] - runs[-1][0] >= 10 * S and
                    self.t < runs[-1][1] + 11 * S)

    def accrue(self, to):
        if self.accruing:
            self.credit = min(self.credit + to - self.t, self.needed() + self.needed() // 100)
        self.t = to

    def anew(self):
        self.credit, self.counted, self.from_ = 0, [], self.t

    def update(self):
        kept = self.is_kept() and not self.down
        worth = self.p["break_watch"]
        lets = (worth == "stands" if self.phase in SOUNDS else
                worth != "nothing" if self.phase in (BREAK, SHUTDOWN, POST) else True)
        if not kept and self.hole is None:
            self.hole = self.t
        if self.hole is not None and self.t - self.hole >= self.hole_limit():
            self.anew()
        if kept:
            self.hole = None
        if kept and lets and not self.accruing:
            self.from_ = self.t
        if not (kept and lets) and self.accruing:
            self.counted.append((self.from_, self.t))
        self.accruing = kept and lets

    def take_unheard(self, start, end):
        old = union(self.unheard)
        self.unheard.append((start, end))
        if end - start - measure([(start, end)], old) <= 0 or not self.o.row(self.upto)["acoustic"]:
            return
        counted = union(self.counted + ([(self.from_, self.t)] if self.accruing else []))
        both = measure(counted, [(start, end)])
        for a, b in old:
            both -= measure(counted, [(max(a, start), min(b, end))]) if min(b, end) > max(a, start) else 0
        self.credit = max(0, self.credit - both)
        run = union(self.unheard)[-1]
        if run[1] - run[0] >= self.hole_limit():
            self.credit = min(self.credit, max(0, self.t - run[1]) if self.accruing else 0)

    # ---- animals and orders
    def holds_start(self, a):
        return a.since is not None and any(max(z["action"]) >= A_DELAY for z in self.o.zones_of(a, self.t))

    def limit(self, action):
        return min(action, self.p["override_leaves"]) if self.override else action

    def wanted(self, a):
        if a.since is None:
            return LOG
        action = max([z["action"][self.phase] for z in self.o.zones_of(a, self.t)], default=LOG)
        if self.phase in SOUNDS or self.phase == SHUTDOWN:
            action = max(action, self.order.get(a.number, LOG))
        if self.phase not in SOUNDS and self.phase != BREAK and self.holds_start(a):
            action = max(action, A_DELAY)
        return self.limit(action) if self.phase in SOUNDS else action

    def question(self, a):
        needed = self.o.clearance(a)[0]
        policy = self.p["unknown"][self.p["all_groups"]["groups"].index(a.group)]
        return (policy == "ask observer" and not a.confirmed and a.number not in self.passed and
                not any(d[2] == "stated" and d[0] + needed > self.t for d in a.detections) and
                self.o.clear_at(a, self.t) >= 0)

    def holder(self, questions):
        return any(self.holds_start(a) and (questions or not self.question(a)) for a in self.animals)

    def order_in_force(self):
        return any(a.since is not None and self.order.get(a.number, LOG) >= A_HOLD for a in self.animals)

    def present(self):
        for a in self.animals:
            wanted = self.wanted(a)
            if wanted < PREPARE:
                continue
            self.asked.setdefault(a.number, self.t)
            if (a.confirmed or (a.vouched and a.sure) or
                    self.t >= self.asked[a.number] + round(self.p["countdown_s"] * 1e9)):
                self.passed.add(a.number)
            if a.number in self.passed and self.phase in SOUNDS:
                self.order[a.number] = max(wanted, self.order.get(a.number, LOG))

    def forget(self, number):
        self.asked.pop(number, None)
        self.passed.discard(number)
        self.order.pop(number, None)

    # ---- what the source does
    def conditions(self):
        good = self.good + ([(self.good_since, self.t)] if self.good_since is not None else [])
        return self.o.conditions(self.t, self.upto, self.on, self.last_end, self.deaf(), (good, self.orders))

    def before_sound(self):
        if not any(w != "crew" for _, w in self.on) or (self.phase == OFF and not self.is_kept()):
            return OFF
        if self.holder(False):
            return DELAY
        if self.complete() and not self.conditions():
            return READY
        e = self.o.newest(self.upto, "deterrent", "answer")
        return DETERRENT if e and e["answer"] == "on" else PRE_WATCH

    def enter(self, to):
        was = self.phase
        if was == to:
            return
        begins, ends = to in SOUNDS and was not in SOUNDS, was in SOUNDS and to not in SOUNDS
        if begins or ends:
            unallowed, self.unallowed_for = LOG, None
            needs = (self.p["test_pre_watch"] if to == TEST and self.p["test"] else
                     self.p["steady_pre_watch"] if to in (VIBRO, DRILLING) and self.p["steady"] else
                     to not in (DRILLING, TURN))
            if begins and needs and was != BREAK:
                good = was == READY and not self.holder(True)
                unallowed = LOG if good and self.released else A_HOLD if good else A_STOP
                if self.conditions():
                    unallowed = A_STOP
            self.unallowed = unallowed
        if begins and self.p["break_watch"] != "stands":
            self.anew()
        if begins:
            self.quiet = -1
        if ends:
            self.quiet, self.override, self.last_end = self.t, False, self.t
        if to in (SHUTDOWN, REDUCED):
            self.orders.append(self.t)
        self.phase, self.since = to, self.t
        if to != READY:
            self.released = False
        self.update()

    def over(self):
        if self.phase == POST and self.p["post_minutes"] > 0:
            return self.quiet + minutes(self.p["post_minutes"])
        return self.row_over(self.o.breaks()[-1])

    def row_over(self, row):
        return self.quiet + minutes(row["minutes"]) + (1000 if row["included"] else 0)

    def break_row(self):
        return next((r for r in self.o.breaks() if self.t < self.row_over(r)), self.o.breaks()[-1])

    def settle(self):
        for a in self.animals:
            if a.since is not None and self.o.clear_at(a, self.t) < 0 and a.state == "open":
                if self.order.get(a.number) == A_STOP and self.phase in SOUNDS and self.unallowed != A_STOP:
                    self.unallowed, self.unallowed_for = A_STOP, a.number
                self.forget(a.number)
        self.o.pass_time(self.animals, self.t)
        self.o.begin_episodes(self.animals, self.t)
        self.hear()
        self.look(True)
        while True:
            was = self.phase
            self.update()
            self.present()
            if self.phase in (BREAK, POST) and not any(w != "crew" for _, w in self.on):
                self.enter(OFF)
            elif self.phase == BREAK and any(self.wanted(a) >= A_DELAY and not self.question(a)
                                             for a in self.animals):
                self.enter(DELAY)
            elif self.phase == SHUTDOWN and not self.holder(True) and not self.order_in_force():
                self.enter(self.before_sound())
            elif self.phase in (BREAK, POST) and self.t >= self.over():
                self.enter(self.before_sound())
            elif self.phase in (OFF, PRE_WATCH, READY, DELAY, DETERRENT):
                self.enter(self.before_sound())
            if self.phase == was:
                return

    def look(self, able):
        """Watch by day in good conditions."""
        good = (able and self.p["start"] and self.p["good_minutes"] > 0 and self.o.light == "day" and
                self.o.kept_as(self.on, "visual") and not self.o.poor(self.upto))
        if good and self.good_since is None:
            self.good_since = self.t
        if not good and self.good_since is not None:
            self.good.append((self.good_since, self.t))
            self.good_since = None

    # ---- the acoustic watch fails while the source sounds
    def hear(self):
        out = (self.p["outage"] and self.phase in SOUNDS and
               (self.deaf() or not self.o.kept_as(self.on, "acoustic")))
        if out and self.out_since is None:
            self.out_since = self.t
        if not out and self.out_since is not None:
            self.out_past.append((self.out_since, self.t))
            self.out_since = None
        self.heard_only = max([self.heard_only] + [a.last for a in self.animals if a.act and a.calls and not a.seen])

    def outage_asks(self):
        p, o = self.p, self.o
        if not p["outage"] or self.out_since is None:
            return LOG
        lasted, total = self.t - self.out_since, sum(b - a for a, b in self.out_past) + self.t - self.out_since
        sea = o.newest(self.upto, "weather", "sea_state")
        forbidden = ((p["outage_daylight"] and o.light != "day") or
                     (not math.isinf(p["outage_sea"]) and not (sea and sea["sea_state"] <= p["outage_sea"])) or
                     not o.kept_as(self.on, "visual") or
                     (p["outage_quiet"] > 0 and self.heard_only >= 0 and
                      self.out_since - self.heard_only < minutes(p["outage_quiet"])))
        if total > minutes(p["outage_day"]):
            return A_STOP
        if lasted <= minutes(p["outage_diagnose"]):
            return LOG
        return A_STOP if forbidden or lasted > minutes(p["outage_diagnose"] + p["outage_extra"]) else LOG

    def asks(self):
        p, lasted = self.p, self.t - self.since
        if p["turn"] and self.phase == TURN and (not p["turn_reduced"] or self.turn_minutes > p["turn_longest"] or
                                                 lasted > minutes(p["turn_longest"])):
            return A_STOP
        if p["small"] and self.phase == REDUCED and lasted > minutes(p["small_longest"]):
            return A_STOP
        return self.outage_asks()

    def word(self, crew):
        """What the station is told, where a clause says it: None elsewhere."""
        leads = [self.wanted(a) for a in self.animals if a.number in (self.passed if crew else self.asked)]
        lead = max([w for w in leads if w >= PREPARE], default=LOG)
        blind = self.deaf() or not self.is_kept()
        if self.phase in SOUNDS:
            most = max(lead, self.limit(self.unallowed), self.limit(self.asks()))
            if most > LOG:
                return WORDS.get(most, DO_NOT_START)
            may_ask = any(z["action"][self.phase] >= PREPARE for z in self.p["zones"])
            return PREPARE_TO_STOP if may_ask and blind else CARRY_ON
        if self.phase == BREAK:
            leads = [self.wanted(a) for a in self.animals if a.number in self.asked]
            if max(leads, default=LOG) >= A_DELAY or blind:
                return STOP if max(leads, default=LOG) == A_STOP else DO_NOT_START
            return NEW_SOFT_START if self.break_row()["soft_start"] else RESUME
        if self.phase == READY and not self.holder(True) and not blind:
            return MAY_START if self.released else DO_NOT_START
        return None

    # ---- moments
    def moments(self):
        p, o, out = self.p, self.o, []
        for a in self.animals:
            if a.since is not None:
                out += [d[0] + o.clearance(a)[0] for d in a.detections]
            if a.number in self.asked and a.number not in self.passed:
                out.append(self.asked[a.number] + round(p["countdown_s"] * 1e9))
        if self.phase in (BREAK, POST):
            out += [self.over()] + [self.row_over(r) for r in o.breaks()]
        if self.hole is not None:
            out.append(self.hole + self.hole_limit())
        if self.accruing and self.credit < self.needed():
            out.append(self.t + self.needed() - self.credit)
        if self.unheard:
            out.append(union(self.unheard)[-1][1] + 11 * S)
        for e in o.events[:self.upto]:
            if e["kind"] == "deterrent":
                out += [e["at"] + minutes(p["deterrent_least"]), e["at"] + minutes(p["deterrent_gap"]) + 1000]
        if p["start"]:
            within = minutes(p["good_within_hours"] * 60)
            out += [x + 24 * 60 * MIN for x in self.orders]
            # The good watch that is too long ago grows from here on: when what is left is too little.
            since, spare = self.t - within, -minutes(p["good_minutes"])
            left = [(max(a, since), b) for a, b in self.good if b > since]
            spare += sum(b - a for a, b in left)
            for a, b in left if spare >= 0 else []:
                if b - a > spare:
                    out.append(a + spare + within + 1000)
                    break
                spare -= b - a
        if self.phase == TURN:
            out.append(self.since + minutes(p["turn_longest"]) + 1000)
        if self.phase == REDUCED:
            out.append(self.since + minutes(p["small_longest"]) + 1000)
        if self.out_since is not None:
            left = minutes(p["outage_day"]) - sum(b - a for a, b in self.out_past) - (self.t - self.out_since)
            out += [self.out_since + minutes(p["outage_diagnose"]) + 1000, self.t + left + 1000,
                    self.out_since + minutes(p["outage_diagnose"] + p["outage_extra"]) + 1000]
        return out

    def pass_to(self, t):
        while True:
            ahead = [m for m in self.moments() if self.t < m <= t]
            if not ahead:
                break
            self.accrue(min(ahead))
            self.settle()
        self.accrue(t)

    def take(self, e):
        kind = e["kind"]
        self.pass_to(min(e["down"], e["at"]) if kind == "restart" else e["at"])
        if kind == "restart":
            if e["at"] > e["down"]:
                self.released, self.down = False, True
                self.look(False)
                self.update()
            self.accrue(e["at"])
            self.down = False
            self.update()
        self.upto += 1
        old_on = self.on
        self.on = self.o.people(self.t, self.upto)
        if kind == "unheard":
            self.take_unheard(e["start"], e["end"])
        elif kind in ("call", "sighting", "distance", "verdict"):
            ended = {a.number: len(a.ended) for a in self.animals}
            self.o.take(self.animals, e, self.on)
            for a in self.animals:
                if len(a.ended) > ended.get(a.number, 0):
                    self.forget(a.number)
            if kind == "verdict" and e["verdict"] == "dismiss" and self.unallowed_for == e["contact"] and \
                    self.o.observer(old_on, e["person"]):
                self.unallowed, self.unallowed_for = LOG, None
        elif kind == "override":
            self.override = (e["answer"] == "on" and
                             bool(REASONS[e["reason"]] & (self.p["override_reasons"] | 1)))
        elif kind == "release" and self.o.observer(self.on, e["person"]):
            if self.unallowed == A_HOLD:
                self.unallowed = LOG
            elif self.phase == READY and not self.holder(True) and not self.deaf() and self.is_kept():
                self.released = True
        elif kind == "source":
            if e["state"] in SAID:
                if e["state"] == "line turn":
                    self.turn_minutes = e.get("minutes", math.nan)
                self.enter(SAID[e["state"]])
            elif e["state"] == "stopped" and self.phase in SOUNDS:
                self.enter(SHUTDOWN if self.order_in_force() else
                           self.before_after() if self.unallowed > LOG else BREAK)
            elif e["state"] == "off" and (self.phase in SOUNDS or self.phase == BREAK):
                self.enter(POST)
        self.settle()

    def before_after(self):
        """A source that was not allowed to sound is as before it did."""
        return self.before_sound()

    def facts(self, t):
        self.pass_to(t)
        allowed = self.phase == READY and not self.holder(True) and not self.deaf()
        silent = self.phase in (OFF, PRE_WATCH, READY, DELAY, DETERRENT)
        return {"phase": self.phase, "complete": self.complete(), "credit": self.credit, "allowed": allowed,
                "held": self.conditions() if silent else None,
                "observer": self.word(False), "crew": self.word(True),
                "inside": {a.number: self.o.clear_at(a, self.t) for a in self.animals
                           if a.since is not None and self.o.clear_at(a, self.t) >= 0}}
