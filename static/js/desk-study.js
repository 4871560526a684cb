// A limit study before one's eyes: its form is a plain GET form; here the same
// address is fetched and the page's #study is replaced, so that leaving a subgroup
// out or taking it back is seen at once. The address of the page follows.
//
// Contract: form#study-form inside #study; fields with data-now compute as soon as
// they change; #study carries data-said, which is read out from #study-said. A click
// on a point of the chart puts its number into the field "no". The first button of the
// form, which Enter presses, has data-implied.

let latest = 0;

function addressOf(form, submitter) {
  const url = new URL(form.action);
  url.search = new URLSearchParams(new FormData(form, submitter)).toString();
  return url;
}

// focusKey names what had the focus, so that it can have it again.
function focusKey() {
  const at = document.activeElement;
  if (!at || !at.closest('#study')) return null;
  if (at.id) return `#${CSS.escape(at.id)}`;
  return at.name === 'do' ? '#f-no' : null;
}

async function show(url, picked) {
  const turn = ++latest;
  const study = document.getElementById('study');
  study.setAttribute('aria-busy', 'true');
  try {
    const answer = await fetch(url, { headers: { Accept: 'text/html' }, credentials: 'same-origin' });
    const fresh = new DOMParser().parseFromString(await answer.text(), 'text/html').getElementById('study');
    if (turn !== latest) return; // a later change is under way
    if (!fresh) throw new Error('no study in the answer');
    const key = picked ? '#f-cause' : focusKey();
    study.replaceWith(fresh);
    // A problem's address would repeat what was refused; the last good one stays.
    if (answer.ok && !picked) history.replaceState(null, '', answer.url);
    const said = document.getElementById('study-said');
    if (said) said.textContent = fresh.dataset.said ?? '';
    if (key) (document.querySelector(key) ?? document.querySelector('#study h1'))?.focus();
  } catch {
    window.location.assign(url); // the plain way: the browser says what is wrong
  }
}

// Enter presses the form's first button, which computes. In the fields of "Leave a
// subgroup out" it means to leave it out.
function meant(form, submitter) {
  const implied = submitter?.hasAttribute('data-implied') && document.activeElement?.matches('#f-no, #f-own');
  return (implied && form.querySelector('[name="do"][value="leave"]')) || submitter;
}

document.addEventListener('submit', (e) => {
  if (!(e.target instanceof HTMLFormElement) || e.target.id !== 'study-form') return;
  e.preventDefault();
  const submitter = meant(e.target, e.submitter);
  const picked = submitter?.name === 'do' && submitter.value.startsWith('pick:');
  show(addressOf(e.target, submitter), picked);
});

document.addEventListener('change', (e) => {
  const field = e.target;
  if (!(field instanceof Element) || !field.matches('#study-form [data-now]')) return;
  show(addressOf(field.form));
});

document.addEventListener('click', (e) => {
  const point = e.target instanceof Element ? e.target.closest('#study svg.control .pt') : null;
  const field = document.getElementById('f-no');
  if (point && field) field.value = String(Number(point.dataset.i) + 1);
});
