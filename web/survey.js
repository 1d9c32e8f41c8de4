// The survey as a picture: one axis of time, a row each; the table below it says the same in words.
import { svg } from "/page.js";

const ROW = 24, LEFT = 140, STEPS = [1, 5, 15, 60, 300, 900, 3600, 10800, 43200, 86400, 604800, 2592000, 31536000];
const MARKS = { act: "M-6 -7H6L0 7Z", open: "M-5 -4H5V4H-5Z" };
export const utcOf = (s) => new Date(s * 1000).toISOString().slice(0, 19).replace("T", " ");

/** rows: name to items [begin, end, how, title, id]; sums: name to [step, height 0 to 1, title]. Gives the time at a place. */
export function drawSurvey(holder, rows, sums, { from, to, steps }) {
  const wide = holder.clientWidth, scale = (wide - LEFT - 6) / (to - from), x = (s) => LEFT + scale * (Math.min(to, Math.max(from, s)) - from);
  const image = svg("svg", { width: wide, role: "group", "aria-label": "The survey in time" });
  let y = 20;
  const put = (tag, attributes, title, id) => {
    const place = svg("a", id ? { href: "#steps=" + id } : {}), shape = svg(tag, attributes);
    shape.append(svg("title", {}, title));
    place.append(shape);
    image.append(place);
  };
  const begin = (name) => image.append(svg("text", { x: 0, y: y + 16 }, name), svg("path", { class: "rail", d: `M${LEFT} ${(y += ROW) - 1}H${wide}` }));
  for (const name in rows) {
    begin(name);
    rows[name].forEach(([start, end, how, title, id], i) => {
      const at = x(start), width = x(end ?? to) - at, thin = name === "contacts";
      if (start === end) put("path", { class: how, d: MARKS[how], transform: `translate(${at} ${y - 12})` }, title, id);
      else put("rect", { class: how, x: at, y: y - 20 + (thin ? (i % 2) * 9 : 0), width: Math.max(2, width), height: thin ? 7 : 16 }, title, id);
      if (!thin && title.length * 7 < width) image.append(svg("text", { x: at + 4, y: y - 8 }, title));
    });
  }
  for (const name in sums) {
    begin(name);
    for (const [step, height, title] of sums[name]) put("rect", { class: "full", x: x(from + (step * (to - from)) / steps), y: y - 1 - height * 20, width: Math.max(1.5, (wide - LEFT) / steps), height: height * 20 }, title);
  }
  const tick = STEPS.find((s) => s * scale > 90);
  for (let s = Math.ceil(from / tick) * tick; s < to; s += tick)
    image.append(svg("text", { x: x(s), y: 12, "text-anchor": "middle" }, utcOf(s).slice(...(tick < 60 ? [11] : tick < 86400 ? [11, 16] : [0, 10]))), svg("path", { class: "rail", d: `M${x(s)} 16V${y}` }));
  image.setAttribute("height", y);
  holder.replaceChildren(image);
  return (px) => from + (px - LEFT) / scale;
}
