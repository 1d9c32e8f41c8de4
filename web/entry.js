// What people enter: one small form a kind of note. Field names are those of POST /api/note.
import { $, el, post, remember, setText, unixOf, utc, watchNow } from "/page.js";

const SOURCE_STATES = ["off", "soft start", "full power", "hold", "reduced", "stopped", "vibro", "drilling", "line turn", "test"];
let impulses = () => []; // the last ones, newest first
const select = (name, label, options) => ({ name, label, options });
const number = (name, label, more = {}) => ({ name, label, type: "number", step: "any", min: 0, ...more });

const KINDS = {
  Sighting: {
    kind: "sighting", person: true,
    fields: (permit) => [
      select("group", "Group", permit ? permit.groups : ["unknown"]), number("distance_m", "Distance, m", { max: 100000 }),
      number("number", "Animals", { min: 1, step: 1 }), number("bearing_deg", "Bearing, °", { max: 360 }),
      number("contact", "Contact no.", { min: 1, step: 1 }), { name: "calf", label: "Calf", type: "checkbox" },
      { name: "leaving", label: "Leaving the zone", type: "checkbox" },
    ],
  },
  "In full": {
    kind: "sighting", person: true,
    fields: (permit) => [...KINDS.Sighting.fields(permit), number("number_low", "At least", { min: 1 }), number("number_high", "At most", { min: 1 }), number("calves", "Calves"), select("certainty", "Certainty", ["", "definite", "probable", "possible"]),
      select("behaviour", "Behaviour", ["", "closing", "opening", "passing", "travelling", "milling", "resting", "feeding", "socialising", "diving", "breaching", "bow riding", "hauled out"]), number("closest_m", "Closest, m"),
      { name: "in_zone_ns", label: "In zone, UTC", type: "time" }, { name: "out_zone_ns", label: "Out of it, UTC", type: "time" }, { name: "sighting", label: "Same as note", placeholder: "1.0.note.7" }, { name: "species", label: "Species" }],
  },
  Source: { kind: "source state", fields: () => [select("source_state", "The source is now", SOURCE_STATES), number("energy_kj", "Energy, kJ"), number("elements", "Active elements", { step: 1 }), number("minutes", "Expected, min (line turn)")] },
  Job: { kind: "job", fields: () => [{ name: "job", label: "Pile, line or charge", required: true, maxlength: 31 }, select("answer", "It", [{ value: "open", text: "opens" }, { value: "begin", text: "begins (line)" }, { value: "end", text: "ends (line)" }, { value: "close", text: "closes" }]), select("job_kind", "Kind", [{ value: "", text: "" }, "pile", "line", "test", "charge"]), number("energy_kj", "Planned energy, kJ"), number("charge_kg", "Charge, kg")] },
  Plan: { kind: "plan", fields: () => [{ name: "planned_ns", label: "First impulse at, UTC", type: "time", required: true }] },
  Weather: { kind: "weather", fields: () => [number("sea_state", "Sea state", { max: 12 }), number("visibility_m", "Visibility, m", { max: 100000 }), number("depth_m", "Depth, m", { max: 12000 })] },
  Deterrent: { kind: "deterrent", fields: () => [select("answer", "The deterrent is", ["on", "off"])] },
  Quieting: { kind: "quieting", fields: () => [select("answer", "The measure is", ["on", "off"]), { name: "text", label: "Which", maxlength: 100 }] },
  Safety: {
    kind: "safety override", person: true,
    fields: () => [select("answer", "Working on for safety", ["on", "off"]), select("reason", "Because of", ["life", "refusal", "instability"]), { name: "text", label: "What happened", maxlength: 200, wide: true }],
  },
  "Other source": { kind: "other source", fields: () => [{ name: "text", label: "Which (its name in the settings)", required: true, maxlength: 63 }, select("answer", "It is", ["on", "off"])] },
  Whose: {
    kind: "whose", person: true,
    fields: () => [select("impulse", "Impulse", impulses().map((i) => ({ value: i.id, text: utc(i.time_s) + ", " + (i.sel_db === null ? "no level" : i.sel_db.toFixed(1) + " dB") + ", " + i.whose }))), select("answer", "Its train is", ["other", "ours"])],
  },
  Remark: { kind: "remark", fields: () => [{ name: "text", label: "Remark", required: true, maxlength: 200, wide: true }] },
};

let asker = null; // the button that could not do its work without a name

/** Says beside a button that a name is needed, with the way to its field. */
function askName(button) {
  asker = button;
  if (button.parentNode.querySelector(".asks")) return;
  const go = el("button", { type: "button", class: "plain", text: "Enter name", onclick: () => $("person").focus() });
  button.after(el("span", { class: "asks", role: "alert" }, el("span", { text: "Not entered: your name is needed, at the top." }), go));
}

function startName() {
  const field = $("person");
  field.addEventListener("input", () => field.value.trim() && document.querySelectorAll(".asks").forEach((note) => note.remove()));
  field.addEventListener("keydown", (event) => {
    if (event.key !== "Enter" || !field.value.trim() || !asker) return;
    event.preventDefault(); // or the same key would press the button
    if (asker.isConnected) asker.focus(); // back to what was to be entered
    asker = null;
  });
}

/** Who enters: the name at the top; where a note needs one and there is none, says so beside its button. */
export function person(button) {
  const name = $("person").value.trim();
  if (!name && button) {
    askName(button);
    return null;
  }
  if (name) remember("person", name);
  return name;
}

export function say(text, wrong = false) {
  const place = $("entered");
  setText(place, text);
  place.classList.toggle("wrong", wrong);
}

/** The inputs of a form; form.elements would be the input of that name where there is one. */
const named = (form) => [...form.querySelectorAll("input[name], select[name]")];

/** Sends a note and says what became of it; returns whether it was taken. */
export async function send(note, form) {
  for (const input of form ? named(form) : []) input.removeAttribute("aria-invalid");
  const answer = await post(note);
  if (answer.id) {
    say("Entered: " + note.kind + " (" + answer.id + ").");
    return true;
  }
  const input = form && answer.field && named(form).find((one) => one.name === answer.field);
  if (input) {
    input.setAttribute("aria-invalid", "true");
    input.focus();
  }
  say("Not entered: " + answer.error + (answer.field ? " – " + answer.field : "") + (answer.allowed ? " (allowed: " + answer.allowed + ")" : "") + ".", true);
  return false;
}

export function field(spec) {
  const { label, options, wide, ...attributes } = spec;
  const input = options ? el("select", { name: spec.name }, ...options.map((word) => el("option", typeof word === "string" ? { text: word, value: word } : word))) : el("input", { autocomplete: "off", ...attributes });
  return el("label", { class: (wide ? "wide " : "") + (spec.type === "checkbox" ? "tick" : "") }, el("span", { text: label }), input);
}

/** "HH:MM" of UTC, the next one of a plan and the last one of what has happened, as watch time in nanoseconds. */
function timeOf(text, next) {
  const [hours, minutes] = text.split(":").map(Number), now = unixOf(watchNow());
  let at = Math.floor(now / 86400) * 86400 + hours * 3600 + minutes * 60;
  if (next && at < now) at += 86400;
  if (!next && at > now) at -= 86400;
  return String(Math.round(at - unixOf(0))) + "000000000";
}

/** The filled fields of a form, as numbers, flags and texts. */
export function values(form) {
  const note = {};
  for (const input of named(form)) {
    if (!input.name || (input.type !== "checkbox" && input.value.trim() === "") || (input.type === "checkbox" && !input.checked)) continue;
    note[input.name] = input.type === "checkbox" ? true : input.type === "time" ? timeOf(input.value, input.name === "planned_ns") : input.type === "number" ? Number(input.value) : input.value.trim();
  }
  return note;
}

let chosen = "Sighting";
export function chooseEntry(name, permit, focus) {
  chosen = name;
  for (const button of $("kinds").children) button.setAttribute("aria-pressed", String(button.textContent === name));
  const form = $("entry");
  form.replaceChildren(...KINDS[name].fields(permit).map(field), el("button", { class: "main", text: "Enter " + name.toLowerCase() }));
  if (focus) form.querySelector("input, select").focus();
}

export function startEntry(permit, lastImpulses) {
  impulses = lastImpulses;
  startName();
  if (!$("kinds").firstChild)
    for (const name of Object.keys(KINDS)) $("kinds").append(el("button", { type: "button", class: "plain", text: name, onclick: () => chooseEntry(name, permit(), true) }));
  $("entry").addEventListener("submit", async (event) => {
    event.preventDefault();
    const kind = KINDS[chosen], name = person(kind.person && event.target.querySelector("button"));
    if (name === null) return;
    const note = { kind: kind.kind, ...(name ? { person: name } : {}), ...values(event.target) };
    if (await send(note, event.target)) chooseEntry(chosen, permit(), false);
  });
  chooseEntry(chosen, permit(), false);
}
