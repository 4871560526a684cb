// Keeps the handover of a running shift current: when the server says that something
// changed, the page is fetched again and its parts are exchanged, at most once in a
// while. What somebody types stays.

const PAUSE = 4000; // ms: a handover is read, not watched

const host = document.querySelector('[data-handover]');
let due = null;

const typing = () => Array.from(host.querySelectorAll('textarea'))
  .some((field) => field === document.activeElement || field.value !== field.defaultValue);

async function again() {
  due = null;
  if (document.hidden || typing()) {
    soon();
    return;
  }
  let page;
  try {
    const answer = await fetch(location.href, { cache: 'no-store', headers: { Accept: 'text/html' } });
    if (!answer.ok || answer.redirected) return;
    page = await answer.text();
  } catch {
    return; // no server just now; the next change asks again
  }
  const fresh = new DOMParser().parseFromString(page, 'text/html').querySelector('[data-handover]');
  if (!fresh || typing()) return;
  globalThis.Idiomorph.morph(host, fresh.outerHTML, { morphStyle: 'outerHTML', ignoreActiveValue: true, restoreFocus: true });
}

function soon() {
  if (due === null) due = setTimeout(again, PAUSE);
}

document.addEventListener('live:state', soon);
