// What the observer passed to the crew by voice: one key, once name and channel of a station are known.
import { $, el, keyed, remember, remembered } from "/page.js";
import { person, send } from "/entry.js";

let advice = null;

/** Shown while the crew's advice asks for an answer; null otherwise. */
export function drawVoice(crew, stations) {
  const before = advice;
  advice = crew;
  $("voice").hidden = !crew;
  if (!crew) return;
  const select = $("voice").elements.station;
  keyed(select, stations, (name) => name, (name) => el("option", { text: name, value: name }), () => {});
  if (!before) fill();
}

function fill() {
  const { station, name, channel } = $("voice").elements;
  name.value = remembered("voice.name." + station.value);
  channel.value = remembered("voice.channel." + station.value, "16");
}

async function pass() {
  const form = $("voice"), { station, name, channel } = form.elements, who = person(form.querySelector("button"));
  if (!advice || who === null) return;
  if (!name.value.trim()) return name.focus();
  remember("voice.name." + station.value, name.value.trim());
  remember("voice.channel." + station.value, channel.value.trim());
  const text = `to ${name.value.trim()} on channel ${channel.value.trim() || "?"}, read back`;
  await send({ kind: "acknowledgement", person: who, station: station.value, advice: advice.id, answer: "passed", text }, form);
}

export function startVoice() {
  $("voice").elements.station.addEventListener("change", fill);
  $("voice").addEventListener("submit", (event) => {
    event.preventDefault();
    pass();
  });
  document.addEventListener("keydown", (event) => {
    if (event.key !== "v" || !advice || event.target.closest("input, select, textarea") || event.ctrlKey || event.altKey || event.metaKey || remembered("keys", "on") !== "on") return;
    event.preventDefault();
    pass();
  });
}
