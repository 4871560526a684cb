// What the board does with what the server pushes (web/board/doc.go): it keeps
// to what the viewer has chosen to see, tells a screen reader of what is new,
// lets the ring of a new signal pulse once, and asks for the page again when
// stations come or go.
//
//   <main data-board data-only-line="<id>" data-only-owner="station">
//     <p role="status" data-board-say></p>
//     <span id="lanes-order" data-order="..."></span>
//     <article class="card" data-line data-owners data-matters="<id> <id>">
//     <section id="needs"> ... <li data-line data-owners data-matter="<id>" data-say="...">
//                              <p data-elsewhere hidden>
//
// New is what this page has not shown before, so nothing pulses or is said when
// the page opens, and what came while the link was down is new when it is back.

const PULSE = 900; // ms, as in css/chart.css
const SAID = 3; // more at once are a flood that nobody can listen to: the list has them
const TRY_AGAIN = 10000; // ms

const board = document.querySelector('[data-board]');
const say = board.querySelector('[data-board-say]');
const order = document.getElementById('lanes-order').dataset.order;

const shown = (element) => (!board.dataset.onlyLine || element.dataset.line === board.dataset.onlyLine)
  && (!board.dataset.onlyOwner || element.dataset.owners.split(' ').includes(board.dataset.onlyOwner));

function narrow(root) {
  const parts = root.matches('[data-owners]') ? [root] : root.querySelectorAll('[data-owners]');
  for (const part of parts) part.hidden = !shown(part);
  const nothing = board.querySelector('[data-nothing]');
  if (nothing) nothing.hidden = board.querySelector('.card:not([hidden])') !== null;
  const elsewhere = root.querySelector('[data-elsewhere]');
  if (elsewhere) elsewhere.hidden = !root.querySelector('.needs-list > [hidden]');
}

const onCards = new Set();
const inList = new Set();
const mattersOf = (card) => (card.dataset.matters ?? '').split(' ').filter(Boolean);
const listed = () => Array.from(board.querySelectorAll('#needs [data-matter]'));

function pulse(card) {
  const fresh = mattersOf(card).filter((id) => !onCards.has(id));
  if (fresh.length === 0) return;
  fresh.forEach((id) => onCards.add(id));
  card.classList.add('is-new');
  setTimeout(() => card.classList.remove('is-new'), PULSE);
}

function tell() {
  const fresh = listed().filter((item) => !inList.has(item.dataset.matter));
  fresh.forEach((item) => inList.add(item.dataset.matter));
  const words = fresh.filter((item) => !item.hidden).slice(-SAID).map((item) => item.dataset.say);
  if (words.length > 0) say.textContent = words.join(' ');
}

// again loads the page anew, but only from a server that answers: a wall screen
// must not end at an error page.
async function again() {
  try {
    const answer = await fetch(location.href, { cache: 'no-store' });
    if (answer.ok && !answer.redirected) {
      location.reload();
      return;
    }
  } catch {
    // no server just now
  }
  setTimeout(again, TRY_AGAIN);
}
let asked = false;

board.querySelectorAll('.card').forEach((card) => mattersOf(card).forEach((id) => onCards.add(id)));
listed().forEach((item) => inList.add(item.dataset.matter));

document.addEventListener('live:morphed', ({ target }) => {
  if (target.matches('.card')) {
    narrow(target);
    pulse(target);
  } else if (target.id === 'needs') {
    narrow(target);
    tell();
  } else if (target.id === 'lanes-order' && target.dataset.order !== order && !asked) {
    asked = true;
    again();
  }
});
