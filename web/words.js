// The words of the crew: message markers and plain words after the IMO's Standard Marine Communication Phrases
// (marker first, then the instruction), by advice and by what the source is. A translation is another such file.

export const CREW_WORDS = {
  "stop": { marker: "INSTRUCTION", words: "STOP" },
  "reduce power": { marker: "INSTRUCTION", words: "REDUCE POWER" },
  "hold power": { marker: "INSTRUCTION", words: "HOLD POWER" },
  "prepare to stop": { marker: "WARNING", words: "PREPARE TO STOP" },
  "do not start": { marker: "INSTRUCTION", words: "DO NOT START" },
  "new soft start": { marker: "INSTRUCTION", words: "NEW SOFT START" },
  "resume": { marker: "ADVICE", words: "RESUME" },
  "may start": { marker: "ADVICE", words: "YOU MAY START" },
  "carry on": { marker: "INFORMATION", words: "CARRY ON" },
  "": { marker: "INFORMATION", words: "NO ADVICE" },
};
export const PLAIN_WORDS = {
  piling: { "stop": "Stop piling now.", "do not start": "Do not start piling." },
  airguns: { "stop": "Stop the airguns now.", "do not start": "Do not fire the airguns." },
  explosives: { "stop": "Do not fire. Make safe.", "do not start": "Do not fire." },
  any: {
    "stop": "Stop the source now.", "do not start": "Do not start the source.", "hold power": "Do not increase power.",
    "reduce power": "Reduce power now.", "prepare to stop": "Be ready to stop at once.", "may start": "Begin with a soft start.",
    "resume": "You may go on.", "new soft start": "Begin again with a soft start.", "carry on": "Nothing holds the work back.",
  },
};
export const UNTIL_WORDS = {
  "do not start": "Earliest start", "may start": "Start", "stop": "Earliest restart", "new soft start": "Earliest restart",
  "resume": "Resume before", "hold power": "Earliest end", "reduce power": "Earliest end", "prepare to stop": "Earliest end",
};
/** What became of the words, in sentences: {words} is what was said. */
export const CREW_SENTENCES = {
  withdrawn: "‘{words}’ is withdrawn. Ask the observer by voice.",
  waits: "The page waits for the daemon.",
  none: "The observer has given no instruction.",
  orHold: "Stop if possible, otherwise do not increase power.",
};
