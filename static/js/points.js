// Points of a control chart: hover, touch or focus fills the line under it, and
// the arrow keys move from point to point (one tab stop for the whole chart).
//
// Contract: the chart is svg.control with an id and .pt groups as web/chart
// writes them (data-i, data-when, data-location, data-dispersion, data-readings,
// data-person, data-note). The line is any element with
// data-point-of="<chart id>", holding [data-fill="when|location|dispersion|
// readings|person|note"] elements. A [data-fill] may sit in a [data-part] that
// is hidden while there is nothing to say. Leaving the chart brings back the
// newest point. Without this script the line shows what the page wrote into it.
//
// Listeners are on the document, so a chart that a live update replaces needs
// nothing new.

const facts = ["when", "location", "dispersion", "readings", "person", "note"];

const pointOf = (node) => (node instanceof Element ? node.closest("svg.control .pt") : null);

// fill writes one point into the line of its chart.
export function fill(point) {
  const chart = point.closest("svg.control");
  for (const p of chart.querySelectorAll(".pt.is-here")) p.classList.remove("is-here");
  point.classList.add("is-here");
  for (const line of document.querySelectorAll(`[data-point-of="${CSS.escape(chart.id)}"]`)) {
    for (const fact of facts) {
      const value = point.dataset[fact] ?? "";
      for (const node of line.querySelectorAll(`[data-fill="${fact}"]`)) {
        node.textContent = value;
        const part = node.closest("[data-part]");
        if (part) part.hidden = value === "";
      }
    }
  }
}

function newest(chart) {
  const p = chart.querySelector(".pt[data-newest]");
  if (p) {
    fill(p);
    p.classList.remove("is-here");
  }
}

// inOrder sorts the targets of a thinned chart too, where marked points stand
// after the columns.
function inOrder(chart) {
  return [...chart.querySelectorAll(".pt")].sort((a, b) => Number(a.dataset.i) - Number(b.dataset.i));
}

function move(point, key) {
  const all = inOrder(point.closest("svg.control"));
  const i = all.indexOf(point);
  const to = { ArrowLeft: i - 1, ArrowRight: i + 1, Home: 0, End: all.length - 1, PageUp: i - 10, PageDown: i + 10 }[key];
  if (to === undefined) return false;
  const next = all[Math.min(Math.max(to, 0), all.length - 1)];
  point.setAttribute("tabindex", "-1");
  next.setAttribute("tabindex", "0");
  next.focus();
  return true;
}

document.addEventListener("pointerover", (e) => {
  const p = pointOf(e.target);
  if (p) fill(p);
});
document.addEventListener("pointerout", (e) => {
  const p = pointOf(e.target);
  const chart = p?.closest("svg.control");
  if (e.pointerType === "mouse" && chart && !chart.contains(e.relatedTarget) && !chart.contains(document.activeElement)) newest(chart);
});
document.addEventListener("focusin", (e) => {
  const p = pointOf(e.target);
  if (p) fill(p);
});
document.addEventListener("focusout", (e) => {
  const chart = pointOf(e.target)?.closest("svg.control");
  if (chart && !chart.contains(e.relatedTarget)) newest(chart);
});
document.addEventListener("keydown", (e) => {
  const p = pointOf(e.target);
  if (p && !e.altKey && !e.ctrlKey && !e.metaKey && move(p, e.key)) e.preventDefault();
});
