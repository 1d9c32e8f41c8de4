// The crew's page: one instruction, why, since when, earliest restart and what it needs, and a way to acknowledge.
// A fault is shown beside the instruction and never in its place; only 'carry on' and 'may start' are withdrawn.
import {
  $, Alarm, adviceFor, adviceWords, answerOf, clock, connect, el, faults, keyed, link, loadPermit, local, plainWords, post, remains,
  remember, remembered, sentence, setShape, setText, span, startPalette, startSound, untilLeft, untilTitle, utc, watchNow,
} from "/page.js";
import { CREW_SENTENCES } from "/words.js";

const station = new URLSearchParams(location.search).get("station") || "crew";
const AGAIN_S = 20; // sounds again within 30 s until acknowledged (IMO MSC.302(87) 7.3.5)
const alertSound = new Alarm(AGAIN_S);
const faultSound = new Alarm(AGAIN_S);
let permit = null;
let sending = ""; // the advice whose acknowledgement is on its way
let problem = "";

function tags(advice) {
  const said = [];
  if (advice && !advice.confirmed) said.push("not yet confirmed");
  if (advice && !advice.recorded) said.push("not yet recorded");
  keyed($("tags"), said, (text) => text, (text) => el("span", { class: "tag", text }), () => {});
}

function showFaults(found, advice) {
  keyed($("faults"), found, (fault) => fault.code, () => el("div", { class: "fault" }, el("strong"), el("span")), (node, fault) => {
    const stays = advice && fault.grave ? remains(advice.advice) : "";
    setText(node.firstChild, fault.title + "." + (stays ? " " + stays + "." : ""));
    setText(node.lastChild, fault.text);
  });
}

function showMessage(advice, withdrawn, waiting) {
  const words = advice && !withdrawn ? adviceWords(advice.advice) : adviceWords("");
  const box = $("instruction");
  box.dataset.level = words.level;
  box.dataset.words = words.words.length > 8 ? "long" : "short";
  box.classList.toggle("unanswered", Boolean(advice && !withdrawn && words.alert && !answerOf(advice, station)));
  setShape($("shape"), words.shape);
  setText($("marker"), words.marker);
  setText($("words"), words.words + ".");
  let plain = advice ? plainWords(advice.advice, permit && permit.permit.activity) : "";
  const said = advice ? adviceWords(advice.advice).words : "";
  if (withdrawn) plain = CREW_SENTENCES.withdrawn.replace("{words}", said[0] + said.slice(1).toLowerCase());
  else if (waiting) plain = CREW_SENTENCES.waits;
  else if (!advice) plain = CREW_SENTENCES.none;
  else if (advice.advice === "hold power" && advice.reason.startsWith("stop if possible")) plain = CREW_SENTENCES.orHold;
  setText($("plain"), plain);
  tags(withdrawn ? null : advice);
  document.title = words.words + " – " + station;
}

function showFacts(advice, found) {
  const why = found.filter((fault) => fault.grave).map((fault) => fault.title.toLowerCase()).join(", ");
  setText($("reason"), advice ? sentence(advice.reason) || "–" : why ? why[0].toUpperCase() + why.slice(1).replace(/ utc/g, " UTC") : "–");
  setText($("clause"), advice ? [advice.clause, advice.job].filter(Boolean).join(" · ") : "");
  setText($("since"), advice ? utc(advice.since_s) + " UTC" : "–");
  setText($("since_more"), advice ? local(advice.since_s) + " local · " + span(watchNow() - advice.since_s) + " ago" : "");
  const until = advice && advice.until_s !== null ? advice.until_s : null;
  const title = advice ? untilTitle(advice.advice) : "";
  $("ends").hidden = !title;
  setText($("until_title"), title);
  setText($("until"), until !== null ? utc(until) + " UTC" : advice && ["may start", "resume"].includes(advice.advice) ? "now" : "when allowed");
  const wait = until === null ? "" : local(until) + " local · " + untilLeft(advice.advice, until - watchNow()) + ". ";
  setText($("requires"), wait + (advice && advice.requires ? "Requires: " + advice.requires + "." : ""));
}

function showAnswer(advice, withdrawn) {
  const words = advice ? adviceWords(advice.advice) : null;
  const asks = Boolean(words && words.alert && !withdrawn);
  const button = $("acknowledge"), mine = asks ? answerOf(advice, station) : null;
  button.hidden = !asks || Boolean(mine);
  button.disabled = asks && sending === advice.id;
  // What became of it, once it was seen: each is an answer of its own, with its own time.
  const open = Boolean(mine && mine.answer === "seen");
  if (!open) $("decline").hidden = true;
  $("next").hidden = !open || !$("decline").hidden;
  $("stopped").hidden = !open || advice.advice !== "stop";
  let text = problem || (asks ? "" : "Nothing to acknowledge now.");
  if (mine && !problem) text = ANSWERED[mine.answer] + (mine.person || "?") + " at " + utc(mine.time_s) + " UTC.";
  else if (asks && !problem && advice.acknowledgements.length)
    text = advice.acknowledgements.map((answer) => answer.station).join(", ") + " acknowledged; " + station + " has not yet.";
  setText($("answered"), text);
}

function sounds(advice, withdrawn, found) {
  const words = advice && !withdrawn ? adviceWords(advice.advice) : null;
  const wants = words && words.alert && !answerOf(advice, station); // another station's answer silences that station alone
  alertSound.set(wants ? advice.id + advice.advice : "", words ? (words.level === "stop" ? "stop" : words.level === "hold" ? "hold" : "go") : "go");
  faultSound.set(found.filter((fault) => fault.grave).map((fault) => fault.code).join(), "fault");
}

function draw() {
  const now = clock();
  setText($("utc"), now.utc);
  setText($("local"), now.local);
  const state = link.state;
  const advice = state ? adviceFor(state, station, "crew") : null;
  const found = faults();
  const withdrawn = Boolean(advice && adviceWords(advice.advice).withdrawable && found.some((fault) => fault.grave));
  setText($("job"), state && state.phase.job ? "job " + state.phase.job : "");
  showFaults(found, advice);
  showMessage(advice, withdrawn, !state);
  showFacts(withdrawn ? null : advice, found);
  showAnswer(advice, withdrawn);
  sounds(advice, withdrawn, found);
  const names = state ? state.people.filter((person) => person.watch === "crew") : [];
  keyed($("crew_names"), names, (person) => person.name, (person) => el("option", { value: person.name }), () => {});
}

const ANSWERED = { seen: "Acknowledged by ", stopped: "SOURCE STOPPED, said by ", declined: "CANNOT COMPLY, said by " };

async function acknowledge(word, more = {}) {
  const advice = link.state && adviceFor(link.state, station, "crew");
  const person = $("person").value.trim();
  if (!advice) return;
  if (!person) {
    problem = "Enter your name, then acknowledge.";
    $("person").focus();
    draw();
    return;
  }
  remember("crew." + station, person);
  sending = advice.id;
  draw();
  const answer = await post({ kind: "acknowledgement", person, station, advice: advice.id, answer: word, ...more });
  if (answer.error) sending = ""; // else the button waits for the state that says so
  problem = answer.error ? "Not sent: " + answer.error : "";
  draw();
}

startPalette();
startSound($("sound"));
setText($("station"), station);
$("person").value = remembered("crew." + station);
$("acknowledge").addEventListener("click", () => acknowledge("seen"));
$("person").addEventListener("keydown", (event) => event.key === "Enter" && !$("acknowledge").hidden && acknowledge("seen"));
$("stopped").addEventListener("click", () => acknowledge("stopped"));
$("cannot").addEventListener("click", () => {
  $("decline").hidden = false;
  $("decline").elements.rank.focus();
  draw();
});
$("decline").addEventListener("reset", () => {
  $("decline").hidden = true;
  draw();
});
$("decline").addEventListener("submit", (event) => {
  event.preventDefault();
  acknowledge("declined", Object.fromEntries(new FormData(event.target)));
});
loadPermit().then((loaded) => {
  permit = loaded;
  draw();
});
connect(draw);
