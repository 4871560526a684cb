// What of the page does not fit: text outside of its box, of the window, or of a part
// that is cut off; boxes that reach beyond the window. Text for readers only is left out.
(() => {
  const found = [];
  const says = (node) => node.textContent.trim().replace(/\s+/g, " ").slice(0, 60);
  const name = (e) => e.tagName.toLowerCase() + (e.id ? `#${e.id}` : "") + [...e.classList].map((c) => `.${c}`).join("");
  const scrolls = (e) => {
    for (let a = e; a && a !== document.documentElement; a = a.parentElement) {
      const s = getComputedStyle(a);
      if (/auto|scroll/.test(s.overflowX) && a.scrollWidth > a.clientWidth) return true;
      if (a.offsetWidth <= 1 || s.clipPath !== "none") return true; // for readers only
    }
    return false;
  };
  // clamped tells what ends with three dots after some lines on purpose.
  const clamped = (e) => { for (let a = e; a; a = a.parentElement) if (getComputedStyle(a).webkitLineClamp !== "none") return true; return false; };
  // box is the nearest ancestor that gives text its place.
  const box = (e) => {
    while (e.parentElement && /^(inline|contents)/.test(getComputedStyle(e).display) && !/^inline-(block|flex|grid)/.test(getComputedStyle(e).display)) e = e.parentElement;
    return e;
  };
  if (document.documentElement.scrollWidth > innerWidth) found.push(`the page is ${document.documentElement.scrollWidth} px wide`);
  const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  while (walker.nextNode()) {
    const node = walker.currentNode;
    const e = node.parentElement;
    if (!node.textContent.trim() || !e.checkVisibility({ visibilityProperty: true }) || e.closest(".skip") || scrolls(e)) continue;
    const range = document.createRange();
    range.selectNodeContents(node);
    const svg = e.closest("svg");
    const around = (svg ?? box(e)).getBoundingClientRect();
    const slack = svg ? (getComputedStyle(svg).overflow === "visible" ? 4 : 1) : parseFloat(getComputedStyle(e).fontSize) * 0.3; // upwards and downwards letters are less tall than their boxes
    for (const r of svg ? [e.getBoundingClientRect()] : range.getClientRects()) {
      if (!r.width || !r.height) continue;
      const off = Math.max(around.left - r.left, r.right - around.right);
      if (off > 1) found.push(`"${says(node)}" stands ${Math.round(off)} px outside of ${name(svg ?? box(e))}`);
      else if (r.right > innerWidth + 1 || r.left < -1) found.push(`"${says(node)}" stands outside of the window`);
      else if (clamped(e)) continue;
      else if (r.bottom > around.bottom + slack || r.top < around.top - slack) found.push(`"${says(node)}" is taller than ${name(svg ?? box(e))}`);
    }
    if (clamped(e)) continue;
    // A part that is cut off and cannot be scrolled hides what does not fit.
    for (let a = e; a && !svg; a = a.parentElement) {
      const s = getComputedStyle(a);
      if (/hidden|clip/.test(s.overflowX) && a.scrollWidth > a.clientWidth + 1) found.push(`"${says(node)}" is cut off by ${name(a)}`);
    }
  }
  for (const field of document.querySelectorAll("input:not([type=hidden]):not([type=radio]):not([type=checkbox])")) {
    if (field.checkVisibility() && field.scrollWidth > field.clientWidth + 1) found.push(`the value "${field.value}" does not fit into ${name(field)}`);
  }
  // Buttons and links side by side must not lie on one another.
  const pressed = [...document.querySelectorAll("a.button, button, summary, .chip")].filter((e) => e.checkVisibility({ visibilityProperty: true }) && !scrolls(e));
  for (const [i, a] of pressed.entries()) {
    for (const b of pressed.slice(i + 1)) {
      if (a.contains(b) || b.contains(a) || a.closest("details[open]") !== b.closest("details[open]")) continue;
      const p = a.getBoundingClientRect(), q = b.getBoundingClientRect();
      if (Math.min(p.right, q.right) - Math.max(p.left, q.left) > 1 && Math.min(p.bottom, q.bottom) - Math.max(p.top, q.top) > 1) found.push(`"${says(a)}" lies on "${says(b)}"`);
    }
  }
  return JSON.stringify([...new Set(found)]);
})()
