// Strips of sound: low, middle, high band. Time runs along, loudness is shade, above what is usual in its row;
// calls are marks in the margin below, impulses ticks, unheard time hatching.
import { hearCall } from "/hear.js";
import { band as bandText, el, hertz, keyed, link, local, setText, utc, watchNow } from "/page.js";

const MARGIN = 20; // of the marks, in pixels at 15 px letters
const KEEP_S = 1800;
const SHADE_FROM = 4, SHADE_STEPS = 44; // steps of 0.5 dB: shade begins 2 dB above the usual and is full 22 dB higher

const bands = new Map(); // name -> { low_hz, high_hz, rows, times: [], levels: [Uint8Array] }
const calls = new Map(); // id -> call, for as long as the strips reach back
const impulses = new Map();
let windowS = 60;
let backS = 0; // how far the strips are scrolled back
let newest = null;
let asking = false;
let stream = 1;

function takeSound(answer) {
  for (const band of answer.bands) {
    if (!bands.has(band.band)) bands.set(band.band, { rows: answer.rows, times: [], levels: [] });
    const kept = bands.get(band.band);
    [kept.low_hz, kept.high_hz] = [band.low_hz, band.high_hz];
    const bytes = Uint8Array.from(atob(band.levels), (letter) => letter.charCodeAt(0));
    band.times_s.forEach((time, i) => {
      if (kept.times.length && time <= kept.times[kept.times.length - 1]) return;
      kept.times.push(time);
      kept.levels.push(bytes.subarray(i * answer.rows, (i + 1) * answer.rows));
    });
    while (kept.times.length && kept.times[0] < watchNow() - KEEP_S) {
      kept.times.shift();
      kept.levels.shift();
    }
    if (kept.times.length) newest = Math.max(newest === null ? 0 : newest, kept.times[kept.times.length - 1]);
    kept.usual = usualOf(kept);
  }
}

/** Each row's usual level: the 30 % quantile of what is kept. */
function usualOf(kept) {
  const step = Math.max(1, Math.floor(kept.levels.length / 240));
  return Array.from({ length: kept.rows }, (_, row) => {
    const some = [];
    for (let i = 0; i < kept.levels.length; i += step) some.push(kept.levels[i][row]);
    some.sort((a, b) => a - b);
    return some.length ? some[Math.floor(some.length * 0.3)] : 0;
  });
}

async function ask() {
  if (asking || !link.state) return;
  asking = true;
  try {
    const end = link.watchS + 1;
    let from = newest === null ? Math.max(0, end - KEEP_S) : newest;
    while (from < end) {
      const to = Math.min(end, from + 290); // an answer holds at most 300 s
      takeSound(await (await fetch(`/api/sound?stream=${stream}&from=${from.toFixed(3)}&to=${to.toFixed(3)}`)).json());
      from = to;
    }
  } catch {
    // the link says so; the next second tries again
  }
  asking = false;
}

/** Pixels of a canvas for one pixel at 15 px letters. */
function unitOf(canvas) {
  return ((canvas.width / canvas.clientWidth) * parseFloat(getComputedStyle(document.documentElement).fontSize)) / 15;
}

function colours() {
  const style = getComputedStyle(document.documentElement);
  const rgb = (name) => style.getPropertyValue(name).trim().split(/\s+/).map(Number);
  return { quiet: rgb("--quiet"), loud: rgb("--loud"), ink: style.getPropertyValue("--ink"), soft: style.getPropertyValue("--soft") };
}

function paintSound(canvas, kept, start, end, shade) {
  const width = canvas.width, context = canvas.getContext("2d");
  const image = new ImageData(width, kept.rows);
  const perPixel = (end - start) / width;
  let first = 0;
  for (let x = 0; x < width; x++) {
    const from = start + x * perPixel, to = from + Math.max(perPixel, 0.25);
    while (first < kept.times.length && kept.times[first] + 0.25 <= from) first++;
    const heard = first < kept.times.length && kept.times[first] < to;
    for (let row = 0; row < kept.rows; row++) {
      let loud = 0;
      for (let i = first; i < kept.times.length && kept.times[i] < to; i++) loud = Math.max(loud, kept.levels[i][row] - kept.usual[row]);
      const part = Math.min(Math.max((loud - SHADE_FROM) / SHADE_STEPS, 0), 1);
      const at = 4 * ((kept.rows - 1 - row) * width + x);
      for (let c = 0; c < 3; c++) image.data[at + c] = shade.quiet[c] + part * (shade.loud[c] - shade.quiet[c]);
      image.data[at + 3] = heard ? 255 : 0;
    }
  }
  const small = new OffscreenCanvas(width, kept.rows);
  small.getContext("2d").putImageData(image, 0, 0);
  context.clearRect(0, 0, canvas.width, canvas.height);
  context.imageSmoothingEnabled = true;
  context.drawImage(small, 0, 0, width, kept.rows, 0, 0, width, canvas.height - MARGIN * unitOf(canvas));
}

function paintCall(context, call, x1, x2, y, ratio) {
  context.lineWidth = 3 * ratio;
  context.lineCap = "round";
  if (call.form === "train") {
    for (let x = x1; x <= Math.max(x2, x1 + 6 * ratio); x += 5 * ratio) context.fillRect(x, y - 4 * ratio, 2 * ratio, 8 * ratio);
    return;
  }
  context.beginPath();
  context.moveTo(x1, y);
  context.lineTo(Math.max(x2, x1 + 4 * ratio), y);
  context.stroke();
}

function callsIn(kept, start, end) {
  const middle = (call) => Math.sqrt(call.low_hz * call.high_hz);
  return [...calls.values()]
    .filter((call) => call.stream === stream && call.end_s >= start && call.start_s <= end && middle(call) >= kept.low_hz && middle(call) < kept.high_hz)
    .sort((a, b) => a.start_s - b.start_s);
}

function paintMargin(canvas, kept, start, end, shade) {
  const context = canvas.getContext("2d"), ratio = unitOf(canvas);
  const top = canvas.height - MARGIN * ratio, x = (s) => ((s - start) / (end - start)) * canvas.width;
  context.strokeStyle = context.fillStyle = shade.ink;
  context.font = `${11 * ratio}px system-ui, sans-serif`;
  context.textBaseline = "middle";
  const y = top + 10 * ratio;
  const party = []; // marks close together share one name
  for (const call of callsIn(kept, start, end)) {
    const x1 = x(call.start_s), x2 = Math.max(x(call.end_s), x1 + 6 * ratio), last = party[party.length - 1];
    paintCall(context, call, x1, x2, y, ratio);
    const name = call.group === "unknown" ? call.class : call.group;
    if (last && x1 < last.x2 + 12 * ratio && last.name === name) last.x2 = Math.max(last.x2, x2);
    else party.push({ name, x1, x2 });
  }
  let free = 0;
  party.forEach((marks, i) => {
    const long = context.measureText(marks.name).width, gap = 5 * ratio;
    const next = i + 1 < party.length ? party[i + 1].x1 : canvas.width;
    const at = marks.x2 + gap + long <= next ? marks.x2 + gap : marks.x1 - gap - long;
    if (at >= free) context.fillText(marks.name, at, y);
    free = Math.max(marks.x2, at + long) + gap;
  });
  context.fillStyle = shade.soft;
  for (const impulse of impulses.values())
    if (impulse.stream === stream && impulse.time_s >= start) context.fillRect(x(impulse.time_s), top, 1.5 * ratio, 4 * ratio);
  for (const gap of link.state.unheard) {
    if (gap.stream !== stream || gap.end_s < start || gap.low_hz >= kept.high_hz || gap.high_hz <= kept.low_hz) continue;
    context.strokeStyle = shade.soft;
    context.lineWidth = ratio;
    for (let at = x(gap.start_s); at < x(gap.end_s); at += 5 * ratio) {
      context.beginPath();
      context.moveTo(at, top + 18 * ratio);
      context.lineTo(at + 5 * ratio, top + 2 * ratio);
      context.stroke();
    }
  }
}

function remember() {
  for (const call of link.state.calls) calls.set(call.id, call);
  for (const impulse of link.state.impulses) impulses.set(impulse.id, impulse);
  const oldest = watchNow() - KEEP_S;
  for (const [id, call] of calls) if (call.end_s < oldest) calls.delete(id);
  for (const [id, impulse] of impulses) if (impulse.time_s < oldest) impulses.delete(id);
}

function describe(kept, name, start, end) {
  return `${name} band, ${hertz(kept.low_hz)} to ${hertz(kept.high_hz)}, ${callsIn(kept, start, end).length} calls from ${utc(start)} to ${utc(end)} UTC`;
}

export function drawStrips() {
  if (!link.state) return;
  remember();
  const holder = document.getElementById("strips");
  const end = (newest === null ? watchNow() : newest + 0.25) - backS, start = end - windowS, shade = colours();
  const order = ["high", "middle", "low"].filter((name) => bands.has(name));
  keyed(holder, [...order, "axis"], (name) => name, (name) => name === "axis" ? el("div", { class: "time_axis" }) :
    el("figure", {}, el("figcaption", {}, el("b", { text: name }), el("span")), el("canvas", { role: "img", onclick: (event) => pick(event, name) })), (node, name) => {
    if (name === "axis") {
      keyed(node, order.length ? [0, 1, 2, 3, 4] : [], (i) => i, () => el("span"), (mark, i) => setText(mark, utc(start + (i * windowS) / 4) + (i === 4 ? " UTC" : "")));
      return;
    }
    const kept = bands.get(name), canvas = node.lastChild, ratio = window.devicePixelRatio || 1;
    setText(node.firstChild.lastChild, bandText(kept.low_hz, kept.high_hz));
    const width = Math.round(canvas.clientWidth * ratio), height = Math.round(canvas.clientHeight * ratio);
    if (width === 0) return;
    if (canvas.width !== width || canvas.height !== height) [canvas.width, canvas.height] = [width, height];
    paintSound(canvas, kept, start, end, shade);
    paintMargin(canvas, kept, start, end, shade);
    canvas.setAttribute("aria-label", describe(kept, name, start, end));
  });
}

/** The place that was pointed at, with the call that is there; calls are also in the list below, for the keys. */
function pick(event, name) {
  const box = event.target.getBoundingClientRect(), end = newest + 0.25 - backS;
  const time_s = end - windowS * (1 - (event.clientX - box.left) / box.width), near = windowS / 100;
  const call = callsIn(bands.get(name), time_s - near, time_s + near).pop();
  document.dispatchEvent(new CustomEvent("pick", { detail: { stream, time_s, call } }));
}

/** By half of what is shown, as far as columns are kept; 0: now. */
function scroll(steps) {
  backS = steps ? Math.min(Math.max(0, backS - (steps * windowS) / 2), Math.max(0, KEEP_S - windowS)) : 0;
  setText(document.getElementById("sound_stream"), backS ? `${Math.round(backS / 6) / 10} min back` : "");
  drawStrips();
}

function listCalls() {
  if (!link.state) return;
  keyed(document.getElementById("calls"), link.state.calls.slice(0, 12), (call) => call.id, (call) => el("li", { class: "split" }, el("span"), el("button", { type: "button", class: "plain", text: "Hear", "aria-label": `Hear ${call.class} of ${utc(call.start_s)}`, onclick: () => hearCall(call) })), (node, call) =>
    setText(node.firstChild, `${utc(call.start_s)} UTC (${local(call.start_s)} local): ${call.class}, ${call.group}${call.group === "unknown" ? "" : `, ${call.certainty}`}, ${bandText(call.low_hz, call.high_hz)}, ${(call.end_s - call.start_s).toFixed(1)} s` +
      (call.n_pulses ? `, ${call.n_pulses} pulses` : "") + `, ${call.snr_db.toFixed(0)} dB above the background, ${call.level_db.toFixed(0)} dB${call.relative ? " rel." : " re 1 µPa"}, channel ${call.channel}`));
}

export function startStrips() {
  const holder = document.getElementById("window");
  for (const [seconds, name] of [[60, "1 min"], [300, "5 min"], [1800, "30 min"]]) {
    const button = el("button", { type: "button", class: "plain", text: name, "aria-pressed": String(seconds === windowS) });
    button.addEventListener("click", () => {
      windowS = seconds;
      for (const other of holder.querySelectorAll("[aria-pressed]")) other.setAttribute("aria-pressed", String(other === button));
      scroll(0);
    });
    holder.append(button);
  }
  for (const [name, steps] of [["Earlier", -1], ["Later", 1], ["Now", 0]]) holder.append(el("button", { type: "button", class: "plain", text: name, onclick: () => scroll(steps) }));
  document.addEventListener("palette", drawStrips);
  setInterval(async () => {
    await ask();
    drawStrips();
    listCalls();
  }, 1000);
}
