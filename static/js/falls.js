// Where this round falls while it is typed. No statistics: an average, and a
// place on a scale that the drawing brings along.
//
// Contract with the page (web/chart draws the two pictures, the station page
// writes the words):
//
//   [data-falls]                  the part of the page this is about
//     data-decimals="4"           decimals of the average
//     data-decimal="."            decimal sign, "." unless given
//     data-of="mean"              or "median": what the chart charts
//     data-say-none, data-say-inside, data-say-above, data-say-below
//                                 sentences for [data-falls-says]; the last two
//                                 are for a value beyond a control limit. While
//                                 a round is incomplete they say "so far"
//   inside it
//     [data-falls-average]        text becomes the average, "" while there is none
//     [data-falls-count]          text becomes how many readings it is of
//     [data-falls-says]           text becomes one of the sentences above
//     svg[data-falls-chart]       data-lo, data-hi: values at data-bottom and
//                                 data-top (px of the drawing); data-upper and
//                                 data-lower: control limits, absent if there
//                                 are none. Holds [data-falls-now], the hollow
//                                 dot with its dashed link, and two
//                                 [data-falls-beyond="up|down"] chevrons
//     svg[data-falls-strip]       the same scale; one [data-falls-tick] for each
//                                 part, in order, and the two chevrons
//
// More than one drawing of a kind may be there (landscape and portrait).
// Whoever knows the readings says so, either way:
//
//   import { update } from the address of this file;
//   update(root, [14.994, 14.989, null, null, null]);
//   root.dispatchEvent(new CustomEvent("falls:readings", { bubbles: true, detail: { readings: [...] } }));
//
// A reading that is not a finite number is not there yet.

const finite = (v) => typeof v === "number" && Number.isFinite(v);

// location of the readings that are there, or NaN.
export function location(readings, of = "mean") {
  const v = readings.filter(finite);
  if (v.length === 0) return NaN;
  if (of === "median") {
    const s = v.toSorted((a, b) => a - b);
    const m = s.length >> 1;
    return s.length % 2 ? s[m] : s[m - 1] / 2 + s[m] / 2;
  }
  return v.reduce((sum, x) => sum + x, 0) / v.length;
}

// place returns the y of a value on a drawing's scale, kept within it, and
// where it lies: "up" or "down" if beyond the axis, "" otherwise.
export function place(svg, value) {
  const { lo, hi, top, bottom } = numbers(svg);
  if (value > hi) return { y: top, beyond: "up" };
  if (value < lo) return { y: bottom, beyond: "down" };
  return { y: top + ((hi - value) / (hi - lo)) * (bottom - top), beyond: "" };
}

function numbers(svg) {
  const d = svg.dataset;
  return { lo: Number(d.lo), hi: Number(d.hi), top: Number(d.top), bottom: Number(d.bottom) };
}

function show(node, yes) {
  if (yes) node.removeAttribute("display");
  else node.setAttribute("display", "none");
}

const px = (v) => (Math.round(v * 10) / 10).toString();

// update redraws one [data-falls] for the readings typed so far.
export function update(root, readings) {
  const at = location(readings, root.dataset.of);
  for (const svg of root.querySelectorAll("svg[data-falls-chart]")) moveDot(svg, at);
  for (const svg of root.querySelectorAll("svg[data-falls-strip]")) moveTicks(svg, readings);
  for (const node of root.querySelectorAll("[data-falls-average]")) node.textContent = words(root, at);
  for (const node of root.querySelectorAll("[data-falls-count]")) node.textContent = String(readings.filter(finite).length);
  const says = sentence(root, at);
  for (const node of root.querySelectorAll("[data-falls-says]")) {
    if (node.textContent !== says) node.textContent = says; // a live region must not repeat itself
  }
}

function words(root, at) {
  if (!finite(at)) return "";
  const decimals = Math.min(Math.max(Number(root.dataset.decimals) || 0, 0), 12);
  const s = at.toFixed(decimals).replace(".", root.dataset.decimal || ".");
  return /[1-9]/.test(s) ? s.replace("-", "\u2212") : s.replace("-", "");
}

function sentence(root, at) {
  const d = root.dataset;
  if (!finite(at)) return d.sayNone ?? "";
  const chart = root.querySelector("svg[data-falls-chart]");
  const limit = (name) => (chart?.dataset[name] === undefined ? NaN : Number(chart.dataset[name]));
  // on the line is inside: the same tolerance as a tie on the server, in parts of the band
  const tie = 1e-9 * (Math.abs(limit("upper") - limit("lower")) || 0);
  if (at > limit("upper") + tie) return d.sayAbove ?? "";
  if (at < limit("lower") - tie) return d.sayBelow ?? "";
  return d.sayInside ?? "";
}

function moveDot(svg, at) {
  const group = svg.querySelector("[data-falls-now]");
  if (!group) return;
  show(group, finite(at));
  if (!finite(at)) return;
  const { y, beyond } = place(svg, at);
  group.querySelector("circle")?.setAttribute("cy", px(y));
  group.querySelector("line")?.setAttribute("y2", px(y));
  for (const c of group.querySelectorAll("[data-falls-beyond]")) show(c, c.dataset.fallsBeyond === beyond);
}

function moveTicks(svg, readings) {
  const seen = { up: false, down: false };
  svg.querySelectorAll("[data-falls-tick]").forEach((tick, i) => {
    const v = readings[i];
    show(tick, finite(v));
    if (!finite(v)) return;
    const { y, beyond } = place(svg, v);
    if (beyond) seen[beyond] = true;
    tick.setAttribute("y1", px(y));
    tick.setAttribute("y2", px(y));
  });
  for (const c of svg.querySelectorAll("[data-falls-beyond]")) show(c, seen[c.dataset.fallsBeyond]);
}

if (typeof document !== "undefined") {
  document.addEventListener("falls:readings", (e) => {
    const root = e.target instanceof Element ? e.target.closest("[data-falls]") : null;
    if (root && Array.isArray(e.detail?.readings)) update(root, e.detail.readings);
  });
}
