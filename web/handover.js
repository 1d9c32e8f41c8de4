// The start of a watch, check by check, and the hand-over, which both sign: entries of the record.
import { $, el, faults, keyed, link, setText, soundArmed, span, utc, watchNow } from "/page.js";
import { field, person, send, values } from "/entry.js";

const number = (name, label) => ({ name, label, type: "number", step: "any", min: 0 });
const AT_STATION = ["radio", "sound"];

/** What each check is about, and what the program itself knows of it. */
const CHECKS = {
  "clock": () => `The watch's clock says ${utc(watchNow())} UTC. Compare it with the GPS receiver's.`,
  "array": () => "The array is in the water.",
  "channels": (state) => state.streams.map((s) => `${s.name || "stream " + s.stream}: ${s.channels} channels, ${s.hearing ? "heard" : "NOT HEARD"}`).join("; ") + ". Tap or listen to each.",
  "noise": (state) => "The noise is as usual here: " + state.levels.slice(0, 8).map((l) => `${l.stream}.${l.channel} ${l.spl_db === null ? "–" : l.spl_db.toFixed(0) + " dB"}`).join(", ") + ".",
  "field check": () => "A hydrophone was checked against a known tone (hushwatch fieldcheck).",
  "radio": () => "was called and read back.",
  "sound": () => (soundArmed() ? "heard this page's or its own alert sound." : "– this page's sound is OFF."),
};

let site = null;
function rows() {
  return Object.keys(CHECKS).flatMap((check) => (AT_STATION.includes(check) ? (site ? site.stations : ["crew"]).map((station) => ({ check, station })) : [{ check, station: "" }]));
}

function create({ check, station }) {
  const form = el("form", { class: "row" }, el("p"));
  if (check === "array") form.append(...[number("cable_m", "Cable, m"), number("hydrophone_depth_m", "Depth, m"), number("offset_m", "From source, m")].map(field));
  for (const answer of ["good", "bad"])
    form.append(el("button", { type: "submit", class: "plain", value: answer, text: answer === "good" ? "Good" : "Not good", "aria-label": `${check} ${station}: ${answer}` }));
  form.addEventListener("submit", (event) => {
    event.preventDefault();
    const who = person(event.submitter);
    if (who !== null) send({ kind: "check", person: who, check, answer: event.submitter.value, ...(station ? { station } : {}), ...values(form) }, form);
  });
  return el("li", {}, el("b"), el("span"), form);
}

function handOver(state) {
  const held = state.timers.filter((t) => t.elapsed_s < t.needed_s).map((t) => `${t.name} ${span(t.elapsed_s)} of ${span(t.needed_s)}`);
  const contacts = (word) => state.contacts.filter((c) => c.state === word).map((c) => c.contact);
  const list = (title, items) => `${title}: ${items.length ? items.join(", ") : "none"}`;
  const plan = state.plan.planned_s === null ? "none" : `start at ${utc(state.plan.planned_s, false)} UTC`;
  return [`Phase ${state.phase.phase}`, list("timers", held), list("open contacts", contacts("open")), list("dismissed", contacts("dismissed")),
    list("faults", faults().map((fault) => fault.title.toLowerCase())), `planned work: ${plan}`].join("; ") + ".";
}

export function drawHandOver(state, permit) {
  site = permit;
  const last = (row) => state.checks.find((c) => c.check === row.check && c.station === row.station);
  const done = rows().filter(last).length;
  setText($("start_of_watch").querySelector("summary"), `Start of watch (${done} of ${rows().length} checked), hand-over`);
  if (!$("start_of_watch").open) return;
  keyed($("checks"), rows(), (row) => row.check + "|" + row.station, create, (node, row) => {
    const known = last(row);
    node.classList.toggle("bad", Boolean(known && !known.good));
    setText(node.children[0], row.check + (row.station ? ", " + row.station : ""));
    setText(node.children[1], known ? `: ${known.good ? "good" : "NOT GOOD"}, ${known.person}, ${utc(known.time_s)} UTC` : ": not checked");
    setText(node.querySelector("p"), (row.station ? row.station + " " : "") + CHECKS[row.check](state));
  });
  setText($("hand_over"), handOver(state));
}

export function startHandOver() {
  for (const button of document.querySelectorAll("#start_of_watch [data-answer]"))
    button.addEventListener("click", () => {
      const who = person(button);
      if (who !== null && link.state) send({ kind: "hand-over", person: who, answer: button.dataset.answer, text: handOver(link.state).slice(0, 250) });
    });
}
