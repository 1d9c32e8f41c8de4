// What the source's sound adds up to: the curve of its impulses with the limits as lines, the three numbers that are never
// mixed, and each criterion with what was received and where it would be met.
import { $, el, keyed, metres, setText, svg, utc } from "/page.js";

const HEIGHT = 130, LEFT = 34, FOOT = 18, TOP = 8;
const db = (value) => (value === null ? "–" : value.toFixed(1));

/** Limits that single impulses are held against, as lines of the curve. */
function limits(state) {
  return state.exposures.filter((e) => e.metric === "SEL single").map((e) => ({ name: e.criterion, db: e.value_db }));
}

function drawCurve(state) {
  const image = $("curve");
  const width = image.clientWidth || 600;
  image.replaceChildren();
  image.setAttribute("viewBox", `0 0 ${width} ${HEIGHT}`);
  const points = state.curve;
  if (!points.length) return;
  const lines = limits(state);
  const levels = points.map((p) => p[1]).concat(lines.map((l) => l.db));
  const low = Math.floor(Math.min(...levels) / 10) * 10 - 5, high = Math.ceil(Math.max(...levels) / 10) * 10 + 3;
  const first = points[0][0], last = Math.max(points[points.length - 1][0], first + 60);
  const x = (s) => LEFT + ((width - LEFT - 8) * (s - first)) / (last - first);
  const y = (level) => TOP + ((HEIGHT - TOP - FOOT) * (high - level)) / (high - low);
  for (let level = Math.ceil(low / 10) * 10; level <= high; level += 10) {
    image.append(svg("line", { class: "rail faint", x1: LEFT, x2: width - 8, y1: y(level), y2: y(level) }));
    image.append(svg("text", { class: "tick", x: LEFT - 4, y: y(level) + 4, "text-anchor": "end" }, String(level)));
  }
  for (const line of lines) {
    image.append(svg("line", { class: "limit", x1: LEFT, x2: width - 8, y1: y(line.db), y2: y(line.db) }));
    image.append(svg("text", { class: "tick", x: width - 10, y: y(line.db) - 4, "text-anchor": "end" }, `${line.name}: ${line.db} dB`));
  }
  for (const [s, level] of points) image.append(svg("circle", { class: "blow", cx: x(s), cy: y(level), r: 2 }));
  image.append(svg("text", { class: "tick", x: LEFT, y: HEIGHT - 4 }, utc(first)));
  image.append(svg("text", { class: "tick", x: width - 8, y: HEIGHT - 4, "text-anchor": "end" }, utc(last) + " UTC"));
}

/** By what levels are moved to 750 m: fitted to the job's own blows, or set by people (a standard deviation of it). */
function law(source) {
  if (source.n_db === null) return source.model;
  if (!source.fitted) return `N ${db(source.n_db)} ± ${db((source.n_high_db - source.n_low_db) / 2 / 1.6449)} (standard deviation), set`;
  return `N ${db(source.n_db)} (${db(source.n_low_db)} to ${db(source.n_high_db)}, 90 %), fitted on ${Math.round(source.range_low_m).toLocaleString("en")} to ${Math.round(source.range_high_m).toLocaleString("en")} m`;
}

function drawNumbers(state) {
  keyed($("numbers"), state.sources, (source) => source.stream + "." + source.channel, () => el("li"), (node, source) => setText(node,
    (state.sources.length > 1 ? `Stream ${source.stream}, channel ${source.channel}. ` : "") +
    `Received: median SEL ${db(source.sel_db)}, highest peak ${db(source.peak_db)}, ${source.n_impulses} impulses` +
    (source.range_m === null ? ", range unknown." : ` at ${metres(source.range_m)}.`) +
    (source.at_750_m_db === null ? "" : ` At 750 m: SEL ${db(source.at_750_m_db)} (${db(source.at_750_m_low_db)} to ${db(source.at_750_m_high_db)}, 90 %). ${law(source)}.`) +
    (source.back_db === null ? ` Source level: none${source.reason ? ", " + source.reason : ""}.` : ` Energy source level: ${db(source.back_db)}.`) +
    (source.quieting_on ? " Quieting is on" + (source.insertion_db === null ? "." : `: it takes off ${db(source.insertion_db)} (${db(source.insertion_low_db)} to ${db(source.insertion_high_db)}) dB.`) : "")));
}

function drawCriteria(state) {
  const rows = [...state.exposures].filter((e) => e.level_db !== null).sort((a, b) => b.level_db - b.value_db - (a.level_db - a.value_db));
  $("criteria").parentElement.hidden = !rows.length;
  keyed($("criteria").tBodies[0], rows, (e) => [e.stream, e.criteria, e.criterion].join(), () => el("tr", {}, ...Array.from({ length: 6 }, () => el("td"))), (row, e) => {
    row.classList.toggle("reached", e.reached);
    const texts = [e.criterion + (e.unverified ? " *" : ""), db(e.value_db), db(e.level_db), e.reached ? "REACHED" : db(e.value_db - e.level_db) + " below",
      (e.distance_m === null ? "–" : e.distance_m === 0 ? "nowhere" : `${metres(e.distance_m)} (${metres(e.distance_low_m ?? 0)} to ${e.distance_high_m === null ? "?" : metres(e.distance_high_m)})`) + (e.together ? `; with the other sources: ${e.together}` + (e.islands > 1 ? `, in ${e.islands} islands` : "") : ""),
      e.impulses_left === null ? "–" : e.impulses_left >= 100000 ? "over 100,000" : String(e.impulses_left)];
    texts.forEach((text, i) => setText(row.children[i], text));
  });
}

export function drawSums(state) {
  // Continuous sound has no impulses and no curve, but its criteria all the same.
  $("sums").hidden = !state.curve.length && !state.exposures.length;
  if ($("sums").hidden) return;
  $("curve").style.display = state.curve.length ? "" : "none";
  drawCurve(state);
  drawNumbers(state);
  drawCriteria(state);
}
