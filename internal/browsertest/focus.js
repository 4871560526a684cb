// What can be reached by keyboard and does not show it: one of each kind is looked at.
(() => {
  const found = [];
  const name = (e) => e.tagName.toLowerCase() + [...e.classList].map((c) => `.${c}`).join("");
  const before = document.activeElement;
  const top = [scrollX, scrollY];
  const kinds = new Set();
  for (const e of document.querySelectorAll("a[href], button, input:not([type=hidden]), select, textarea, summary, [tabindex]:not([tabindex='-1'])")) {
    const kind = `${e.tagName}|${e.getAttribute("class")}|${e.type}|${e.parentElement.getAttribute("class")}`;
    if (kinds.has(kind) || e.disabled || !e.checkVisibility({ visibilityProperty: true })) continue;
    kinds.add(kind);
    // The outline may be that of what stands around it, and an edge that grows is one too.
    const around = [e, e.labels?.[0], e.nextElementSibling, ...e.querySelectorAll("*")].filter(Boolean).slice(0, 12);
    for (let a = e.parentElement; a && around.length < 18; a = a.parentElement) around.push(a);
    const looks = () => around.map((m) => { const s = getComputedStyle(m); return { outline: s.outlineStyle !== "none" && parseFloat(s.outlineWidth) >= 2 && !/^rgba.*, 0\)$/.test(s.outlineColor), edge: s.borderTopWidth + s.borderTopStyle, stroke: m instanceof SVGElement && s.stroke !== "none" ? s.stroke + s.strokeWidth : "" }; });
    document.activeElement?.blur?.();
    const calm = looks();
    e.focus({ focusVisible: true, preventScroll: true });
    if (document.activeElement !== e) continue;
    // A field that is marked as the present one anyway shows the focus by its caret.
    const caret = e.matches("input, textarea") && getComputedStyle(e).caretColor !== "transparent" && parseFloat(getComputedStyle(e.parentElement).borderTopWidth) >= 2;
    const shown = caret || looks().some((m, i) => m.outline && !calm[i].outline || m.edge !== calm[i].edge || m.stroke !== calm[i].stroke);
    if (!shown) found.push(`nothing shows that ${name(e)} "${(e.textContent.trim() || e.name || "").slice(0, 40)}" has the focus`);
  }
  before?.focus?.({ preventScroll: true });
  if (before === document.body) document.activeElement?.blur?.();
  scrollTo(...top);
  return JSON.stringify(found);
})()
