// Contacts with their evidence, and what a person can say about each: confirm, dismiss, distance, left.
import { $, el, keyed, link, metres, setText, span, utc, watchNow } from "/page.js";
import { field, person, send, values } from "/entry.js";

const FORMS = {
  confirm: { fields: [{ name: "text", label: "Why you confirm", value: "heard and judged real", maxlength: 200, required: true, wide: true }], note: { kind: "verdict", verdict: "confirm" }, button: "Confirm" },
  dismiss: { fields: [{ name: "text", label: "Reason to dismiss", maxlength: 200, required: true, wide: true }], note: { kind: "verdict", verdict: "dismiss" }, button: "Dismiss" },
  left: { fields: [{ name: "text", label: "How you know that it left", maxlength: 200, required: true, wide: true }], note: { kind: "verdict", verdict: "left" }, button: "It has left" },
  distance: {
    fields: [{ name: "distance_m", label: "Distance from the source, m", type: "number", min: 0, max: 100000, step: "any", required: true }, { name: "leaving", label: "Leaving the zone", type: "checkbox" }],
    note: { kind: "distance" }, button: "Enter distance",
  },
};

function openForm(card, name) {
  const place = card.querySelector(".card_form");
  const already = place.dataset.open === name;
  place.dataset.open = already ? "" : name;
  place.replaceChildren();
  for (const button of card.querySelectorAll(".actions button")) button.setAttribute("aria-expanded", String(!already && button.dataset.form === name));
  if (already) return;
  const form = el("form", {}, ...FORMS[name].fields.map(field), el("button", { class: "main", text: FORMS[name].button }));
  form.addEventListener("submit", async (event) => {
    event.preventDefault();
    const who = person(form.querySelector("button"));
    if (who === null) return;
    const note = { ...FORMS[name].note, person: who, contact: Number(card.dataset.key), ...values(form) };
    if (await send(note, form)) openForm(card, name);
  });
  form.addEventListener("keydown", (event) => event.key === "Escape" && openForm(card, name));
  place.append(form);
  const first = form.querySelector("input");
  first.focus();
  first.select();
}

function create(contact) {
  const action = (name, text) => el("button", { type: "button", class: "plain", "data-form": name, "aria-expanded": "false", text });
  const card = el("li", { class: "card", tabindex: "-1" },
    el("p", { class: "card_head" }, el("strong"), el("span", { class: "grade" }), el("span", { class: "state soft" })),
    el("p", { class: "countdown", hidden: true }), el("p", { class: "where" }), el("p", { class: "evidence soft" }),
    el("p", { class: "actions", role: "group", "aria-label": "Contact " + contact.contact }, action("confirm", "Confirm"), action("dismiss", "Dismiss"), action("distance", "Distance"), action("left", "Left")),
    el("div", { class: "card_form" }));
  card.querySelector(".actions").addEventListener("click", (event) => event.target.dataset.form && openForm(card, event.target.dataset.form));
  return card;
}

function update(card, contact) {
  const part = (name) => card.querySelector("." + name), now = watchNow();
  const live = contact.state === "open" || contact.state === "left";
  card.dataset.grade = live ? contact.grade : "";
  setText(card.querySelector("strong"), contact.contact + " " + contact.group);
  setText(part("grade"), live ? contact.grade : "");
  setText(part("state"), contact.state === "open" ? "" : contact.state);
  const counts = contact.countdown_ends_s !== null && live;
  part("countdown").hidden = !counts;
  if (counts) setText(part("countdown"), contact.countdown_ends_s > now ? "Your verdict, please: the crew is told in " + span(contact.countdown_ends_s - now) : "The crew has been told, not yet confirmed");
  const known = contact.distance_p50_m !== null;
  const inside = contact.p_inside === null ? "" : ", " + (contact.p_inside < 0.01 ? "under 1" : contact.p_inside > 0.99 ? "over 99" : Math.round(contact.p_inside * 100)) + " % likely inside the zone";
  const bearing = contact.bearing_deg === null ? "" : ", bearing " + contact.bearing_deg.toFixed(0) + "° " + (contact.bearing_from || "") + (contact.mirror_deg === null ? "" : " or " + contact.mirror_deg.toFixed(0) + "°");
  setText(part("where"), (known ? `About ${metres(contact.distance_p50_m)} (${metres(contact.distance_p05_m)} to ${metres(contact.distance_p95_m)})` : "Range unknown") + inside + bearing);
  setText(part("evidence"), `${contact.n_calls} call${contact.n_calls === 1 ? "" : "s"}${contact.seen ? ", seen" : ", not seen"}; last ${span(now - contact.last_s)} ago, first ${utc(contact.first_s)} UTC; evidence ${contact.evidence.toFixed(1)}` +
    (contact.n_taken_back ? `; ${contact.n_taken_back} more ${contact.n_taken_back === 1 ? "was" : "were"} a recognised sound of something else, which took ${contact.against.toFixed(1)} back` : "") +
    (contact.clears_at_s !== null && contact.clears_at_s > now ? `; clears in ${span(contact.clears_at_s - now)} at ${utc(contact.clears_at_s, false)} UTC` : ""));
  part("actions").hidden = !live;
}

const rank = (contact) => (contact.state === "open" ? 0 : contact.state === "left" ? 4 : 8) + (contact.grade === "act" ? 0 : contact.grade === "look" ? 1 : 2);
let told = "";

export function drawContacts() {
  const all = link.state.contacts.map((contact, i) => [contact, i]).sort((a, b) => rank(a[0]) - rank(b[0]) || a[1] - b[1]).map((pair) => pair[0]);
  const open = all.filter((contact) => contact.state === "open");
  keyed($("contacts"), all.slice(0, 24), (contact) => contact.contact, create, update);
  setText($("contacts_count"), open.length ? open.length + " open" : "none open");
  const graded = open.filter((contact) => contact.grade);
  const news = graded.map((contact) => `contact ${contact.contact}, ${contact.group}, ${contact.grade}`).join("; ");
  if (news !== told) setText($("contacts_news"), (told = news));
  return all;
}

export function showContact(number) {
  const card = $("contacts").querySelector(`[data-key="${number}"]`) || $("contacts").firstElementChild;
  if (!card) return;
  card.scrollIntoView({ block: "nearest" });
  card.focus();
}
