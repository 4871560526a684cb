// Locks a tablet that nobody touches, and warns before. What was typed into a round is
// kept by draft.js; the next person, or the same one, signs in and goes on.
//
//   [data-lock] data-after, data-warn: ms without a touch until it locks, and how long
//               before that it says so
//     [data-lock-text]   shown as the warning; {time} in data-lock-says is when it locks
//   form[data-sign-out]  is sent with why=idle
//
// Any key and any touch counts, in any window of this browser. The server is told once a
// minute that somebody is there: it ends sessions that are not used too.

const TELL = 60_000;
const SHARED = "holdfast.touched";

const lock = document.querySelector("[data-lock]");
const text = lock.querySelector("[data-lock-text]");
const says = lock.querySelector("[data-lock-says]");
const after = Number(lock.dataset.after);
const warn = Number(lock.dataset.warn);
let touched = Date.now();
let told = touched;

function elsewhere() {
  try {
    return Number(localStorage.getItem(SHARED)) || 0;
  } catch {
    return 0;
  }
}

function touch() {
  touched = Date.now();
  try {
    localStorage.setItem(SHARED, String(touched));
  } catch {
    // then each window counts for itself
  }
  show(false);
  if (touched - told >= TELL) tell();
}

async function tell() {
  told = Date.now();
  try {
    const answer = await fetch(lock.dataset.stillHere, { method: "POST" });
    if (answer.status === 401) locked();
  } catch {
    // out of contact; the next touch tells again
  }
}

function locked() {
  const form = document.querySelector("form[data-sign-out]");
  if (!form) {
    location.reload();
    return;
  }
  document.body.dataset.leaving = "yes"; // the socket ends with the session; its script need not lead away
  form.elements.why.value = "idle";
  form.submit();
}

function show(on, at) {
  if (text.hidden !== on) return;
  if (on) {
    const time = new Intl.DateTimeFormat(document.documentElement.lang || undefined, {
      hour: "2-digit", minute: "2-digit", second: "2-digit", hourCycle: "h23", timeZone: says.dataset.lockZone || undefined,
    }).format(at);
    says.textContent = says.dataset.lockSays.replace("{time}", time);
  }
  text.hidden = !on;
}

function look() {
  const last = Math.max(touched, elsewhere());
  const idle = Date.now() - last;
  if (idle >= after) locked();
  else if (idle >= after - warn) show(true, last + after);
  else show(false);
}

touch();
for (const kind of ["pointerdown", "keydown", "wheel", "input"]) {
  addEventListener(kind, (event) => { if (event.isTrusted) touch(); }, { capture: true, passive: true });
}
setInterval(look, 1000);
document.addEventListener("visibilitychange", () => { if (!document.hidden) look(); });
addEventListener("pageshow", (event) => { if (event.persisted) look(); });
