// Warns before a session ends, and lets it go on.
//
//   [data-session] data-left, data-warn: ms until the session ends if nothing more is
//                  requested, and how long before that it is said
//     [data-session-text]   shown as the warning; {time} in data-session-soon (and -last,
//                           when it cannot be put off any more) is when it ends
//     [data-session-stay]   asks the server to go on
//     [data-session-in]     leads to the sign-in page once it is too late
//
// Every page that is loaded in this browser puts the end off, so the newest counts for all
// windows.

const SHARED = "holdfast.session.ends";
const LOOK = 1000;

const session = document.querySelector("[data-session]");
const text = session.querySelector("[data-session-text]");
const says = text.querySelector("span");
const stay = text.querySelector("[data-session-stay]");
const signIn = text.querySelector("[data-session-in]");
const warn = Number(session.dataset.warn);
let ends = 0;
let last = false; // it cannot be put off any more

function goOn(left) {
  ends = Date.now() + left;
  try {
    localStorage.setItem(SHARED, String(ends));
  } catch {
    // then each window counts for itself
  }
}

function elsewhere() {
  try {
    return Number(localStorage.getItem(SHARED)) || 0;
  } catch {
    return 0;
  }
}

function say(words) {
  const time = new Intl.DateTimeFormat(document.documentElement.lang || undefined, {
    hour: "2-digit", minute: "2-digit", hourCycle: "h23", timeZone: says.dataset.sessionZone || undefined,
  }).format(ends);
  const now = words.replace("{time}", time);
  if (says.textContent !== now) says.textContent = now;
  if (text.hidden) text.hidden = false;
}

function look() {
  ends = Math.max(ends, elsewhere());
  const left = ends - Date.now();
  const over = left <= 0;
  if (left > warn) {
    text.hidden = true;
    last = false;
    return;
  }
  stay.hidden = over || last;
  signIn.hidden = !over;
  say(over ? says.dataset.sessionOver : last ? says.dataset.sessionLast : says.dataset.sessionSoon);
}

stay.addEventListener("click", async () => {
  try {
    const answer = await fetch(`${session.dataset.stillHere}?stay`, { method: "POST" });
    if (!answer.ok || answer.redirected) {
      ends = 0;
      localStorage.removeItem(SHARED);
    } else {
      const { left } = await answer.json();
      goOn(left);
      last = left <= warn;
    }
  } catch {
    // out of contact: the warning stays, and can be pressed again
  }
  look();
});

goOn(Number(session.dataset.left));
setInterval(look, LOOK);
document.addEventListener("visibilitychange", () => { if (!document.hidden) look(); });
