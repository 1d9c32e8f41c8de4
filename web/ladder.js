// The range ladder: a distance axis from the source, zones as ticks, each contact a bar from its nearest to its
// farthest likely distance (5 to 95 %). A contact whose distance nobody knows spans the axis: it may be anywhere.
import { metres, svg } from "/page.js";

const ROW = 38;
const TOP = 40; // room for the zones' names
const FOOT = 26; // room for the axis
const LEFT = 12;

/** How far the axis goes, and where a distance lies on it: even near the source, then by ratio. */
function scale(zones, contacts, width) {
  const radii = zones.map((zone) => zone.radius_m).filter((radius) => radius !== null);
  const near = (Math.min(...radii, 1000) || 500) / 3;
  const ends = contacts.map((contact) => contact.distance_p95_m || 0);
  const far = Math.max(4 * Math.max(...radii, 500), 1.15 * Math.max(...ends, 0));
  const span = width - LEFT - 24;
  return { far, x: (m) => LEFT + (span * Math.log1p(Math.min(m, far) / near)) / Math.log1p(far / near) };
}

function ticks(far) {
  const all = [];
  for (let decade = 10; decade <= far; decade *= 10) for (const step of [1, 2, 5]) if (step * decade <= far) all.push(step * decade);
  return all;
}

function axis(image, at, bottom, width) {
  image.append(svg("line", { class: "rail", x1: LEFT, x2: width - 8, y1: bottom, y2: bottom }));
  image.append(svg("path", { class: "source_mark", d: `M${LEFT - 6} ${bottom - 9}H${LEFT + 6}V${bottom + 9}H${LEFT - 6}Z` }));
  let last = at.x(0) + 26;
  image.append(svg("text", { class: "tick", x: LEFT + 10, y: bottom + 19 }, "0"));
  for (const m of ticks(at.far)) {
    const x = at.x(m);
    image.append(svg("line", { class: "rail", x1: x, x2: x, y1: bottom - 4, y2: bottom + 4 }));
    if (x < last + 26 || x > width - 26) continue;
    image.append(svg("text", { class: "tick", x, y: bottom + 19, "text-anchor": "middle" }, metres(m)));
    last = x + 22;
  }
}

function zoneTicks(image, zones, at, bottom, width) {
  const known = zones.filter((zone) => zone.radius_m !== null).sort((a, b) => a.radius_m - b.radius_m);
  let row = 0, free = 0;
  for (const zone of known) {
    const x = at.x(zone.radius_m);
    const name = metres(zone.radius_m) + " " + zone.name;
    const long = name.length * 7.2;
    row = x - 6 < free ? 1 - row : 0;
    const left = x + long > width - 8;
    free = left ? x : x + long + 8;
    image.append(svg("line", { class: "zone", x1: x, x2: x, y1: row ? 24 : 8, y2: bottom + 7 }));
    image.append(svg("text", { class: "zone_name", x: x + (left ? -6 : 6), y: row ? 32 : 16, "text-anchor": left ? "end" : "start" }, name));
  }
}

function bar(image, contact, at, y, width) {
  const known = contact.distance_p50_m !== null;
  const x1 = known ? at.x(contact.distance_p05_m) : at.x(0) + 8;
  const x2 = known ? Math.max(at.x(contact.distance_p95_m), x1 + 4) : width - 24;
  const kind = (known ? "bar " : "bar nowhere ") + (contact.grade || "none");
  image.append(svg("rect", { class: kind, x: x1, y: y + 18, width: x2 - x1, height: 12, rx: known ? 6 : 0 }));
  if (known) image.append(svg("rect", { class: "notch", x: at.x(contact.distance_p50_m) - 1.5, y: y + 14, width: 3, height: 20 }));
  const where = known ? `${metres(contact.distance_p05_m)} to ${metres(contact.distance_p95_m)}, about ${metres(contact.distance_p50_m)}` : "range unknown";
  const name = `${contact.contact} ${contact.group}`, more = `  ${contact.grade ? contact.grade + " · " : ""}${where}`;
  const x = Math.max(LEFT, Math.min(x1, width - 8 - 7 * (name.length + more.length)));
  const text = svg("text", { class: "bar_name", x, y: y + 12 });
  text.append(svg("tspan", { class: "strong" }, name));
  text.append(svg("tspan", { class: "soft" }, more));
  image.append(text);
  return `contact ${contact.contact}, ${contact.group}${contact.grade ? ", " + contact.grade : ""}: ${where}`;
}

/** Draws into `holder`; `choose` is called with a contact's number when its bar is pressed. */
export function drawLadder(holder, zones, contacts, choose) {
  const unit = parseFloat(getComputedStyle(document.documentElement).fontSize) / 15; // larger letters, larger ladder
  const width = Math.max(Math.round(holder.clientWidth / unit), 280);
  const shown = contacts.filter((contact) => contact.state === "open" || contact.state === "left").slice(0, 8);
  const key = JSON.stringify([width, zones.length, shown.map((c) => [c.contact, c.group, c.grade, c.distance_p05_m, c.distance_p50_m, c.distance_p95_m])]);
  if (holder.dataset.key === key) return;
  holder.dataset.key = key;
  const bottom = TOP + Math.max(shown.length, 2) * ROW + 8;
  const image = svg("svg", { width: width * unit, height: (bottom + FOOT) * unit, viewBox: `0 0 ${width} ${bottom + FOOT}`, role: "img" });
  const at = scale(zones, shown, width);
  zoneTicks(image, zones, at, bottom, width);
  axis(image, at, bottom, width);
  const said = shown.map((contact, i) => {
    const row = svg("g", { class: "row", "data-contact": contact.contact });
    row.append(svg("rect", { class: "hit", x: 0, y: TOP + i * ROW, width, height: ROW }));
    const text = bar(row, contact, at, TOP + i * ROW, width);
    row.addEventListener("click", () => choose(contact.contact));
    image.append(row);
    return text;
  });
  if (shown.length === 0) image.append(svg("text", { class: "none", x: width / 2, y: TOP + ROW, "text-anchor": "middle" }, "No contact. Silence does not prove absence."));
  image.setAttribute("aria-label", said.length ? "Range ladder. " + said.join(". ") : "Range ladder: no contact");
  holder.replaceChildren(image);
}
