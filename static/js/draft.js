// What was typed at a station and not sent, kept in this browser. A draft belongs to one
// round: the station, when it was due, and what is measured in it.
//
//   { saved: ms, round: id, taken: text, parts: { characteristic: { setup, short,
//     readings: [{ value, keyed, first: [text] }] } } }

const PREFIX = "holdfast.draft.";
const KEPT = 24 * 60 * 60 * 1000;

export const keyOf = (station, due, occasion, characteristics) =>
  PREFIX + [station, due, occasion, ...[...characteristics].sort()].join(" ");

export function read(key) {
  try {
    const draft = JSON.parse(localStorage.getItem(key));
    return draft && Date.now() - draft.saved < KEPT ? draft : null;
  } catch {
    return null;
  }
}

export function write(key, draft) {
  try {
    localStorage.setItem(key, JSON.stringify({ ...draft, saved: Date.now() }));
  } catch {
    // no room or not allowed: the page itself still holds what was typed
  }
}

export function drop(key) {
  try {
    localStorage.removeItem(key);
  } catch {
    // then there was none
  }
}

function keys() {
  try {
    return Object.keys(localStorage).filter((key) => key.startsWith(PREFIX));
  } catch {
    return [];
  }
}

// dropRound forgets the draft of a round that was sent.
export function dropRound(round) {
  for (const key of keys()) {
    if (read(key)?.round === round) drop(key);
  }
}

// waiting is how many readings of a station wait here.
export function waiting(station) {
  let n = 0;
  for (const key of keys()) {
    if (!key.startsWith(`${PREFIX}${station} `)) continue;
    for (const part of Object.values(read(key)?.parts ?? {})) n += part.readings.filter((r) => r.value.trim() !== "").length;
  }
  return n;
}

// prune forgets what is too old to be of use.
export function prune() {
  for (const key of keys()) {
    if (!read(key)) drop(key);
  }
}
