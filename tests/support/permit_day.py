"""Goes with permit_oracle.py: the moments of a day, one after the other, and what is told at each."""
import math

from permit_oracle import (A_DELAY, A_HOLD, A_STOP, BREAK, CARRY_ON, DELAY, DETERRENT, DO_NOT_START, DRILLING,
                           LOG, MAY_START, MIN, NEW_SOFT_START, OFF, POST, PREPARE, PREPARE_TO_STOP, PRE_WATCH, READY,
                           REASONS, REDUCED, RESUME, S, SAID, SHUTDOWN, SOUNDS, STOP, TEST, TURN, VIBRO, WORDS,
                           minutes)


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
