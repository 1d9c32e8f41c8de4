// The observer's page: distance first, what was heard, what is allowed, what the source does, how well we hear.
import {
  $, Alarm, adviceFor, adviceWords, clock, connect, el, faults, keyed, link, loadPermit, plainWords, remains, remembered,
  remember, sentence, setShape, setText, span, startPalette, startSound, stationAnswers, untilLeft, untilTitle, utc, watchNow,
} from "/page.js";
import { drawContacts, showContact } from "/contacts.js";
import { chooseEntry, person, send, startEntry } from "/entry.js";
import { drawLadder } from "/ladder.js";
import { drawHandOver, startHandOver } from "/handover.js";
import { drawMarks, markNow, remindOfMarks, startHear } from "/hear.js";
import { startStrips } from "/strips.js";
import { drawVoice, startVoice } from "/voice.js";
import { drawResearch, drawSums, startSums } from "/sums.js";

const alertSound = new Alarm(20);
const verdictSound = new Alarm(10);
const faultSound = new Alarm(20);
let site = null;

function drawFaults(found, advice) {
  keyed($("faults"), found, (fault) => fault.code, () => el("div", { class: "fault" }, el("strong"), el("span")), (node, fault) => {
    const stays = advice && fault.grave ? remains(advice.advice) : "";
    setText(node.firstChild, fault.title + "." + (stays ? " " + stays + "." : ""));
    setText(node.lastChild, fault.text);
  });
}

function drawAdvice(advice, withdrawn) {
  const words = advice && !withdrawn ? adviceWords(advice.advice) : adviceWords("");
  $("instruction").dataset.level = words.level;
  setShape($("shape"), words.shape);
  setText($("marker"), words.marker);
  setText($("words"), words.words + ".");
  const why = advice ? sentence(advice.reason) + (advice.clause ? " (" + advice.clause + ")" : "") : "Nothing is asked of the crew.";
  setText($("reason"), withdrawn ? "‘" + advice.advice + "’ is withdrawn while this lasts." : (advice ? plainWords(advice.advice, site && site.permit.activity) + " " : "") + why);
  const tags = [];
  if (advice && !advice.confirmed) tags.push("not yet confirmed");
  if (advice && !advice.recorded) tags.push("not yet recorded");
  keyed($("tags"), withdrawn ? [] : tags, (text) => text, (text) => el("span", { class: "tag", text }), () => {});
  setText($("since"), advice ? utc(advice.since_s) + " UTC, " + span(watchNow() - advice.since_s) + " ago" : "–");
  const until = advice ? advice.until_s : null, title = advice && !withdrawn ? untilTitle(advice.advice) : "";
  $("until").parentNode.hidden = !title || until === null;
  setText($("until_title"), title);
  setText($("until"), until === null ? "–" : utc(until) + " UTC, " + untilLeft(advice.advice, until - watchNow()));
  $("requires").parentNode.hidden = !(advice && advice.requires) || withdrawn;
  setText($("requires"), (advice && advice.requires) || "–");
  document.title = (advice && !withdrawn ? words.words + " – " : "") + "Observer";
}

function drawCrew(state) {
  const crew = adviceFor(state, "crew"), asks = Boolean(crew && adviceWords(crew.advice).alert);
  $("sheet").hidden = !asks || adviceWords(crew.advice).withdrawable;
  if (asks) $("sheet").firstChild.href = "/sheet?advice=" + encodeURIComponent(crew.id);
  const countdown = state.contacts.filter((c) => c.state === "open" && c.countdown_ends_s !== null && c.countdown_ends_s > watchNow());
  const lines = [{ key: "advice", text: crew ? crew.advice + (asks ? "" : ", shown") : "nothing shown" }];
  for (const { station, answer, voice } of asks ? stationAnswers(state, site, crew) : []) {
    const said = answer ? `${ANSWERS[answer.answer]} by ${answer.person} ${utc(answer.time_s)}` : "NOT ACKNOWLEDGED";
    lines.push({ key: "at " + station, missing: !answer && !voice, text: `${station}: ${said}` + (voice ? `, passed by voice ${utc(voice.time_s)}` : "") });
  }
  drawVoice(asks ? crew : null, site ? site.stations : []);
  if (countdown.length) lines.push({ key: "countdown", text: "contact " + countdown[0].contact + " goes to the crew in " + span(countdown[0].countdown_ends_s - watchNow()) });
  keyed($("crew"), lines, (line) => line.key, () => el("span"), (node, line) => {
    setText(node, line.text);
    node.classList.toggle("missing", Boolean(line.missing));
  });
}

const ANSWERS = { seen: "acknowledged", stopped: "SOURCE STOPPED, said", declined: "DECLINED" };

function drawPhase(state) {
  const phase = state.phase;
  setText($("phase"), phase.phase);
  setText($("phase_since"), "since " + utc(phase.since_s) + " UTC, for " + span(watchNow() - phase.since_s));
  setText($("phase_reason"), sentence(phase.reason) + (phase.clause ? " (" + phase.clause + ")" : ""));
  setText($("source"), "Source: said " + phase.source_said + ", heard " + (phase.source_heard ? "working" : "silent") + (phase.released_by ? ". Released by " + phase.released_by : ""));
  $("release").hidden = !phase.release_possible;
  keyed($("timers"), state.timers, (timer) => timer.name, () => el("li", { class: "timer" }, el("p", {}, el("b"), el("span")), el("progress"), el("p", { class: "held" })), (node, timer) => {
    const done = timer.elapsed_s >= timer.needed_s, bar = node.querySelector("progress");
    setText(node.querySelector("b"), timer.name);
    setText(node.querySelector("span"), span(Math.min(timer.elapsed_s, timer.needed_s)) + " of " + span(timer.needed_s) + (done ? ", complete" : timer.running ? ", running" : ", held"));
    bar.max = timer.needed_s || 1;
    bar.value = Math.min(timer.elapsed_s, bar.max);
    bar.setAttribute("aria-label", timer.name);
    node.classList.toggle("is_held", !timer.running && !done);
    setText(node.querySelector(".held"), !timer.running && !done ? "Held: " + timer.held_by : "");
  });
}

/** What the planned start needs, each with its time; what can no longer be kept is said first. */
function drawPlan(state) {
  const plan = state.plan, planned = plan.planned_s !== null;
  $("plan").hidden = !planned;
  if (!planned) return;
  setText($("plan_title"), `Plan: start at ${utc(plan.planned_s, false)} UTC, in ${span(plan.planned_s - watchNow())}`);
  setText($("plan_slips"), plan.slips_s > 0 ? `It slips by ${span(plan.slips_s)}: as things stand the earliest start is ${utc(plan.earliest_s)} UTC.` : plan.earliest_s === null ? "As things stand nobody can tell when a start is possible." : "It can be kept as things stand.");
  $("plan_slips").classList.toggle("wrong", plan.slips_s > 0 || plan.earliest_s === null);
  keyed($("plan_steps"), plan.steps, (step) => step.name, () => el("li", {}, el("b"), el("span")), (node, step) => {
    node.classList.toggle("bad", step.late);
    const by = step.latest_s === null ? "" : ` ${step.fact ? "at" : "by"} ${utc(step.latest_s, false)} UTC`;
    setText(node.firstChild, step.name + by);
    setText(node.lastChild, (step.done ? ", done or under way" : step.late ? ", TOO LATE" : "") + (step.earliest_s === null ? "" : `, not before ${utc(step.earliest_s, false)} UTC`) + (step.text ? ": " + step.text : ""));
  });
}

function drawPeople(state) {
  keyed($("people"), state.people, (p) => p.name + "|" + p.watch + "|" + p.station, (p) => {
    const off = el("button", { type: "button", class: "plain", text: "Sign off", "aria-label": "Sign off " + p.name });
    off.addEventListener("click", () => remindOfMarks() || send({ kind: "sign-off", person: p.name, watch: p.watch, ...(p.station ? { station: p.station } : {}) }));
    return el("li", { class: "split" }, el("span"), off);
  }, (node, p) => setText(node.firstChild, `${p.name}, ${p.watch}${p.station ? " (" + p.station + ")" : ""}, ${span(watchNow() - p.since_s)}`));
  keyed($("names"), state.people, (p) => p.name, (p) => el("option", { value: p.name }), () => {});
}

function cells(row, texts) {
  while (row.children.length < texts.length) row.append(el("td"));
  texts.forEach((text, i) => setText(row.children[i], text));
}
const db = (value, relative) => (value === null ? "–" : value.toFixed(1) + (relative ? " rel." : ""));

function drawSource(state) {
  setText($("impulse_count"), state.n_impulses + " of ours in this job");
  const blows = state.impulses.length ? state.impulses.slice(0, 5) : [null];
  keyed($("impulses").tBodies[0], blows, (impulse) => impulse && impulse.id, () => el("tr"), (row, impulse) =>
    cells(row, !impulse ? ["None yet", "", "", "", "", ""] : [utc(impulse.time_s), db(impulse.sel_db, impulse.relative), db(impulse.peak_db, impulse.relative), impulse.t90_s === null ? "–" : (impulse.t90_s * 1000).toFixed(0) + " ms", impulse.whose, ["clipped", "overlapped", "weak", "refused"].filter((mark) => impulse[mark]).join(", ")]));
  keyed($("levels").tBodies[0], state.levels.slice(0, 16), (level) => level.stream + "." + level.channel, () => el("tr"), (row, level) => {
    const high = level.decades.slice(3).map((d) => d.spl_db).filter((v) => v !== null);
    const above = high.length ? 10 * Math.log10(high.reduce((sum, v) => sum + 10 ** (v / 10), 0)) : null;
    const decade = (i) => (level.decades[i] ? db(level.decades[i].spl_db, level.relative) : "–");
    cells(row, [level.stream + "." + level.channel, db(level.spl_db, level.relative), db(level.peak_db, level.relative), decade(0), decade(1), decade(2), db(above, level.relative)]);
  });
}

/** Silence says nothing of a group that has no class, or whose calls no stream carries; one class alone is named. */
function drawGroups(state) {
  const named = (hearing) => state.groups.filter((g) => g.hearing === hearing).map((g) => g.group).join(", ");
  const alone = state.groups.map((g) => [g.group, [...new Set(state.streams.flatMap((s) => s.classes).filter((c) => c.group === g.group && c.hearable).map((c) => c.class))]]).filter(([, classes]) => classes.length === 1);
  const known = state.streams.some((stream) => stream.classes.length), eye = named("visual only"), rate = named("not carried by the rate");
  setText($("not_by_ear"), !known ? "" : (rate ? `Not carried by the rate, so not by ear: ${rate}. ` : "") + (eye ? `Visual only, no call of theirs is proof: ${eye}. ` : "")
    + alone.map(([group, classes]) => `Of ${group} only the ${classes[0]}.`).join(" "));
}

function drawHearing(state) {
  drawSums(state, site ? site.permit.zones : []);
  drawResearch(state);
  drawGroups(state);
  keyed($("streams"), state.streams, (stream) => stream.stream, () => el("li", { class: "stream" }, el("b"), el("span")), (node, stream) => {
    node.classList.toggle("bad", !stream.hearing);
    setText(node.firstChild, (stream.hearing ? "Hearing " : "CANNOT HEAR ") + (stream.name || "stream " + stream.stream));
    setText(node.lastChild, ` ${stream.channels} channel${stream.channels === 1 ? "" : "s"}, ${stream.rate_hz / 1000} kHz, ${stream.input}${stream.health ? ": " + stream.health : ""}. Unheard so far: ${span(stream.unheard_s)}; covered by the own source: ${span(stream.masked_s)}.`);
  });
  const record = state.recording;
  setText($("recording"), record.recording ? "Recording: entry " + record.entry + ", complete to " + utc(record.committed_s) + " UTC." : "NOT RECORDING: " + record.text);
  const deaf = state.unheard.filter((gap) => gap.cause !== "own source");
  const gaps = deaf.length ? deaf.slice(0, 5) : [null];
  keyed($("unheard"), gaps, (gap) => gap && [gap.stream, gap.channel, gap.start_s, gap.cause].join(), () => el("li"), (node, gap) =>
    setText(node, !gap ? "None." : `${utc(gap.start_s)} UTC, ${(gap.end_s - gap.start_s).toFixed(1)} s: ${gap.cause}, ${gap.channel ? "channel " + gap.stream + "." + gap.channel : "all of stream " + gap.stream}`));
}

/** Recognised sounds that are no animal's, counted; the last day's count is said where it tells more than the hour's. */
function drawOtherSounds(state) {
  const heard = (state.sounds || []).slice().sort((a, b) => b.last_hour - a.last_hour || b.last_s - a.last_s);
  keyed($("other_sounds"), heard.length ? heard : [null], (sound) => sound && sound.class, () => el("li", {}, el("b"), el("span")), (node, sound) => {
    setText(node.firstChild, sound ? sound.class : "");
    if (!sound) return setText(node.lastChild, "Nothing that was recognised.");
    const taken = sound.calls_taken_back, day = sound.last_day > sound.last_hour ? `, ${sound.last_day.toLocaleString("en")} in the last day` : "";
    setText(node.lastChild, `: ${sound.last_hour.toLocaleString("en")} in the last hour${day}; last at ${utc(sound.last_s)} UTC` + (taken ? `; spoke against ${taken} call${taken === 1 ? "" : "s"}` : "") + ".");
  });
}

/** Why sounds were not calls or impulses: of each class what was found, what was rejected, or that the rate cannot carry it. */
function drawExplanation(state) {
  if (!$("explain").open) return;
  const rows = state.streams.flatMap((stream) => (stream.classes || []).map((account) => ({ stream, account })));
  keyed($("classes"), rows.length ? rows : [null], (row) => row && row.stream.stream + row.account.class, () => el("li", {}, el("b"), el("span")), (node, row) => {
    setText(node.firstChild, row ? row.account.class + (state.streams.length > 1 ? " on " + row.stream.name : "") : "");
    if (!row) return setText(node.lastChild, "Nothing is known yet.");
    const why = Object.entries(row.account.rejected).sort((a, b) => b[1] - a[1]).map(([name, n]) => name + " " + n.toLocaleString("en"));
    node.classList.toggle("soft", !row.account.hearable);
    setText(node.lastChild, row.account.hearable ? `: ${row.account.found} found; ` + (why.length ? "rejected: " + why.join(", ") : "nothing else came near") + "."
      : `: cannot be heard at ${row.stream.rate_hz / 1000} kHz.`);
  });
}

function drawPermit() {
  const permit = site.permit, doubtful = permit.values.filter((value) => value.unverified);
  setText($("site"), site.site || "Hushwatch");
  setText($("permit_name"), permit.title + (permit.year ? " (" + permit.year + ")" : "") + (permit.ended ? `: ENDED, it holds no more since ${permit.ended}` : ""));
  $("permit_name").classList.toggle("demonstration", permit.demonstration);
  setText($("permit_values"), (doubtful.length ? `${doubtful.length} of ${permit.values.length} values are unverified: check each against the document before you rely on it.` : "All values were read from the document or are stated by the site.") + (permit.unwatched.length ? ` Asked of you, and not watched by the program: ${permit.unwatched.join("; ")}.` : ""));
  keyed($("values").tBodies[0], permit.values, (value) => value.key, () => el("tr"), (row, value) => cells(row, [value.key, value.value, value.mark + (value.unverified ? ": check" : ""), (value.who ? value.who + ": " : "") + value.source]));
  $("sign").elements.station.replaceChildren(...site.stations.map((name) => el("option", { text: name })));
}

function sounds(state, advice, withdrawn, found) {
  const asked = state.contacts.filter((contact) => contact.state === "open" && contact.countdown_ends_s !== null);
  verdictSound.set(asked.map((contact) => contact.contact).join(), "hold");
  const words = advice && !withdrawn ? adviceWords(advice.advice) : null;
  const crew = adviceFor(state, "crew");
  const stations = stationAnswers(state, site, crew); // every one with somebody on watch has answered, and at least one
  const answered = stations.some((s) => s.answer || s.voice) && stations.every((s) => s.answer || s.voice || !s.manned);
  const wants = words && words.alert && !answered;
  alertSound.set(wants ? advice.id : "", words && words.level === "stop" ? "stop" : words && words.level === "hold" ? "hold" : "go", !words || words.level === "go" || advice.advice === "do not start");
  faultSound.set(found.filter((fault) => fault.grave).map((fault) => fault.code).join(), "fault");
}

function draw() {
  const now = clock(), state = link.state, found = faults();
  setText($("utc"), now.utc);
  setText($("local"), now.local);
  const advice = state ? adviceFor(state, "observer", "crew") : null;
  const withdrawn = Boolean(advice && adviceWords(advice.advice).withdrawable && found.some((fault) => fault.grave));
  drawFaults(found, advice);
  if (!state) return;
  setText($("job"), state.phase.job ? "job " + state.phase.job : "");
  drawAdvice(advice, withdrawn);
  drawCrew(state);
  drawLadder($("ladder"), site ? site.permit.zones : [], drawContacts(), showContact);
  drawPhase(state);
  drawPlan(state);
  drawPeople(state);
  drawMarks(state);
  drawHandOver(state, site);
  drawSource(state);
  drawHearing(state);
  drawOtherSounds(state);
  drawExplanation(state);
  sounds(state, advice, withdrawn, found);
}

function startForms() {
  $("person").value = remembered("person");
  $("person").addEventListener("change", () => remember("person", $("person").value.trim()));
  $("release").addEventListener("click", () => {
    const who = person($("release"));
    if (who !== null) send({ kind: "release", person: who });
  });
  const sign = $("sign");
  sign.elements.watch.addEventListener("change", () => ($("sign_station").hidden = sign.elements.watch.value !== "crew"));
  sign.addEventListener("submit", (event) => {
    event.preventDefault();
    const who = person(sign.querySelector("button")), watch = sign.elements.watch.value;
    if (who !== null) send({ kind: "sign-on", person: who, watch, ...(watch === "crew" ? { station: sign.elements.station.value } : {}) }, sign);
  });
  startEntry(() => site, () => (link.state ? link.state.impulses : []));
  document.addEventListener("keydown", (event) => {
    if (event.target.closest("input, select, textarea") || event.ctrlKey || event.altKey || event.metaKey || remembered("keys", "on") !== "on") return;
    if (event.key === "m") {
      event.preventDefault();
      markNow();
    } else if (event.key === "s") {
      event.preventDefault();
      chooseEntry("Sighting", site, true);
    } else if (event.key === "c") showContact(-1);
  });
}

startPalette();
startSound($("sound"));
startForms();
startStrips();
startHear();
startVoice();
startHandOver();
startSums(draw);
loadPermit().then((loaded) => {
  site = loaded;
  drawPermit();
  chooseEntry("Sighting", site, false);
  draw();
});
connect(draw);
