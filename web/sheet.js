// The stop sheet: one page about one stop, hold or refusal, whole within seconds and kept up to date while it is open.
import { $, adviceFor, adviceWords, connect, el, faults, keyed, link, loadPermit, metres, sentence, setText, span, startPalette, untilLeft, untilTitle, utc, watchNow } from "/page.js";

const LOOK_BACK_S = 600; // how far before the advice unheard time is counted
let id = new URLSearchParams(location.search).get("advice");
let behind = null, asked = 0;

/** The entries behind the advice; asked again until the ledger holds them. */
async function ask(advice) {
  if (behind || performance.now() < asked || !advice.recorded) return;
  asked = performance.now() + 2000;
  const answer = await fetch("/api/explain?id=" + encodeURIComponent(advice.id)).catch(() => null);
  if (answer && answer.ok) behind = (await answer.json()).entries;
}

function facts(advice, state) {
  const at = (s) => (s === null || s === undefined ? "–" : utc(s) + " UTC");
  const answers = (word) => advice.acknowledgements.filter((a) => a.answer === word).map((a) => `${a.station}, ${a.person}, ${at(a.time_s)}`).join("; ") || "not yet";
  const last = state.impulses.find((impulse) => impulse.whose !== "other");
  const late = last && last.time_s > advice.since_s ? `, ${span(last.time_s - advice.since_s)} after the advice` : "";
  return [
    ["Clause", advice.clause || "–"], ["Job", advice.job || "–"],
    ["Advised", at(advice.since_s) + (advice.confirmed ? "" : ", not yet confirmed by an observer") + (advice.recorded ? "" : ", not yet recorded")],
    ["Passed by voice", answers("passed")], ["Acknowledged", answers("seen")], ["Source stopped, said", answers("stopped")], ["Declined", answers("declined")],
    ["Last impulse heard", last ? at(last.time_s) + late : "none since the program started"],
    [untilTitle(advice.advice) || "Earliest restart", advice.until_s === null ? "nobody can tell yet" : at(advice.until_s) + (advice.in_force ? ", " + untilLeft(advice.advice, advice.until_s - watchNow()) : "")],
    ["Requires", advice.requires || "–"], ["In force", advice.in_force ? "yes" : "no longer"], ["Entry", advice.id],
  ];
}

function whereabouts(contact) {
  const name = `Contact ${contact.contact}, ${contact.group}${contact.grade ? " (" + contact.grade + ")" : ""}: `;
  if (contact.distance_p50_m === null) return name + "how far away is not known.";
  const doubt = contact.distance_p95_m > contact.distance_p05_m * 1.02 ? `, 90 % between ${metres(contact.distance_p05_m)} and ${metres(contact.distance_p95_m)}` : "";
  const inside = contact.p_inside === null ? "" : `; ${Math.round(contact.p_inside * 100)} % likely inside the zone`;
  return `${name}about ${metres(contact.distance_p50_m)} from the source${doubt}${inside}.`;
}

/** One sentence for each group, from what this watch's streams carry and what was unheard before the advice. */
function couldHear(group, advice, state) {
  if (group.hearing === "visual only") return "no: no call of it is proof, it can only be seen.";
  if (group.hearing !== "by ear") return "no: the sampling rate does not carry its calls.";
  const deaf = state.streams.filter((stream) => !stream.hearing).length;
  if (deaf === state.streams.length) return "not now: no stream is heard.";
  const from = Math.max(0, advice.since_s - LOOK_BACK_S);
  const lost = (own) => state.unheard.filter((gap) => (gap.cause === "own source") === own).reduce((sum, gap) => sum + Math.max(0, Math.min(gap.end_s, advice.since_s) - Math.max(gap.start_s, from)), 0);
  const gaps = [[lost(false), "nothing was heard"], [lost(true), "the own source covered some band"]].filter(([s]) => s >= 1).map(([s, why]) => `${why} for ${span(s)}`);
  return `by its calls, if it called near enough (how far is not known)${gaps.length ? `; of the ${span(advice.since_s - from)} before, ${gaps.join(" and ")}` : ""}.`;
}

function play(advice, state) {
  const same = state.advice.filter((one) => Math.abs(one.since_s - advice.since_s) < 2).map((one) => one.id); // the observer's is another entry
  const clip = state.clips.find((one) => one.causes.some((cause) => same.includes(cause) || advice.causes.includes(cause)));
  $("sound").hidden = !clip;
  if (!clip) return setText($("sound_words"), "No sound is kept for it (an advice by sight or by the clock), or not yet.");
  const high = clip.high_hz > 12000, source = `/clip/${clip.id}?form=${high ? "shifted" : "as-is"}`;
  if (!$("sound").src.endsWith(source)) $("sound").src = source;
  setText($("sound_words"), `The call that led to it, ${utc(clip.start_s)} UTC${high ? ", shifted down to be audible" : ""}. Set the volume before you press play: loud playback harms hearing.`);
}

function draw() {
  const state = link.state;
  keyed($("faults"), faults(), (fault) => fault.code, () => el("div", { class: "fault" }, el("strong"), el("span")), (node, fault) => {
    setText(node.firstChild, fault.title + ".");
    setText(node.lastChild, fault.text);
  });
  if (!state) return;
  const advice = id ? state.advice.find((one) => one.id === id) : adviceFor(state, "crew");
  if (!advice) return setText($("reason"), "No such advice is among the last ones; the review has them all.");
  id = advice.id;
  setText($("words"), adviceWords(advice.advice).words + ", " + utc(advice.since_s) + " UTC");
  document.title = $("words").textContent + " – Stop sheet";
  setText($("reason"), sentence(advice.reason) + ".");
  play(advice, state);
  keyed($("facts"), facts(advice, state), ([name]) => name, () => el("div", {}, el("dt"), el("dd")), (node, [name, value]) => {
    setText(node.firstChild, name);
    setText(node.lastChild, value);
  });
  const line = (text) => text, row = () => el("li");
  const contacts = state.contacts.filter((contact) => contact.state === "open").map(whereabouts);
  keyed($("contacts"), contacts.length ? contacts : ["No contact is open."], line, row, setText);
  keyed($("groups"), state.groups, (group) => group.group, () => el("li", {}, el("b"), el("span")), (node, group) => {
    setText(node.firstChild, sentence(group.group) + ": ");
    setText(node.lastChild, couldHear(group, advice, state));
  });
  ask(advice);
  keyed($("behind"), (behind || []).filter((entry) => entry.found && entry.level > 0 && !entry.above), (entry) => entry.id, row, (node, entry) => setText(node, `${entry.utc.slice(11, 19)} UTC: ${entry.words} (${entry.id})`));
}

startPalette();
$("print").addEventListener("click", () => print());
loadPermit().then((loaded) => setText($("site"), loaded.site || "Hushwatch"));
connect(draw);
