// What needs a person is never cut in silence (web/board/page.templ). A wall screen cannot
// scroll: a list that does not fit is set smaller; if that is not enough it shows whole
// rows only, says how many more there are, and turns to them page by page, the first and
// most urgent page the longest. It jumps and does not glide, stands still while somebody
// is at the list, and does not turn for who wants no motion.
//
//   <section id="needs" class="few" data-density="few"> <ol class="needs-list"> <li>
//     <p data-beyond data-more="and {n} more" data-more-hold="and {n} more, {h} Hold" data-page="{a} to {b} of {n}" hidden>

const FIRST = 20000; // ms that the first page stands
const OTHER = 10000; // ms that each other stands
const DENSITIES = ['few', 'several', 'many', 'terse'];
const still = matchMedia('(prefers-reduced-motion: reduce)');

const listOf = () => document.querySelector('#needs .needs-list');
const rowsOf = (list) => Array.from(list.children).filter((row) => !row.hidden);
const fill = (text, values) => text.replace(/\{(\w)\}/g, (_, key) => values[key]);

// more says how many rows are beyond the list, and how many of them are grave.
function more(note, hidden) {
  const n = hidden.length;
  const h = hidden.filter((row) => row.classList.contains('hold')).length;
  return h > 0 ? fill(note.dataset.moreHold, { n, h }) : fill(note.dataset.more, { n });
}

// fit sets the list smaller until it fits, and shows the note where it does not at any size.
function fit() {
  const list = listOf();
  const note = document.querySelector('#needs [data-beyond]');
  if (!list || !note) return;
  const at = list.scrollTop;
  for (const row of rowsOf(list)) row.classList.remove('part');
  note.hidden = true;
  const section = list.closest('#needs');
  const pushed = section.dataset.density; // by how many there are; how much each says counts as well
  for (const density of DENSITIES.slice(DENSITIES.indexOf(pushed))) {
    section.classList.remove(...DENSITIES);
    section.classList.add(density);
    if (list.scrollHeight <= list.clientHeight + 1) break;
  }
  if (list.scrollHeight <= list.clientHeight + 1) {
    list.removeAttribute('tabindex');
    return;
  }
  note.textContent = more(note, rowsOf(list));
  note.hidden = false; // it takes room from the list, so it stands before that is measured
  list.tabIndex = 0; // by keyboard as well
  list.scrollTop = at; // without the note the list could not scroll as far
  seen();
}

// seen hides the rows that do not show whole and says what is beyond them.
function seen() {
  const list = listOf();
  const note = document.querySelector('#needs [data-beyond]');
  if (!list || !note || note.hidden) return;
  const rows = rowsOf(list);
  const box = list.getBoundingClientRect();
  const whole = rows.map((row) => {
    const { top, bottom } = row.getBoundingClientRect();
    return top >= box.top - 1 && bottom <= box.bottom + 1;
  });
  const first = whole.indexOf(true);
  const last = whole.lastIndexOf(true);
  if (first < 0) { // a row taller than the list: part of it is better than nothing
    for (const row of rows) row.classList.remove('part');
    note.textContent = more(note, rows.slice(1));
    return;
  }
  rows.forEach((row, i) => row.classList.toggle('part', !whole[i] && !row.contains(document.activeElement)));
  note.textContent = first === 0
    ? more(note, rows.slice(last + 1))
    : fill(note.dataset.page, { a: first + 1, b: last + 1, n: rows.length });
}

function turn() {
  const list = listOf();
  let next = FIRST;
  if (list && list.scrollHeight > list.clientHeight + 1 && !still.matches && !list.matches(':hover, :focus-within')) {
    const rows = rowsOf(list);
    const bottom = list.getBoundingClientRect().bottom;
    const beyond = rows.find((row) => row.getBoundingClientRect().bottom > bottom + 1);
    // The last page ends with the list; rows before it are seen twice rather than not at all.
    list.scrollTop = beyond && beyond !== rows[0] ? beyond.offsetTop - rows[0].offsetTop : 0;
    seen();
    if (list.scrollTop > 0) next = OTHER;
  }
  setTimeout(turn, next);
}

document.addEventListener('live:morphed', ({ target }) => { if (target.id === 'needs') fit(); });
document.addEventListener('scroll', seen, { capture: true, passive: true });
document.addEventListener('focusin', seen);
addEventListener('resize', fit);
document.fonts.ready.then(fit);
fit();
setTimeout(turn, FIRST);
