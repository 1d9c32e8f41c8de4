// The auditor's page: one screen at a time, each from questions to the ledger, whose answers come page by page.
import { $, el, post, setText, span, startPalette } from "/page.js";
import { drawSurvey, utcOf } from "/survey.js";

const view = { from: 0, to: 0, steps: 300 };
let ledger, first, last, timeAt, draw;
let turn = 0;

/** An answer, unless somebody asks for something else meanwhile. */
async function ask(path, query) {
  const mine = turn;
  const answer = await fetch(`/api/${path}?` + new URLSearchParams(query)), body = await answer.json();
  if (mine !== turn && path !== "ledger") throw new Error("");
  if (!answer.ok) throw new Error(body.error);
  return body;
}
async function all(path, query) {
  const found = [];
  for (let after = 0; after !== null; ) {
    const page = await ask(path, { limit: 500, ...query, after });
    found.push(...(page.entries || page.items || page.contacts || Object.entries(page.rows)));
    after = page.next;
  }
  return found;
}
const unix = (text) => Date.parse(text.trim().replace(" ", "T") + "Z") / 1000;
const go = (id, text = id) => el("a", { href: "#steps=" + id, text });
const timed = (e) => go(e.body.id, e.utc.slice(0, 19).replace("T", " "));
const row = (...cells) => el("tr", {}, ...cells.map((cell) => el("td", {}, cell)));
const fill = (id, items) => $(id).replaceChildren(...(items.length ? items : ["None."]));

async function survey() {
  const { from, to, job, group, words } = $("filter").elements, range = { from: view.from, to: view.to, job: job.value, group: group.value, words: words.value };
  const rows = {}, sums = {};
  draw = () => (timeAt = drawSurvey($("picture"), rows, sums, view));
  [from.value, to.value] = [utcOf(view.from), utcOf(view.to)];
  setText($("span"), span(view.to - view.from));
  for (const row of ["visual watch", "acoustic watch", "phase", "job", "contacts", "advice", "findings"]) {
    rows[row] = await all("survey", { row, ...range });
    draw();
  }
  const { entries, next } = await ask("entries", { kind: "phase,advice,finding,note", limit: 500, ...range });
  fill("list", entries.map((e) => row(timed(e), e.words)));
  if (next) $("list").append(row("", "There is more: show a shorter time."));
  for (const [kind, title] of [["impulse", "SEL "], ["level", "SPL "], ["unheard", "unheard: "]]) {
    const found = {};
    for (const [name, cells] of await all("timeline", { kind, steps: view.steps, ...range }))
      for (const [step, a, b] of cells) {
        const old = (found[name] ||= [])[step] || [0, b];
        found[name][step] = [old[0] + a, Math.max(old[1], b), step];
      }
    for (const name in found) {
      const levels = found[name].flatMap((cell) => cell[1]), low = Math.min(...levels) - 1, high = Math.max(...levels);
      sums[title + name] = found[name].flatMap(([a, b, step]) => [kind === "unheard" ? [step, Math.min(1, (a * view.steps) / (view.to - view.from)), a.toFixed(1) + " s"] : [step, (b - low) / (high - low), b.toFixed(1) + " dB"]]);
    }
    draw();
  }
}
function zoom(from, to) {
  view.from = Math.min(Math.max(first, from), last - 1);
  view.to = Math.max(Math.min(last, to), view.from + 1);
  show("survey");
}

let steps = [], at = 0;
async function showSteps(id) {
  if (at >= steps.length - 1) steps = (await all("entries", { kind: "advice,finding" })).map((e) => e.body.id);
  id ||= steps[0];
  at = steps.indexOf(id);
  setText($("at"), at < 0 ? "" : `${at + 1} of ${steps.length}`);
  const answer = id ? await ask("explain", { id }) : { entries: [] };
  fill("chain", answer.entries.map((e) => {
    const item = el("li", {}, go(e.id), !e.found ? ": not in the ledger" : e.above ? ": see above" : ` ${utcOf(Date.parse(e.utc) / 1000)} ${e.words}${e.clause && ` [${e.clause}]`}`, e.kind === "sound" ? player(e.id) : "");
    item.style.marginLeft = 1.6 * e.level + "rem";
    return item;
  }));
  setText($("under"), answer.permit ? "Under the permit: " + answer.permit : "");
  $("clauses").replaceChildren(...(answer.values || []).map(valueRow));
}
const step = (by) => steps[at + by] && (location.hash = "steps=" + steps[at + by]);

/** A sound kept, made fit for ears; or why it cannot be heard. */
function player(id) {
  const place = el("b"), hear = (form) => ask("clip", { id }).then(() => place.replaceChildren(el("audio", { controls: true, autoplay: true, src: `/clip/${id}?form=${form}` })), ({ message }) => setText(place, message));
  return el("span", {}, ...["as-is", "slowed", "shifted"].map((form) => el("button", { text: "Hear " + form, onclick: () => hear(form) })), place);
}
const players = (clips) => (clips.length ? clips.map(player) : [" No sound was kept."]);

let drawn;
async function drawSample(form) {
  drawn = await ask("sample", Object.fromEntries(new FormData(form)));
  setText($("drawn"), `Seed ${drawn.seed}: ${drawn.sample.length} of ${drawn.population} contacts heard in entries 1 to ${drawn.last_seq}.`);
  fill("items", drawn.sample.map((one, i) => el("li", {}, one.words, ...players(one.clips), el("p", {}, ...["animal", "no animal", "cannot tell"].map((value) => el("label", {}, el("input", { type: "radio", name: "answer" + i, value }), value)), el("label", {}, "Remark ", el("input", { name: "remark", maxlength: 99 }))))));
  $("done").hidden = false;
  $("enter").hidden = !ledger.live;
}
const answers = () => drawn.sample.map(({ contact }, i) => {
  const item = $("items").children[i];
  return { item, contact, answer: item.querySelector(":checked")?.value, remark: item.querySelector("[name=remark]").value };
});
async function enter(person) {
  for (const { item, contact, answer, remark } of answers().filter((one) => one.answer)) {
    const note = await post({ kind: "remark", person, text: `second listener, seed ${drawn.seed}, entries to ${drawn.last_seq}, contact ${contact}: ${answer}. ${remark}` });
    item.append(el("b", { text: note.id ? "Entered: " + note.id : "Not entered, save as a file: " + note.error }));
  }
}
function save(listener) {
  const text = JSON.stringify({ listener, last_hash: ledger.last_hash, ...drawn, answers: answers() }, null, 1);
  el("a", { href: URL.createObjectURL(new Blob([text])), download: `second-listener-${drawn.seed}.json` }).click();
}
async function reveal() {
  for (const { item, contact } of answers()) for (const c of (await ask("contacts", { after: contact - 1, limit: 1 })).contacts) item.append(el("p", {}, go(c.id, c.words)));
}

function valueRow(v) {
  const doubtful = v.mark !== "read" && !v.who, cells = row(v.key, v.value, v.mark + (doubtful ? ": CHECK" : ""), (v.who || "") + " " + v.source);
  cells.className = doubtful ? "doubtful" : "";
  return cells;
}
function permitParts({ words, body }) {
  const rows = body.values.map(valueRow).sort((a, b) => b.className.length - a.className.length);
  return [el("h2", { text: words }), el("p", { text: `${rows.filter((r) => r.className).length} of ${rows.length} values are unverified: check each against the document.` }), el("table", {}, ...rows)];
}

const SCREENS = {
  survey, steps: showSteps, sample: async () => {},
  sounds: async () => fill("kept", (await all("entries", { kind: "sound" })).map((e) => el("li", {}, timed(e), ` ${e.words} `, player(e.body.id)))),
  dismissed: async () => fill("cards", (await all("contacts", { dismissed: 1 })).map((c) => el("li", {}, go(c.id), ` ${c.words}. `, ...players(c.clips)))),
  permit: async () => fill("permits", (await all("entries", { kind: "permit", limit: 5 })).flatMap(permitParts)),
};
function show(name, id) {
  turn++;
  SCREENS[name](id).then(() => setText($("trouble"), ""), ({ message }) => message && setText($("trouble"), `Not shown: ${message}.`));
}
function turnTo() {
  const [name, id] = location.hash.slice(1).split("="), chosen = name in SCREENS ? name : "survey";
  for (const tab of $("screens").children) {
    $(tab.hash.slice(1)).hidden = tab.hash !== "#" + chosen;
    tab.toggleAttribute("aria-current", tab.hash === "#" + chosen);
  }
  show(chosen, id);
}
/** Whether the ledger is as it was written: on every screen. */
async function look() {
  ledger = await ask("ledger").catch(() => ({ ...ledger, state: "unreadable", words: "THE PROGRAM DOES NOT ANSWER." }));
  $("check").dataset.state = ledger.state;
  setText($("check"), ledger.words);
}

async function start() {
  startPalette();
  await look();
  setInterval(look, 3000);
  setText($("file"), ledger.file);
  const ends = await ask("survey", { row: "phase", limit: 1 }), { from, to } = $("filter").elements;
  first = view.from = Math.floor(ends.first_unix_s);
  last = view.to = Math.ceil(ends.last_unix_s) + 1;
  const moves = { Earlier: [-0.5, -0.5], Later: [0.5, 0.5], Closer: [0.25, -0.25], Wider: [-0.5, 0.5], All: [-1e9, 1e9] };
  for (const text in moves) $("zoom").append(el("button", { text, onclick: () => zoom(...[view.from, view.to].map((s, i) => s + moves[text][i] * (view.to - view.from))) }));
  const on = (id, kind, work) => $(id).addEventListener(kind, (event) => (event.preventDefault(), work(event))), who = (work) => () => work($("draw").elements.person.value);
  on("filter", "submit", () => zoom(unix(from.value), unix(to.value)));
  on("draw", "submit", ({ target }) => drawSample(target));
  for (const [id, work] of Object.entries({ enter: who(enter), save: who(save), reveal, back: () => step(-1), next: () => step(1) })) on(id, "click", work);
  let began;
  on("picture", "mousedown", ({ clientX }) => (began = clientX));
  $("picture").addEventListener("click", (event) => {
    const ends = [began, event.clientX].sort((a, b) => a - b);
    if (ends[1] - ends[0] < 5) return;
    event.preventDefault();
    zoom(...ends.map((px) => timeAt(px - $("picture").offsetLeft)));
  });
  addEventListener("keydown", ({ key, target, ctrlKey, altKey, metaKey }) => $("keys").checked && !$("steps").hidden && !target.closest("input, select") && !ctrlKey && !altKey && !metaKey && step({ n: 1, b: -1 }[key] || 0));
  addEventListener("resize", () => $("survey").hidden || draw());
  addEventListener("hashchange", turnTo);
  turnTo();
}
start();
