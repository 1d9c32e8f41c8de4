// What the source's sound adds up to: the curves of its impulses with the limits as lines, the three numbers that are never
// mixed, what was left out, the quieting measure, the distances of the criteria against the zones, and each criterion.
import { $, el, hertz, keyed, metres, setText, svg, utc } from "/page.js";

const HEIGHT = 118, LEFT = 34, FOOT = 18, TOP = 12;
const LEAST_M = 10; // the axis of distances begins here
const FEW = 8; // criteria shown before somebody asks for all
const db = (value, digits = 1) => (value === null || value === undefined ? "–" : value.toFixed(digits));
const range = (low, high, digits = 1) => `${db(low, digits)} to ${db(high, digits)}`;

/** Limits of single impulses, as lines of a curve: where the curve is measured at another range than the limit's, the line lies
    where the limit would be heard there. A limit whose place is unknown is named, not drawn. */
function limits(state, metrics) {
  return state.exposures.filter((e) => e.effect === "limit" && metrics.includes(e.metric)).map((e) => {
    const here = e.metric === "peak-to-peak" || e.level_db === null || e.at_750_m_db === null || e.limit_range_m !== 750 ? null : e.value_db + e.level_db - e.at_750_m_db;
    const moved = here !== null && Math.abs(here - e.value_db) >= 0.05 ? `, ${here.toFixed(1)} here` : "";
    return { name: `${e.criterion.replace(/ at 750 m$/, "")} limit ${e.value_db} dB at ${metres(e.limit_range_m)}${moved}${e.unverified ? " *" : ""}`, db: here };
  });
}

function drawCurve(image, points, lines, since) {
  const width = image.clientWidth || 600;
  image.replaceChildren();
  image.setAttribute("viewBox", `0 0 ${width} ${HEIGHT}`);
  const drawn = lines.filter((line) => line.db !== null);
  const levels = points.map((p) => p[1]).concat(drawn.map((line) => line.db));
  const low = Math.floor(Math.min(...levels) / 10) * 10 - 4, high = Math.ceil(Math.max(...levels) / 10) * 10 + 2;
  const first = points[0][0], last = Math.max(points[points.length - 1][0], first + 60);
  const x = (s) => LEFT + ((width - LEFT - 8) * (s - first)) / (last - first);
  const y = (level) => TOP + ((HEIGHT - TOP - FOOT) * (high - level)) / (high - low);
  const step = high - low > 45 ? 20 : 10;
  for (let level = Math.ceil(low / step) * step; level <= high; level += step) {
    image.append(svg("line", { class: "rail faint", x1: LEFT, x2: width - 8, y1: y(level), y2: y(level) }));
    image.append(svg("text", { class: "tick", x: LEFT - 4, y: y(level) + 4, "text-anchor": "end" }, String(level)));
  }
  if (since !== null && since >= first && since <= last) {
    image.append(svg("line", { class: "since", x1: x(since), x2: x(since), y1: TOP, y2: HEIGHT - FOOT }));
    image.append(svg("text", { class: "tick", x: x(since) + (x(since) > width - 90 ? -4 : 4), y: HEIGHT - FOOT - 4, "text-anchor": x(since) > width - 90 ? "end" : "start" }, "soft start"));
  }
  for (const [s, level] of points) image.append(svg("circle", { class: "blow", cx: x(s), cy: y(level), r: 2 }));
  for (const line of drawn) image.append(svg("line", { class: "limit", x1: LEFT, x2: width - 8, y1: y(line.db), y2: y(line.db) }));
  drawn.forEach((line, i) => image.append(svg("text", { class: "tick limit_name", x: i % 2 ? LEFT + 4 : width - 10, y: y(line.db) - 4, "text-anchor": i % 2 ? "start" : "end" }, line.name)));
  image.append(svg("text", { class: "tick", x: LEFT, y: HEIGHT - 4 }, utc(first)));
  image.append(svg("text", { class: "tick", x: width - 8, y: HEIGHT - 4, "text-anchor": "end" }, utc(last) + " UTC"));
}

/** By what levels are moved to 750 m: fitted to the job's own blows, or set by people (a standard deviation of it). */
function law(source) {
  if (source.n_db === null) return source.model;
  if (!source.fitted) return `N ${db(source.n_db)} ± ${db((source.n_high_db - source.n_low_db) / 2 / 1.6449)} (standard deviation), set`;
  return `N ${db(source.n_db)} (${db(source.n_low_db)} to ${db(source.n_high_db)}, 90 %), fitted on ${Math.round(source.range_low_m).toLocaleString("en")} to ${Math.round(source.range_high_m).toLocaleString("en")} m`;
}

function drawCurves(state) {
  const since = state.phase.phase === "soft start" ? state.phase.since_s : null;
  const kinds = [["curve", "SEL", state.curve, limits(state, ["SEL single"])],
    ["peak_curve", "Peak", state.curve.filter((p) => p[2] !== null).map((p) => [p[0], p[2]]), limits(state, ["peak", "peak-to-peak"])]];
  for (const [id, name, points, lines] of kinds) {
    $(id).parentElement.hidden = !points.length;
    if (!points.length) continue;
    const nowhere = lines.filter((line) => line.db === null).map((line) => line.name);
    setText($(id + "_name"), name + (nowhere.length ? ` (not drawn: ${nowhere.join("; ")})` : ""));
    drawCurve($(id), points, lines, since);
    $(id).setAttribute("aria-label", `${name} of our impulses, ${utc(points[0][0])} to ${utc(points[points.length - 1][0])} UTC, last ${points[points.length - 1][1].toFixed(1)} dB. ` + lines.map((line) => line.name).join("; "));
  }
}

const place = (s) => s.stream + "." + s.channel;
/** ", channel 1.2", where several measure. */
const at = (state, s) => (state.sources.length > 1 ? ", channel " + place(s) : "");

function number(name) {
  return el("div", { class: name }, el("dt"), el("dd"), el("dd", { class: "soft" }));
}

/** Three boxes a channel that measures, each with its own words: what was received, what that is at 750 m, the source level. */
function drawNumbers(state) {
  keyed($("numbers"), state.sources, place, () => el("dl", { class: "three" }, number("received"), number("at_750"), number("back")), (node, s) => {
    const of = (name, texts) => [...node.querySelector("." + name).children].forEach((child, i) => setText(child, texts[i]));
    const unknown = s.reason || "not known", steady = s.spl_db !== null, metric = steady ? "SPL" : "SEL", level = steady ? s.spl_db : s.sel_db;
    of("received", [`Received${at(state, s)}`, level === null ? "no level" : `${metric} ${db(level)} dB`,
      `median of ${steady ? s.n_seconds.toLocaleString("en") + " s in which the source was said to sound" : s.n_impulses}; highest peak ${db(s.peak_db)} dB; ` + (s.range_m === null ? "range unknown" : "at " + metres(s.range_m))]);
    of("at_750", ["At 750 m", s.at_750_m_db === null ? "none" : `${metric} ${db(s.at_750_m_db)} dB`,
      s.at_750_m_db === null ? unknown : `90 %: ${range(s.at_750_m_low_db, s.at_750_m_high_db)}; ${law(s)}`]);
    of("back", [steady ? "Source level" : "Energy source level", s.back_db === null ? "none" : `${db(s.back_db)} dB`, s.back_db === null ? unknown : `90 %: ${range(s.back_low_db, s.back_high_db)}; worked back to 1 m`]);
  });
}

const counted = (pairs) => pairs.filter((pair) => pair[0]).map((pair) => `${pair[0]} ${pair[1]}`).join(", ");

/** What the sums lack, and what may be wrong with them. */
function drawLeftOut(state) {
  const lines = state.sources.map((s) => ({ key: place(s), at: at(state, s),
    out: counted([[s.n_other, "of another project"], [s.n_unknown, "of unknown origin"], [s.n_relative, `on channel ${place(s)}, which is not calibrated`], [s.n_refused, `on channel ${place(s)}, which clips too near the expected peak`]]),
    in: counted([[s.n_clipped, "clipped (levels are lower bounds)"], [s.n_overlapped, "overlapped by another"], [s.n_weak, "less than 10 dB above the background"]]) })).filter((s) => s.out || s.in);
  keyed($("left_out"), lines, (s) => s.key, () => el("li"), (node, s) => setText(node, [s.out && `Left out of every sum${s.at}: ${s.out}.`, s.in && `In the sums${s.at}: ${s.in}.`].filter(Boolean).join(" ")));
}

/** Early warning and a quieting measure that falls: words in a box of their own, high on the page. */
function drawWarnings(state) {
  const lines = state.sources.flatMap((s) => [
    s.warning && { key: "w" + place(s), title: "EARLY WARNING" + at(state, s), text: s.warning[0].toUpperCase() + s.warning.slice(1) + "." },
    s.quieting_falls_db !== null && { key: "q" + place(s), title: "QUIETING FALLS" + at(state, s), text: `The measure takes off ${db(s.quieting_falls_db)} dB less than in its first impulses.` }]).filter(Boolean);
  keyed($("warnings"), lines, (line) => line.key, () => el("p", { class: "early" }, el("strong"), el("span")), (node, line) => {
    setText(node.firstChild, line.title);
    setText(node.lastChild, line.text);
  });
  $("warnings").hidden = !lines.length;
}

/** Insertion loss by decidecade: a bar from the lower to the upper bound of 90 %, a notch at the value. */
function drawBands(image, s) {
  const width = image.clientWidth || 600, height = 96, n = s.insertion_bands_db.length;
  const known = s.insertion_bands_db.map((value, i) => ({ i, value, low: s.insertion_bands_low_db[i], high: s.insertion_bands_high_db[i] })).filter((band) => band.value !== null);
  image.replaceChildren();
  image.setAttribute("viewBox", `0 0 ${width} ${height}`);
  if (!known.length) return;
  const top = Math.max(10, Math.ceil(Math.max(...known.map((band) => band.high)) / 10) * 10), bottom = Math.min(0, Math.floor(Math.min(...known.map((band) => band.low)) / 10) * 10);
  const x = (i) => LEFT + ((width - LEFT - 8) * (i + 0.5)) / n, y = (value) => 6 + ((height - 24) * (top - value)) / (top - bottom);
  for (let value = bottom; value <= top; value += 10) {
    image.append(svg("line", { class: value ? "rail faint" : "rail", x1: LEFT, x2: width - 8, y1: y(value), y2: y(value) }));
    image.append(svg("text", { class: "tick", x: LEFT - 4, y: y(value) + 4, "text-anchor": "end" }, String(value)));
  }
  const wide = Math.max(2, Math.min(10, ((width - LEFT) / n) * 0.6));
  for (const band of known) {
    image.append(svg("rect", { class: "interval", x: x(band.i) - wide / 2, width: wide, y: y(band.high), height: Math.max(1, y(band.low) - y(band.high)) }));
    image.append(svg("line", { class: "value", x1: x(band.i) - wide, x2: x(band.i) + wide, y1: y(band.value), y2: y(band.value) }));
  }
  for (let i = 0; i < n; i += 10) image.append(svg("text", { class: "tick", x: x(i), y: height - 3, "text-anchor": "middle" }, hertz(10 ** (1 + i / 10))));
  image.setAttribute("aria-label", "Insertion loss by decidecade: " + known.map((band) => `${hertz(10 ** (1 + band.i / 10))} ${db(band.value)} dB (${range(band.low, band.high)})`).join(", "));
}

function drawQuieting(state) {
  const rows = state.sources.filter((s) => s.quieting_on || s.n_quieting_on > 0);
  $("quieting").hidden = !rows.length;
  keyed($("quieting"), rows, place, () => el("div", {}, el("h3"), el("p", { class: "words" }), svg("svg", { class: "bands", role: "img" }), el("p", { class: "groups" })), (node, s) => {
    const [title, words, image, groups] = node.children;
    setText(title, "Quieting measure is " + (s.quieting_on ? "on" : "off") + at(state, s));
    const counts = `${s.n_quieting_off} impulses without it and ${s.n_quieting_on} with it`;
    setText(words, s.insertion_db === null ? `What it takes off is not known yet: ${counts}; 5 of each are needed.`
      : `It takes ${db(s.insertion_db)} dB off the SEL (90 %: ${range(s.insertion_low_db, s.insertion_high_db)}), from ${counts}. By decidecade, dB:`);
    image.toggleAttribute("hidden", !s.insertion_bands_db.length);
    if (s.insertion_bands_db.length) drawBands(image, s);
    setText(groups, s.reductions.length ? "As groups hear it: " + s.reductions.map((r) => `${r.weighting} ${db(r.db)} dB (${range(r.low_db, r.high_db)})`).join("; ") + "." : "");
  });
}

/** Where each criterion is met, on one axis of distance with the zones as ticks. */
function drawDistances(state, zones) {
  const far = (value, text) => (value !== null ? value : text.includes("beyond") ? Infinity : 0);
  const all = state.exposures.filter((e) => e.distance && e.distance !== "unknown");
  const open = $("more_criteria").getAttribute("aria-expanded") === "true";
  const met = all.map((e) => ({ name: e.criterion, text: e.distance, middle: far(e.distance_m, e.distance), low: far(e.distance_low_m, e.distance), high: far(e.distance_high_m, e.distance) }))
    .filter((row) => row.high > LEAST_M).sort((a, b) => b.middle - a.middle || b.high - a.high);
  const rows = open ? met : met.slice(0, FEW);
  const image = $("distances"), edges = zones.filter((zone) => zone.radius_m !== null);
  $("distances_part").hidden = !rows.length;
  setText($("met_near"), [met.length > rows.length ? `${met.length - rows.length} more are met nearer.` : "", all.length > met.length ? `${all.length - met.length} are met nowhere, or within ${LEAST_M} m.` : ""].filter(Boolean).join(" "));
  if (!rows.length) return;
  const width = image.clientWidth || 600, wide = width >= 460, each = wide ? 20 : 34, from = wide ? Math.min(250, width * 0.42) : 8, height = 22 + each * rows.length;
  image.setAttribute("viewBox", `0 0 ${width} ${height}`);
  image.style.height = height + "px";
  image.replaceChildren();
  const ends = rows.flatMap((row) => [row.middle, row.high]).filter((m) => Number.isFinite(m) && m > 0).concat(edges.map((zone) => zone.radius_m));
  const most = 10 ** Math.ceil(Math.log10(Math.max(1000, ...ends) * 1.05)), least = LEAST_M;
  const x = (m) => from + (width - 10 - from) * Math.min(1, Math.max(0, Math.log10(Math.max(m, least) / least) / Math.log10(most / least)));
  for (let m = least; m <= most; m *= 10) {
    image.append(svg("line", { class: "rail faint", x1: x(m), x2: x(m), y1: 16, y2: height }));
    image.append(svg("text", { class: "tick", x: x(m), y: 11, "text-anchor": m === most ? "end" : "middle" }, metres(m)));
  }
  for (const zone of edges) image.append(svg("line", { class: "zone", x1: x(zone.radius_m), x2: x(zone.radius_m), y1: 14, y2: height }));
  rows.forEach((row, i) => {
    const at = 22 + each * i + (wide ? 10 : 24), beyond = edges.length && row.middle > Math.max(...edges.map((zone) => zone.radius_m));
    const words = wide ? row.name : `${row.name}: ${row.text}`;
    image.append(svg("text", { class: "name" + (beyond ? " strong" : ""), x: 0, y: wide ? at + 4 : at - 10 }, words.length > from / 6.2 && wide ? words.slice(0, Math.floor(from / 6.2) - 1) + "…" : words));
    image.append(svg("rect", { class: "interval", x: x(row.low), width: Math.max(2, x(row.high) - x(row.low)), y: at - 4, height: 8 }));
    image.append(svg("path", { class: "notch", d: row.middle > most ? `M${x(most) - 6} ${at - 7}l12 7l-12 7z` : `M${x(row.middle)} ${at - 7}l4 7l-4 7l-4 -7z` }));
    if (row.middle > most && wide) image.append(svg("text", { class: "name strong", x: x(most) - 12, y: at + 4, "text-anchor": "end" }, row.text.replace(/ \(.*/, "")));
  });
  image.setAttribute("aria-label", "Distances of the criteria: " + rows.map((row) => `${row.name} ${row.text}`).join("; ") + ". Zones: " + edges.map((zone) => `${zone.name} ${metres(zone.radius_m)}`).join(", "));
  setText($("distances_zones"), edges.length ? "dotted: " + edges.map((zone) => `${zone.name} ${metres(zone.radius_m)}`).join(", ") + "; bold: beyond it" : "the permit has no zone with an edge");
}

/** Value, received and margin in the criterion's own unit. */
function amounts(e) {
  if (e.value_pa_s !== null) return { value: e.value_pa_s.toPrecision(3) + " Pa s", got: e.level_pa_s === null ? "–" : e.level_pa_s.toPrecision(3) + " Pa s", margin: e.level_pa_s / e.value_pa_s > 0 ? Math.round((100 * e.level_pa_s) / e.value_pa_s) + " % of it" : "–", over: 20 * Math.log10(e.level_pa_s / e.value_pa_s) };
  return { value: db(e.value_db), got: db(e.level_db), margin: db(e.value_db - e.level_db) + " below", over: e.level_db - e.value_db };
}

function drawCriteria(state) {
  const rows = state.exposures.filter((e) => e.level_db !== null || e.level_pa_s !== null).map((e) => ({ ...e, ...amounts(e) })).sort((a, b) => b.over - a.over);
  const more = $("more_criteria"), all = more.getAttribute("aria-expanded") === "true";
  $("criteria_part").hidden = !rows.length;
  more.hidden = rows.length <= FEW;
  setText(more, all ? `Only the first ${FEW}` : `All ${rows.length} criteria`);
  keyed($("criteria").tBodies[0], rows.filter((e, i) => all || i < FEW || e.reached), (e) => [e.stream, e.criteria, e.criterion].join(), () => el("tr", {}, el("td", {}, el("span"), el("small")), ...Array.from({ length: 4 }, () => el("td"))), (row, e) => {
    row.classList.toggle("reached", e.reached);
    const doubt = counted([[e.n_clipped, "clipped"], [e.n_unweighted, "without bands"], [e.n_without_range, "without range"], [e.n_quiet, "below effective quiet"]]);
    setText(row.firstChild.firstChild, e.criterion + (e.unverified ? " *" : ""));
    const whole = e.together ? `with the other sources met at: ${e.together}` + (e.islands > 1 ? `, in ${e.islands} islands` : "") : "";
    setText(row.firstChild.lastChild, [whole, doubt && `of ${e.n.toLocaleString("en")} sounds: ${doubt}`].filter(Boolean).join("; "));
    const texts = [e.value, `${e.got} (${e.reached ? "REACHED" : e.margin})`, e.distance || "–",
      e.impulses_left === null ? "–" : e.impulses_left >= 100000 ? "over 100,000" : e.impulses_left.toLocaleString("en")];
    texts.forEach((text, i) => setText(row.children[i + 1], text));
  });
}

/** The button for all criteria. */
export function startSums(draw) {
  $("more_criteria").addEventListener("click", () => {
    const more = $("more_criteria");
    more.setAttribute("aria-expanded", String(more.getAttribute("aria-expanded") !== "true"));
    draw();
  });
}

/** Kurtosis of the last minute of each channel: for people, and said to be research. */
export function drawResearch(state) {
  const known = state.levels.filter((level) => level.research && level.research.kurtosis !== null);
  const one = (level) => `channel ${level.stream}.${level.channel} ${level.research.kurtosis.toFixed(1)}` + (level.research.adjusted_sel_db === null ? "" : ` (SEL ${db(level.research.sel_db)}, adjusted ${db(level.research.adjusted_sel_db)} dB)`);
  const first = known[0] && known[0].research;
  setText($("research"), known.length ? `Kurtosis of the last minute (${first.window_s.toFixed(0)} s, up to ${hertz(first.high_hz)}): ${known.map(one).join("; ")}. Gaussian noise has 3; above ${first.boundary} sound is called fully impulsive. Adjusted SEL after Goley et al. 2011. No rule reads any of it.` : "");
  $("research").parentElement.hidden = !known.length;
}

export function drawSums(state, zones) {
  drawWarnings(state);
  $("sums").hidden = !state.curve.length && !state.sources.length && !state.exposures.length;
  if ($("sums").hidden) return;
  drawCurves(state);
  drawNumbers(state);
  drawLeftOut(state);
  drawQuieting(state);
  drawDistances(state, zones);
  drawCriteria(state);
}
