// What both pages share: the link to the daemon, times, words, faults, palettes, sound and notes.
// Every text from outside goes through textContent; nothing here builds markup from strings.

import { CREW_WORDS, PLAIN_WORDS, UNTIL_WORDS } from "/words.js";

export const LATE_MS = 2500; // a heartbeat, the watch or the ledger that stands still is said within 3 s

export const $ = (id) => document.getElementById(id);

/** An element with attributes, properties (text, on*) and children. */
export function el(tag, options = {}, ...children) {
  const node = document.createElement(tag);
  for (const [name, value] of Object.entries(options)) {
    if (name === "text") node.textContent = value;
    else if (name.startsWith("on")) node.addEventListener(name.slice(2), value);
    else if (value === true) node.setAttribute(name, "");
    else if (value !== false && value !== null && value !== undefined) node.setAttribute(name, value);
  }
  node.append(...children.filter((child) => child !== null && child !== undefined));
  return node;
}

/** Sets a text only when it differs, so that screen readers and selections are left alone. */
export function setText(node, text) {
  if (node.textContent !== text) node.textContent = text;
}

/** Keeps the children of a list in step with items, by key; nodes stay the same ones while their item lives. */
export function keyed(parent, items, key, create, update) {
  const old = new Map([...parent.children].map((node) => [node.dataset.key, node]));
  const used = new Set();
  let at = parent.firstElementChild;
  for (const item of items) {
    let name = String(key(item));
    while (used.has(name)) name += "+"; // two alike
    used.add(name);
    let node = old.get(name);
    if (node) old.delete(name);
    else {
      node = create(item);
      node.dataset.key = name;
    }
    update(node, item);
    if (node !== at) parent.insertBefore(node, at);
    else at = at.nextElementSibling;
  }
  for (const node of old.values()) node.remove();
}

// ---- how an advice looks: `level` chooses colour and shape, `alert` whether people must answer. Its words are in
// words.js.
const LOOK = {
  "stop": { level: "stop", shape: "octagon", alert: true },
  "reduce power": { level: "hold", shape: "down", alert: true },
  "hold power": { level: "hold", shape: "bars", alert: true },
  "prepare to stop": { level: "hold", shape: "triangle", alert: true },
  "do not start": { level: "hold", shape: "barred", alert: true },
  "new soft start": { level: "go", shape: "stairs", alert: true, withdrawable: true },
  "resume": { level: "go", shape: "right", alert: true, withdrawable: true },
  "may start": { level: "go", shape: "right", alert: true, withdrawable: true },
  "carry on": { level: "calm", shape: "ring", withdrawable: true },
  "": { level: "calm", shape: "ring" },
};
export function adviceWords(word) {
  const known = word in LOOK ? word : "";
  return { ...LOOK[known], ...CREW_WORDS[known] };
}
export function plainWords(word, activity) {
  return (PLAIN_WORDS[activity] || {})[word] || PLAIN_WORDS.any[word] || "";
}

/** What the time beside an advice means; nothing where there is none to wait for. */
export function untilTitle(word) {
  return UNTIL_WORDS[word] || "";
}
/** "in 4:10", "now, if all else is met"; of a time to resume by "4:10 left". */
export function untilLeft(word, left) {
  if (word === "resume") return left > 0 ? span(left) + " left" : "that time is over";
  return left > 0 ? "in " + span(left) : "now, if all else is met";
}

const SHAPES = {
  octagon: "M30 4H70L96 30V70L70 96H30L4 70V30Z",
  triangle: "M50 6L97 92H3Z",
  bars: "M14 8H42V92H14ZM58 8H86V92H58Z",
  down: "M36 4H64V48H94L50 96L6 48H36Z",
  right: "M14 6L92 50L14 94Z",
  stairs: "M4 96V68H32V40H60V12H96V96Z",
  ring: "M50 6A44 44 0 1 0 50 94A44 44 0 1 0 50 6ZM50 24A26 26 0 1 1 50 76A26 26 0 1 1 50 24Z",
  barred: "M50 4A46 46 0 1 0 50 96A46 46 0 1 0 50 4ZM20 40H80V60H20Z",
};
const SVG = "http://www.w3.org/2000/svg";
export function svg(tag, attributes = {}, text) {
  const node = document.createElementNS(SVG, tag);
  for (const [name, value] of Object.entries(attributes)) node.setAttribute(name, value);
  if (text !== undefined) node.textContent = text;
  return node;
}
export function setShape(holder, name) {
  if (holder.dataset.shape === name) return;
  holder.dataset.shape = name;
  const image = svg("svg", { viewBox: "0 0 100 100", "aria-hidden": "true" });
  image.append(svg("path", { d: SHAPES[name], "fill-rule": "evenodd", fill: "currentColor" }));
  holder.replaceChildren(image);
}

// ---- the link: one event stream; the last state stays until a newer one comes
export const link = {
  state: null, // the last state
  heardAt: null, // performance.now() of the last event of any kind
  watchS: 0, watchAt: 0, // watch time, and when it last moved
  committedS: null, committedAt: 0, // how far the ledger holds everything, and when that last moved
  everHeard: false,
  signedOut: false, // the session is over: another sign-in is needed
};
let source = null;
let listener = () => {};

function take(watchS, committedS) {
  const now = performance.now();
  link.heardAt = now;
  link.signedOut = false;
  showDoor();
  link.everHeard = true;
  if (watchS !== link.watchS || !link.watchAt) [link.watchS, link.watchAt] = [watchS, now];
  if (committedS !== link.committedS || !link.committedAt) [link.committedS, link.committedAt] = [committedS, now];
}
/** A way to the sign-in and back here, for as long as one is needed. */
function showDoor() {
  const old = $("to_sign_in");
  if (!link.signedOut) old?.remove();
  else if (!old) document.querySelector("header").append(el("a", { id: "to_sign_in", href: "/sign-in#" + location.pathname + location.search, text: "Sign in" }));
}
function open() {
  source = new EventSource("/api/events");
  source.addEventListener("state", (event) => {
    link.state = JSON.parse(event.data);
    take(link.state.watch_s, link.state.recording.committed_s);
    listener();
  });
  source.addEventListener("beat", (event) => {
    const beat = JSON.parse(event.data);
    if (link.state && beat.run !== link.state.run) location.reload();
    take(beat.watch_s, beat.committed_s);
    listener();
  });
  source.onerror = async () => {
    if (source.readyState !== EventSource.CLOSED) return;
    const answer = await fetch("/api/who").catch(() => null);
    link.signedOut = Boolean(answer && answer.status === 401);
    showDoor();
    setTimeout(open, 1000);
  };
}
/** Opens the one connection; calls `draw` on every event and at least five times a second. */
export function connect(draw) {
  listener = draw;
  open();
  setInterval(draw, 200);
}

/** Watch time now: as last heard, and on by the clock for as long as the link is fresh. */
export function watchNow() {
  return link.watchS + Math.min(Math.max(performance.now() - link.watchAt, 0), LATE_MS) / 1000;
}
export function unixOf(watchS) {
  return (link.state ? link.state.unix_at_zero_s : 0) + watchS;
}
const two = (n) => String(Math.floor(n)).padStart(2, "0");
export function utc(watchS, seconds = true) {
  if (watchS === null || !link.state) return "--:--";
  const date = new Date(unixOf(watchS) * 1000);
  return two(date.getUTCHours()) + ":" + two(date.getUTCMinutes()) + (seconds ? ":" + two(date.getUTCSeconds()) : "");
}
export function local(watchS) {
  if (watchS === null || !link.state) return "--:--";
  const date = new Date(unixOf(watchS) * 1000);
  return two(date.getHours()) + ":" + two(date.getMinutes());
}
/** The clock of the page: watch time's UTC, going on by itself when the link is lost. */
export function clock() {
  const onward = (performance.now() - link.watchAt) / 1000;
  return link.state ? { utc: utc(link.watchS + onward), local: local(link.watchS + onward) } : { utc: "--:--:--", local: "--:--" };
}
/** "4 s", "3:07", "1:02:09". */
export function span(seconds) {
  const s = Math.max(0, Math.round(seconds));
  if (s < 60) return s + " s";
  return (s >= 3600 ? Math.floor(s / 3600) + ":" + two((s / 60) % 60) : Math.floor(s / 60)) + ":" + two(s % 60);
}
export function metres(m) {
  return m >= 1000 ? (m / 1000).toFixed(m < 9950 ? 1 : 0).replace(/\.0$/, "") + " km" : Math.round(m) + " m";
}
export function hertz(hz) {
  return hz >= 1000 ? (hz / 1000).toFixed(hz < 9950 ? 1 : 0).replace(/\.0$/, "") + " kHz" : Math.round(hz) + " Hz";
}
/** "20–173 kHz", "20 Hz–2 kHz". */
export function band(low_hz, high_hz) {
  const [low, high] = [hertz(low_hz), hertz(high_hz)];
  return (low.endsWith(" kHz") && high.endsWith(" kHz") ? low.slice(0, -4) : low) + "–" + high;
}
/** A clause of the watch as a sentence's start. */
export function sentence(text) {
  return text.charAt(0).toUpperCase() + text.slice(1);
}

/** What is wrong with the link, the watch, the hearing and the record; `grave` ones withdraw 'carry on' and 'may start'. */
export function faults() {
  const now = performance.now();
  const said = [];
  if (!link.everHeard) return now > LATE_MS ? [{ code: "contact", title: "NO CONTACT", text: "The daemon has not answered yet.", grave: true }] : [];
  const silent = now - link.heardAt > LATE_MS;
  const still = now - link.watchAt > LATE_MS;
  if (silent) {
    const since = utc(link.watchS + (link.heardAt - link.watchAt) / 1000);
    const text = link.signedOut ? "This page is signed out." : "This page no longer hears from the daemon. It tries again by itself.";
    return [{ code: "contact", title: "NO CONTACT since " + since + " UTC", text, grave: true }];
  }
  if (still) said.push({ code: "watch", title: "CANNOT HEAR", text: "The watch stands still since " + utc(link.watchS) + " UTC.", grave: true });
  const state = link.state;
  if (!state) return said;
  const deaf = state.streams.filter((stream) => !stream.hearing);
  if (!still && deaf.length > 0)
    said.push({ code: "deaf", title: "CANNOT HEAR", text: deaf.map((s) => (s.name || "stream " + s.stream) + ": " + (s.health || "no sound arrives")).join("; "), grave: true });
  if (!state.recording.recording) said.push({ code: "record", title: "NOT RECORDING", text: state.recording.text, grave: true });
  else if (!still && now - link.committedAt > LATE_MS)
    said.push({ code: "record", title: "NOT RECORDING", text: "No entry is confirmed since " + utc(link.committedS) + " UTC.", grave: true });
  for (const text of state.faults) {
    const already = said.some((fault) => text.startsWith(fault.title)) || (!state.recording.recording && text.endsWith(state.recording.text));
    if (!already) said.push({ code: "fault:" + text, title: "FAULT", text, grave: false });
  }
  return said;
}
/** "STOP REMAINS", or nothing where no instruction stays in force. */
export function remains(word) {
  const words = word in LOOK ? adviceWords(word) : null;
  return words && !words.withdrawable ? words.words + " REMAINS" : "";
}

/** The advice in force for a station: its own, else the crew's; null when there is none. */
export function adviceFor(state, ...stations) {
  for (const station of stations) {
    const found = state.advice.find((advice) => advice.in_force && advice.station === station);
    if (found) return found;
  }
  return null;
}

/** What a crew station itself answered to an advice, or null; what was passed to it by voice. */
export function answerOf(advice, station) {
  return (advice && advice.acknowledgements.find((answer) => answer.station === station && answer.answer !== "passed")) || null;
}
export function voiceTo(advice, station) {
  return (advice && advice.acknowledgements.find((answer) => answer.station === station && answer.answer === "passed")) || null;
}
/** Every crew station that should answer or has: of the settings, of people on watch, of answers. */
export function stationAnswers(state, site, advice) {
  const crew = state.people.filter((person) => person.watch === "crew").map((person) => person.station);
  const names = [...(site ? site.stations : []), ...crew, ...(advice ? advice.acknowledgements.map((answer) => answer.station) : [])];
  return [...new Set(names.filter(Boolean))].map((station) => ({ station, answer: answerOf(advice, station), voice: voiceTo(advice, station), manned: crew.includes(station) }));
}

// ---- notes
export async function post(note) {
  try {
    const answer = await fetch("/api/note", {
      method: "POST",
      headers: { "Content-Type": "application/json" },
      body: JSON.stringify(note),
      signal: AbortSignal.timeout(5000),
    });
    const body = await answer.json();
    return answer.ok ? { id: body.id } : body;
  } catch {
    return { error: "no answer; look whether the note arrived before you enter it again" };
  }
}

// ---- what the browser remembers
export function remembered(name, fallback = "") {
  try {
    return localStorage.getItem("hushwatch." + name) || fallback;
  } catch {
    return fallback;
  }
}
export function remember(name, value) {
  try {
    localStorage.setItem("hushwatch." + name, value);
  } catch {
    // a browser that keeps nothing asks again
  }
}

// ---- palettes: day, dusk, night
const PALETTES = ["day", "dusk", "night"];
function setPalette(name) {
  document.documentElement.dataset.palette = name;
  remember("palette", name);
  for (const button of document.querySelectorAll("[data-role=palette]")) setText(button, name[0].toUpperCase() + name.slice(1));
  document.dispatchEvent(new Event("palette"));
}
export function nextPalette() {
  setPalette(PALETTES[(PALETTES.indexOf(document.documentElement.dataset.palette) + 1) % PALETTES.length]);
}
export function startPalette() {
  const asked = new URLSearchParams(location.search).get("palette");
  const kept = remembered("palette", "day");
  setPalette(PALETTES.includes(asked) ? asked : PALETTES.includes(kept) ? kept : "day");
  for (const button of document.querySelectorAll("[data-role=palette]")) button.addEventListener("click", nextPalette);
  const keys = $("keys");
  if (keys) {
    keys.checked = remembered("keys", "on") === "on";
    keys.addEventListener("change", () => remember("keys", keys.checked ? "on" : "off"));
  }
  document.addEventListener("keydown", (event) => {
    const typing = event.target.closest("input, select, textarea");
    if (typing || event.ctrlKey || event.altKey || event.metaKey || remembered("keys", "on") !== "on") return;
    if (event.key === "p") nextPalette();
  });
}

// ---- sound: pulses with four harmonics between 300 and 4,000 Hz (as IEC 60601-1-8 asks of alarm sounds, so that
// they are heard in noise); a browser lets it out only after a press
const PATTERNS = {
  stop: [[0, 523], [0.28, 523], [0.56, 523], [1.1, 523], [1.38, 523], [1.66, 523]],
  hold: [[0, 440], [0.35, 440], [0.7, 349]],
  go: [[0, 330], [0.3, 440]],
  fault: [[0, 392], [0.4, 294]],
};
let context = null;
export const soundArmed = () => context !== null && context.state === "running";
export function play(pattern) {
  if (!soundArmed()) return;
  for (const [at, hz] of PATTERNS[pattern]) {
    const start = context.currentTime + 0.02 + at;
    const envelope = context.createGain();
    envelope.gain.setValueAtTime(0, start);
    envelope.gain.linearRampToValueAtTime(0.16, start + 0.02);
    envelope.gain.setValueAtTime(0.16, start + 0.17);
    envelope.gain.linearRampToValueAtTime(0, start + 0.22);
    envelope.connect(context.destination);
    for (const multiple of [1, 2, 3, 4, 5]) {
      const tone = context.createOscillator();
      tone.frequency.value = hz * multiple;
      tone.connect(envelope);
      tone.start(start);
      tone.stop(start + 0.25);
    }
  }
}
export function startSound(button) {
  const show = () => {
    setText(button, soundArmed() ? "Sound on" : "SOUND OFF – press once to arm");
    button.classList.toggle("off", !soundArmed());
  };
  button.addEventListener("click", async () => {
    context = context || new AudioContext();
    await context.resume();
    play("go");
    show();
  });
  setInterval(show, 1000);
  show();
}
/** An alarm that sounds at once when its key is new, and again every `againS` seconds while it stays (`once`: not again). */
export class Alarm {
  constructor(againS) {
    this.againMs = againS * 1000;
    this.key = "";
    this.at = 0;
  }
  set(key, pattern, once = false) {
    if (!soundArmed()) return (this.key = ""); // what could not sound sounds as soon as it can
    const now = performance.now();
    if (key && (key !== this.key || (!once && now - this.at >= this.againMs))) {
      play(pattern);
      this.at = now;
    }
    this.key = key;
  }
}

export async function loadPermit() {
  for (;;) {
    try {
      return await (await fetch("/api/permit")).json();
    } catch {
      await new Promise((resolve) => setTimeout(resolve, 1000));
    }
  }
}
