// Marks, and what can be heard: one press keeps a moment, a typed line says later what it was; calls, marks, places in a
// strip and the sea live are heard as they are, slowed or shifted down.
import { $, el, keyed, link, post, setText, utc, watchNow } from "/page.js";
import { person } from "/entry.js";

const PIECE_S = 2;
let heard = null, live = null, wanted = null, reminded = -1e9; // wanted: the new mark, whose line takes the keys

const ring = (stream, from, to) => `/api/hear?stream=${stream}&from=${Math.max(0, from).toFixed(3)}&to=${to.toFixed(3)}&`;
const formed = (middle_hz) => `form=${$("form").value}&hz=${Math.round($("about").value * 1000 || middle_hz || 0) || ""}`.replace(/&hz=$/, "");

function play() {
  if (!heard) return;
  stopLive();
  $("player").src = heard.url + formed(heard.hz);
  setText($("hearing"), `Hearing ${heard.text} UTC, ${$("form").selectedOptions[0].text}.`);
  $("player").play().catch(() => {}); // the error event says it
}

/** The clip that was kept for an entry, else the ring's sound. */
function hear(id, stretch, text, hz) {
  const clip = link.state.clips.find((one) => one.causes.includes(id));
  heard = { url: clip ? `/clip/${clip.id}?` : stretch, text, hz };
  play();
}
export const hearCall = (call) => hear(call.id, ring(call.stream, call.start_s - 2, Math.min(call.end_s + 2, call.start_s + 50)) + `channel=${call.channel}&`, `${call.class} of ${utc(call.start_s)}`, (call.low_hz + call.high_hz) / 2);

// ---- marks
const occurred = (s) => ({ occurred_ns: Math.round(s * 1e6) + "000" });
const named = () => ($("person").value.trim() ? { person: $("person").value.trim() } : {});

export async function markNow() {
  const answer = await post({ kind: "mark", ...occurred(watchNow()), ...named() });
  setText($("marked"), answer.id ? "" : "Not marked: " + answer.error);
  wanted = answer.id;
  if (link.state) drawMarks(link.state);
}

async function complete(card, mark, note) {
  const line = card.querySelector("input"), who = person(line.nextSibling);
  if (who === null) return;
  const answer = await post({ person: who, mark: mark.id, ...occurred(mark.time_s), ...note });
  setText(card.querySelector("[role=alert]"), answer.id ? "" : "Not entered: " + answer.error);
  line.toggleAttribute("aria-invalid", !answer.id);
  if (answer.id) $("mark").focus();
}

/** First what completed the mark, then the mark itself: by a note, nothing is deleted. */
async function undo(id) {
  const answer = await post({ kind: "correction", corrects: link.state.marks.find((mark) => mark.id === id).completed_by || id, ...named() });
  setText($("marked"), answer.id ? `Taken back (${answer.id}).` : "Not taken back: " + answer.error);
}

function create(mark) {
  const of = `, mark of ${utc(mark.time_s)}`, button = (text, onclick) => el("button", { type: "button", class: "plain", text, "aria-label": text + of, onclick });
  const line = el("input", { maxlength: 250, autocomplete: "off", placeholder: "porpoise 320 m 045 closing", "aria-label": "What it was" + of });
  const form = el("form", { class: "row" }, line, el("button", { class: "plain", text: "Enter" }), button("As remark", () => complete(card, mark, { kind: "remark", text: line.value })));
  const card = el("li", { class: "mark" }, el("p"), form, el("p", { class: "wrong", role: "alert" }),
    el("p", { class: "choices" }, button("Hear", () => hear(mark.id, ring(1, mark.time_s - 30, mark.time_s + 2), "the mark of " + utc(mark.time_s))), button("Undo", () => undo(mark.id))));
  form.addEventListener("submit", (event) => {
    event.preventDefault();
    complete(card, mark, { kind: "sighting", line: line.value });
  });
  return card;
}

const isOpen = (mark) => mark.state === "open";
export function drawMarks(state) {
  setText($("marks_count"), state.marks.filter(isOpen).length + " open");
  keyed($("marks"), state.marks.filter((mark) => mark.state !== "withdrawn").slice(0, 8), (mark) => mark.id, create, (card, mark) => {
    setText(card.firstChild, `${utc(mark.time_s)} UTC ${mark.person}: ${mark.text || "open"}`);
    card.querySelector("form").hidden = !isOpen(mark);
  });
  const fresh = wanted && $("marks").querySelector(`[data-key="${wanted}"] input`);
  if (!fresh) return;
  wanted = null;
  fresh.focus();
}

/** At a sign-off: whether open marks were shown instead. A second press within a minute signs off all the same. */
export function remindOfMarks() {
  const open = link.state.marks.filter(isOpen).length;
  if (!open || performance.now() - reminded < 60000) return false;
  reminded = performance.now();
  setText($("marked"), `Open marks: ${open}. Say what it was, or press Sign off again.`);
  $("marks").querySelector("form:not([hidden]) input").focus();
  return true;
}

// ---- live: pieces that follow each other, each with the loudness of the first
function stopLive() {
  if (live) live.context.close();
  live = null;
  $("live").setAttribute("aria-pressed", "false");
}

async function playPiece(mine) {
  const answer = await fetch(ring(1, mine.from, mine.from + PIECE_S) + formed(0).replace("slowed", "as-is") + mine.gain);
  if (!answer.ok) throw new Error("no sound");
  mine.gain = mine.gain || "&gain=" + answer.headers.get("Hushwatch-Gain-dB");
  const node = mine.context.createBufferSource();
  node.buffer = await mine.context.decodeAudioData(await answer.arrayBuffer());
  node.connect(mine.context.destination);
  if (mine.next < mine.context.currentTime) mine.next = mine.context.currentTime + 0.6;
  node.start(mine.next);
  mine.next += node.buffer.duration;
  mine.from += PIECE_S;
}

async function goLive() {
  $("player").pause();
  const late = () => watchNow() - PIECE_S - 0.7, mine = (live = { context: new AudioContext(), from: late(), gain: "", next: 0 });
  $("live").setAttribute("aria-pressed", "true");
  setText($("hearing"), "Hearing the sea live, some seconds late.");
  while (live === mine) {
    try {
      if (mine.from < late()) await playPiece(mine);
    } catch {
      mine.from = Math.max(mine.from, late()); // what could not be had is passed over
    }
    await new Promise((resolve) => setTimeout(resolve, 200));
  }
}

export function startHear() {
  $("player").volume = 0.5;
  $("player").addEventListener("error", () => setText($("hearing"), "This sound is not kept, or no longer."));
  for (const id of ["form", "about"]) $(id).addEventListener("change", play);
  $("live").addEventListener("click", () => (live ? stopLive() : goLive()));
  $("mark").addEventListener("click", markNow);
  document.addEventListener("pick", ({ detail: { stream, time_s, call } }) => (call ? hearCall(call) : hear("", ring(stream, time_s - 5, time_s + 5), "10 s about " + utc(time_s))));
}
