"""Goes with permit_oracle.py: a day, moment after moment, and what the clauses say at each.

There is no table of phases here and no timer. What is kept is what happened: when it was watched and when not, when
the source sounded and who said or heard so, what an animal was asked and passed for. Where the watch stands, how much
of the pre-watch is done and what is told is worked out from that at every moment anew:

- the pre-watch is a set of stretches of time in which everything that the clause names was so, the newest of them; a
  hole is a stretch in which anything of it was not so, whatever it was;
- the source sounds or is silent by the newest word or sound; a silence is a shutdown, a break, the end of the work or
  none of these by what was in force when it began, and stays that until its clause says that it is over."""
import math

from permit_oracle import (A_DELAY, A_HOLD, A_STOP, BREAK, CARRY_ON, DELAY, DETERRENT, DO_NOT_START, DRILLING, LOG,
                           MAY_START, MIN, NEW_SOFT_START, NEVER, OFF, POST, PREPARE, PREPARE_TO_STOP, PRE_WATCH,
                           READY, REASONS, REDUCED, RESUME, S, SAID, SHUTDOWN, SOFT, SOUNDS, STOP, TEST, TURN, VIBRO,
                           WORDS, minutes)

DAY = 24 * 60 * MIN
SILENCE, LATE = 60 * S, 5 * S
STEADY = (VIBRO, DRILLING, TURN, TEST)  # silence says nothing of these


def union(spans):
    out = []
    for a, b in sorted(spans):
        if out and a <= out[-1][1]:
            if b > out[-1][1]:
                out[-1] = (out[-1][0], b)
        elif b > a:
            out.append((a, b))
    return out


def common(some, others):
    return union([(max(a, c), min(b, d)) for a, b in some for c, d in others if min(b, d) > max(a, c)])


def without(spans, cut):
    for c, d in cut:
        spans = [(x, y) for a, b in spans for x, y in ((a, min(b, c)), (max(a, d), b)) if y > x]
    return spans


def measure(spans):
    return sum(b - a for a, b in spans)


class Day:
    def __init__(self, oracle):
        self.o, self.p = oracle, oracle.p
        self.t, self.upto, self.animals, self.on, self.kept = 0, 0, [], set(), False
        # the source: the newest sound, or silence and what kind of it
        self.sound, self.silence, self.gone = None, None, True
        self.since, self.quiet, self.was = 0, -1, SOFT
        self.said, self.said_at, self.heard, self.impulse_at, self.unsaid = "off", -1, False, -1, 0
        self.heard_in, self.job, self.phase = False, False, OFF
        # the watch
        self.counted, self.counts, self.missed, self.missing, self.down = [], False, [], None, False
        self.pieces, self.deaf_spans = [[] for _ in range(oracle.channels)], []
        self.good, self.is_good, self.good_since = [], False, 0
        self.out, self.out_since, self.heard_only = [], None, -1
        self.orders = []
        # what was told
        self.asked, self.passed, self.order = {}, set(), {}
        self.released, self.override, self.told = False, False, False
        self.unallowed, self.unallowed_for, self.turn_minutes = LOG, None, math.nan

    # ---- the watch: the stretches in which all that the clause names was so
    def row(self):
        return self.o.row(self.upto)

    def needed(self):
        return minutes(self.row()["minutes"])

    def is_kept(self):
        return self.kept

    def anybody(self):
        return any(w != "crew" for _, w in self.on)

    def credit(self):
        return measure(self.counted)

    def complete(self):
        return self.credit() >= self.needed() and self.is_kept()

    def deaf(self):
        return bool(self.row()["acoustic"]) and any(b - a >= 10 * S and self.t < b + 11 * S for a, b in self.deaf_spans)

    def hole_limit(self):
        own = self.p["hole_minutes"]
        return minutes(own if own > 0 else self.o.breaks(self.t)[-1]["minutes"])

    def accrue(self, to):
        """Lets time pass: what is more than the pre-watch and a hundredth of it, the oldest, counts no more."""
        if self.counts:
            if self.counted and self.counted[-1][1] == self.t:
                self.counted[-1] = (self.counted[-1][0], to)
            elif to > self.t:
                self.counted.append((self.t, to))
            spare = self.credit() - self.needed() - self.needed() // 100
            while spare > 0:
                a, b = self.counted.pop(0)
                if b - a > spare:
                    self.counted.insert(0, (a + spare, b))
                spare -= b - a
        self.t = to

    def anew(self):
        self.counted = []

    def judge_hole(self, start, end):
        """What was kept before a hole that is too long, whatever it is made of, counts no more."""
        holes = self.missed + ([(self.missing, self.t)] if self.missing is not None else [])
        holes = union(holes + (self.deaf_spans if self.row()["acoustic"] else []) + [(start, end)])
        for a, b in holes:
            if a <= start and b >= end and b - a >= self.hole_limit():
                self.counted = [(max(c, b), d) for c, d in self.counted if d > b]

    def judge_watch(self):
        kept = self.is_kept() and not self.down
        if not kept and self.missing is None:
            self.missing = self.t
        if self.missing is not None:
            self.judge_hole(self.missing, self.t)
        if kept and self.missing is not None:
            self.missed.append((self.missing, self.t))
            self.missing = None
        worth = self.p["break_watch"]
        self.counts = kept and (worth == "stands" if self.phase in SOUNDS else
                                worth != "nothing" if self.phase in (BREAK, SHUTDOWN, POST) else True)

    def take_unheard(self, e):
        if not e["deaf"]:
            return
        for n, channel in enumerate(self.pieces, 1):
            if e["channel"] in (0, n):
                channel.append((e["start"], e["end"]))
        spans = union(self.pieces[0])
        for channel in self.pieces[1:]:
            spans = common(spans, union(channel))
        newly = without([(e["start"], e["end"])], self.deaf_spans)
        self.deaf_spans = spans
        if self.row()["acoustic"]:
            self.counted = without(self.counted, common(newly, spans))
            for a, b in common(newly, spans):
                self.judge_hole(a, b)

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
        if self.phase not in SOUNDS and self.phase != BREAK and action < A_DELAY and self.holds_start(a):
            action = A_DELAY
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

    def sure(self, a):
        return a.confirmed or (a.vouched and a.sure)

    def present(self):
        for a in self.animals:
            wanted = self.wanted(a)
            if wanted < PREPARE:
                continue
            self.asked.setdefault(a.number, self.t)
            if self.sure(a) or self.t >= self.asked[a.number] + round(self.p["countdown_s"] * 1e9):
                self.passed.add(a.number)
            if a.number in self.passed and self.phase in SOUNDS:
                self.order[a.number] = max(wanted, self.order.get(a.number, LOG))

    def forget(self, number):
        self.asked.pop(number, None)
        self.passed.discard(number)
        self.order.pop(number, None)

    # ---- where the watch stands
    def conditions(self):
        good = self.good + ([(self.good_since, self.t)] if self.is_good else [])
        return self.o.conditions(self.t, self.upto, self.on, self.quiet_end(), self.deaf(), (good, self.orders))

    def quiet_end(self):
        """When the sound of the last work ended."""
        return self.last_quiet if self.sound is None else -1

    last_quiet = -1

    def before_sound(self):
        if not self.anybody() or (self.gone and not self.is_kept()):
            return OFF
        if self.holder(False):
            return DELAY
        if self.complete() and not self.conditions():
            return READY
        e = self.o.newest(self.upto, "deterrent", "answer")
        return DETERRENT if e and e["answer"] == "on" else PRE_WATCH

    def silence_needed(self):
        """The pauses between the bursts of a soft start are no silence."""
        return SILENCE + (round(self.p["burst_pause_s"] * 1e9) if self.phase == SOFT else 0)

    def silence_is_over(self):
        if self.silence == SHUTDOWN:
            return not self.holder(True) and not self.order_in_force()
        if not self.anybody():
            self.gone = True
            return True
        if self.silence == BREAK and any(self.wanted(a) >= A_DELAY and not self.question(a) for a in self.animals):
            return True
        return self.t >= self.over()

    def stand(self):
        """Where the watch stands now; asks until nothing changes any more."""
        while True:
            self.judge_watch()
            self.present()
            if self.sound is None and self.silence is not None and self.silence_is_over():
                self.silence = None
            now = (self.sound if self.sound is not None else
                   self.silence if self.silence is not None else self.before_sound())
            if now == self.phase:
                return
            self.go(now)

    def go(self, phase):
        if phase in (SHUTDOWN, REDUCED):
            self.orders.append(self.t)
        self.phase, self.since = phase, self.t
        self.gone = phase == OFF
        if phase != READY:
            self.released = False
        self.judge_watch()

    def begin(self, state):
        """The source sounds, as is said or heard."""
        if self.sound is None:
            p, was = self.p, self.phase
            needs = (p["test_pre_watch"] if state == TEST and p["test"] else
                     p["steady_pre_watch"] if state in (VIBRO, DRILLING) and p["steady"] else
                     state not in (DRILLING, TURN))
            self.unallowed, self.unallowed_for = LOG, None
            if needs and was != BREAK:
                ready = was == READY and not self.holder(True)
                self.unallowed = A_STOP if not ready or self.conditions() else LOG if self.released else A_HOLD
            if p["break_watch"] != "stands":
                self.anew()
            self.quiet, self.silence = -1, None
        self.sound = state
        if state != self.phase:
            self.go(state)

    def end(self, off, quiet, too_long):
        """The source is silent: since `quiet`, too long for a break already, or is off for good."""
        unallowed, self.unallowed, self.unallowed_for = self.unallowed, LOG, None
        self.was, self.sound, self.heard_in, self.override = self.sound, None, False, False
        self.quiet = self.last_quiet = quiet
        self.silence = (POST if off else SHUTDOWN if self.order_in_force() else
                        None if unallowed > LOG or too_long else BREAK)
        # Before the silence what the animals ask for is what they asked for while it sounded.
        self.go(self.silence if self.silence is not None else self.before_sound())

    # ---- breaks
    def over(self):
        if self.silence == POST and self.p["post_minutes"] > 0:
            return self.quiet + minutes(self.p["post_minutes"])
        return self.row_over(self.o.breaks(self.t)[-1])

    def row_over(self, row):
        return self.quiet + minutes(row["minutes"]) + (1000 if row["included"] else 0)

    def break_row(self):
        rows = self.o.breaks(self.t)
        return next((r for r in rows if self.t < self.row_over(r)), rows[-1])

    # ---- a moment: what time alone brings comes first
    def settle(self):
        for a in self.animals:
            if a.since is not None and self.o.clear_at(a, self.t) < 0 and a.state == "open":
                if self.order.get(a.number) == A_STOP and self.sound is not None and self.unallowed != A_STOP:
                    self.unallowed, self.unallowed_for = A_STOP, a.number
                self.forget(a.number)
        self.o.pass_time(self.animals, self.t)
        self.o.begin_episodes(self.animals, self.t)
        if self.heard and self.t >= self.impulse_at + self.silence_needed():
            self.heard, self.unsaid = False, 0
            if self.heard_in and self.sound is not None and self.sound not in STEADY:
                self.quiet = self.impulse_at
                self.end(False, self.impulse_at, self.t + 1000 >= self.row_over(self.o.breaks(self.t)[-1]))
        self.look()
        self.stand()
        if self.phase != OFF:
            self.told = True

    def look(self):
        p, o = self.p, self.o
        good = bool(not self.down and p["start"] and p["good_minutes"] > 0 and o.light(self.t) == "day" and
                    o.kept_as(self.on, "visual") and not o.poor(self.t, self.upto))
        if good and not self.is_good:
            self.good_since = self.t
        if self.is_good and not good:
            self.good.append((self.good_since, self.t))
        self.is_good = good
        out = p["outage"] and self.phase in SOUNDS and (self.deaf() or not o.kept_as(self.on, "acoustic"))
        if out and self.out_since is None:
            self.out_since = self.t
        if not out and self.out_since is not None:
            self.out.append((self.out_since, self.t))
            self.out_since = None
        self.heard_only = max([self.heard_only] + [a.last for a in self.animals if a.act and a.calls and not a.seen])

    # ---- the acoustic watch fails while the source sounds
    def out_lately(self):
        return measure([(max(a, self.t - DAY), b) for a, b in self.out + [(self.out_since, self.t)] if b > self.t - DAY])

    def outage_asks(self):
        p, o = self.p, self.o
        if not p["outage"] or self.out_since is None:
            return LOG
        lasted = self.t - self.out_since
        sea = o.newest(self.upto, "weather", "sea_state")
        forbidden = ((p["outage_daylight"] and o.light(self.t) != "day") or
                     (not math.isinf(p["outage_sea"]) and not (sea and sea["sea_state"] <= p["outage_sea"])) or
                     not o.kept_as(self.on, "visual") or
                     (p["outage_quiet"] > 0 and self.heard_only >= 0 and
                      self.out_since - self.heard_only < minutes(p["outage_quiet"])))
        if self.out_lately() > minutes(p["outage_day"]):
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

    # ---- what the station is told, and whether somebody on watch has spoken for it; None: not said here
    def word(self, known, wants):
        wants = [(w, a) for w, a in wants if w >= PREPARE and a.number in known]
        lead = max([w for w, a in wants], default=LOG)
        spoken = {self.sure(a) for w, a in wants if w == lead}
        blind = self.deaf() or not self.is_kept()
        if self.phase in SOUNDS:
            other = max(self.limit(self.unallowed), self.limit(self.asks()))
            if max(lead, other) > LOG:
                return (WORDS.get(max(lead, other), DO_NOT_START),
                        True if other > lead else any(spoken))  # of several one that somebody has spoken for
            may_ask = any(z["action"][self.phase] >= PREPARE for z in self.p["zones"])
            return (PREPARE_TO_STOP if may_ask and blind else CARRY_ON), True
        if self.phase == BREAK:
            lead = max([self.wanted(a) for a in self.animals if a.number in self.asked], default=LOG)
            if lead >= A_DELAY or blind:
                return (STOP if lead == A_STOP else DO_NOT_START), None
            return (NEW_SOFT_START if self.break_row()["soft_start"] else RESUME), True
        if lead >= A_DELAY:
            return (STOP if lead == A_STOP else DO_NOT_START), None
        if self.phase == READY and self.released and not self.holder(True) and not blind:
            return MAY_START, True
        return (DO_NOT_START if self.told else None), None

    # ---- moments at which an answer may change by time alone
    def every_moment(self):
        """Whatever happened, and every time that the permit names after it: no clause is looked at."""
        base = {b for e in self.o.events[:self.upto] for b in (e["at"], e.get("end", 0))} | set(self.asked.values())
        base |= {self.since, self.quiet, self.impulse_at} | {d for span in self.out + self.good for d in span}
        base |= {self.out_since or 0, self.missing or 0} | {b for span in self.missed for b in span}
        return {b + d + e for b in base for d in self.o.durations for e in (0, 1000)} | set(self.o.lights)

    def moments(self):
        p, o = self.p, self.o
        out = [t for t in o.lights if t > self.t][:1]
        for a in self.animals:
            if a.since is not None:
                needed = o.clearance(a)[0]
                out += [d[0] + needed for d in a.detections]
            if a.number in self.asked and a.number not in self.passed:
                out.append(self.asked[a.number] + round(p["countdown_s"] * 1e9))
        if self.silence in (BREAK, POST):
            out += [self.over()] + [self.row_over(r) for r in o.breaks(self.t)]
        if self.missing is not None:
            before = self.missed + (self.deaf_spans if self.row()["acoustic"] else [])
            start = next(a for a, b in union(before + [(self.missing, self.t + 1)]) if b > self.t)
            out.append(start + self.hole_limit())
        if self.counts and self.credit() < self.needed():
            out.append(self.t + self.needed() - self.credit())
        out += [b + 11 * S for a, b in self.deaf_spans[-20:]]
        if self.heard:
            out.append(self.impulse_at + self.silence_needed())
        if p["deterrent"]:
            for e in o.events[:self.upto]:
                if e["kind"] == "deterrent":
                    out += [e["at"] + minutes(p["deterrent_least"]), e["at"] + minutes(p["deterrent_gap"]) + 1000]
        if p["start"]:
            self.start_moments(out)
        if self.phase == TURN:
            out.append(self.since + minutes(p["turn_longest"]) + 1000)
        if self.phase == REDUCED:
            out.append(self.since + minutes(p["small_longest"]) + 1000)
        if self.out_since is not None:
            out += [self.out_since + minutes(p["outage_diagnose"]) + 1000,
                    self.t + minutes(p["outage_day"]) - self.out_lately() + 1000,
                    self.out_since + minutes(p["outage_diagnose"] + p["outage_extra"]) + 1000]
        return out

    def start_moments(self, out):
        p, within = self.p, minutes(self.p["good_within_hours"] * 60)
        out += [x + DAY for x in self.orders]
        if p["closed_from"] and self.o.zero_s is not None:
            out.append((self.t // S + self.o.zero_s) // 86400 * DAY + DAY - self.o.zero_s * S)
        if not p["good_minutes"] > 0 or within >= NEVER:
            return
        # The good watch that is too long ago grows from here on: when what is left is too little.
        left = [(max(a, self.t - within), b) for a, b in self.good if b > self.t - within]
        spare = measure(left) - minutes(p["good_minutes"])
        for a, b in left if spare >= 0 else []:
            if b - a > spare:
                out.append(a + spare + within + 1000)
                break
            spare -= b - a

    def pass_to(self, t):
        every = self.o.durations is not None
        while t > self.t:
            moments = self.moments()
            if every:
                moments += list(self.every_moment())
            ahead = [m for m in moments if self.t < m <= t]
            if not ahead:
                break
            self.accrue(min(ahead))
            self.settle()
        self.accrue(t)

    # ---- what happens
    def take(self, e):
        kind = e["kind"]
        self.pass_to(min(e["down"], e["at"]) if kind == "restart" else e["at"])
        if kind == "restart" and e["at"] > e["down"]:
            self.released, self.down = False, True
            self.look_away()
            self.judge_watch()
            self.accrue(e["at"])
            self.down = False
            self.judge_watch()
        self.upto += 1
        self.o.upto = self.upto
        old_on = self.on
        self.on = self.o.people(self.upto)
        self.kept = self.o.kept(self.upto, self.on)
        if kind == "unheard":
            self.take_unheard(e)
        elif kind == "impulse":
            self.take_impulse(e)
        elif kind == "job":
            self.job = e["answer"] == "open"
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
            self.take_word(e)
        self.settle()

    def look_away(self):
        if self.is_good:
            self.good.append((self.good_since, self.t))
            self.is_good = False

    def take_word(self, e):
        self.said, self.said_at = e["state"], self.t
        if e["state"] in SAID:
            if e["state"] == "line turn":
                self.turn_minutes = e.get("minutes", math.nan)
            self.begin(SAID[e["state"]])
        elif self.sound is not None:
            self.end(e["state"] == "off", self.t, False)
        elif e["state"] == "off" and self.silence == BREAK:
            self.silence = POST
            self.go(POST)

    def take_impulse(self, e):
        """Heard, and not another's: a start where none was said, or the last blows of what was."""
        if e["whose"] == "other":
            return
        quiet_said = self.said not in SAID
        self.heard, self.impulse_at = True, max(self.impulse_at, e["time"])
        spoken_for = self.sound is not None or (quiet_said and self.said_at >= 0 and e["time"] <= self.said_at + LATE)
        self.unsaid = 0 if spoken_for else self.unsaid + 1
        if self.unsaid >= (1 if self.p["explosives"] else 2) and self.job:
            if self.p["break_watch"] != "stands":
                self.anew()
            if self.silence != SHUTDOWN and self.sound is None:
                self.begin(self.was if self.silence == BREAK else SOFT)
        self.heard_in |= self.sound is not None

    def facts(self, t):
        self.pass_to(t)
        allowed = self.phase == READY and not self.holder(True) and not self.deaf()
        silent = self.phase in (OFF, PRE_WATCH, READY, DELAY, DETERRENT)
        wants = [(self.wanted(a), a) for a in self.animals]
        observer, crew = self.word(self.asked, wants), self.word(self.passed, wants)
        return {"phase": self.phase, "complete": self.complete(), "credit": self.credit(), "allowed": allowed,
                "held": self.conditions() if silent else None,
                "observer": observer[0], "crew": crew[0], "spoken": crew[1],
                "inside": {a.number: self.o.clear_at(a, self.t) for a in self.animals
                           if a.since is not None and self.o.clear_at(a, self.t) >= 0}}
