// What of the page is lost where the reader's own colours replace those of the page: a
// button or field without an edge, a choice that only its background tells from the
// others, a mark that is nothing but a background, a drawing in colours of its own.
(() => {
  const found = [];
  const says = (e) => (e.textContent.trim() || e.getAttribute("aria-label") || e.name || "").replace(/\s+/g, " ").slice(0, 60);
  const name = (e) => e.tagName.toLowerCase() + (e.id ? `#${e.id}` : "") + [...e.classList].map((c) => `.${c}`).join("");
  const seen = (e) => e.checkVisibility({ visibilityProperty: true, opacityProperty: true });
  const forReaders = (e) => e.offsetWidth <= 1 || e.closest(".hidden, .skip") !== null;
  const probe = document.createElement("i");
  document.body.append(probe);
  const resolve = (colour) => { probe.style.color = ""; probe.style.setProperty("color", colour); return getComputedStyle(probe).color; };
  probe.style.setProperty("forced-color-adjust", "none");
  const system = new Set(["Canvas", "CanvasText", "LinkText", "VisitedText", "ActiveText", "ButtonFace", "ButtonText", "ButtonBorder", "Field", "FieldText", "Highlight", "HighlightText", "GrayText", "Mark", "MarkText", "SelectedItem", "SelectedItemText", "AccentColor", "AccentColorText"].map(resolve));
  const canvas = resolve("Canvas");
  probe.remove();
  const clear = (colour) => colour === "transparent" || /^rgba.*, 0\)$/.test(colour);
  const edge = (s, side) => s[`border${side}Style`] !== "none" && parseFloat(s[`border${side}Width`]) >= 1 && !clear(s[`border${side}Color`]) && s[`border${side}Color`] !== canvas;
  const edges = (s) => ["Top", "Right", "Bottom", "Left"].filter((side) => edge(s, side)).length;

  for (const e of document.querySelectorAll("button, a.button, summary.button, select, textarea, input:not([type=hidden]):not([type=radio]):not([type=checkbox]):not([type=range]):not([type=file])")) {
    if (!seen(e) || forReaders(e)) continue;
    const s = getComputedStyle(e);
    const under = s.textDecorationLine.includes("underline");
    const outlined = s.outlineStyle !== "none" && parseFloat(s.outlineWidth) >= 1 && e !== document.activeElement;
    const filled = s.forcedColorAdjust === "none" && s.backgroundColor !== canvas && !clear(s.backgroundColor);
    if (edges(s) === 0 && !(e.tagName === "INPUT" && edges(getComputedStyle(e.parentElement)) > 0) && !under && !outlined && !filled) found.push(`nothing shows that ${name(e)} "${says(e)}" can be used`);
  }

  // What is chosen or current differs from its neighbours in more than its background.
  const looks = (e) => {
    const s = getComputedStyle(e);
    const deep = [...e.querySelectorAll("*")].filter((c) => seen(c)).map((c) => { const t = getComputedStyle(c); return [t.fontWeight, t.textDecorationLine, t.borderTopWidth, t.borderBottomWidth, t.borderLeftWidth].join(); });
    return JSON.stringify([s.fontWeight, s.textDecorationLine, s.textDecorationThickness, s.borderTopWidth, s.borderBottomWidth, s.borderLeftWidth, s.borderTopStyle, s.outlineStyle === "none" ? "" : s.outlineWidth, s.forcedColorAdjust === "none" ? s.color + s.backgroundColor : s.color, getComputedStyle(e, "::before").content, getComputedStyle(e, "::after").content, deep]);
  };
  for (const e of document.querySelectorAll("[aria-current]:not([aria-current=false]), [aria-selected=true], [aria-pressed=true]")) {
    if (!seen(e) || forReaders(e) || e.closest("svg")) continue;
    const item = e.parentElement.children.length === 1 ? e.parentElement : e;
    const others = [...item.parentElement.children].filter((o) => o !== item && o.tagName === item.tagName && seen(o));
    if (others.length > 0 && others.every((o) => looks(o) === looks(item))) found.push(`only its background tells ${name(e)} "${says(e)}" from its neighbours`);
  }

  // Behind letters the browser paints the colour of the page, so letters of that colour
  // vanish, whatever background they were meant for.
  const letters = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  while (letters.nextNode()) {
    const e = letters.currentNode.parentElement;
    if (!letters.currentNode.textContent.trim() || e.closest("svg") || !seen(e) || forReaders(e)) continue;
    const s = getComputedStyle(e);
    if (s.forcedColorAdjust !== "none" && s.color === canvas) found.push(`the letters of ${name(e)} "${says(e)}" vanish`);
  }

  // A mark without any text: its background is gone.
  const own = new Map();
  for (const e of document.querySelectorAll("body *")) {
    if (e.closest("svg") || !seen(e) || forReaders(e) || e.childElementCount > 0 || e.textContent.trim() || /^(INPUT|SELECT|TEXTAREA|IMG|SVG|BR|HR|SCRIPT|PROGRESS|METER|OPTION)$/.test(e.tagName)) continue;
    const r = e.getBoundingClientRect();
    if (r.width < 2 || r.height < 2) continue;
    const s = getComputedStyle(e);
    if (s.forcedColorAdjust === "none" || edges(s) > 0) continue;
    own.set(e, true);
  }
  document.documentElement.style.setProperty("forced-color-adjust", "none");
  for (const e of own.keys()) {
    const s = getComputedStyle(e);
    const parent = getComputedStyle(e.parentElement).backgroundColor;
    if ((!clear(s.backgroundColor) && s.backgroundColor !== parent) || s.backgroundImage !== "none" || s.boxShadow !== "none") found.push(`${name(e)} in ${name(e.parentElement)} is nothing but a background`);
  }
  document.documentElement.style.removeProperty("forced-color-adjust");

  // Drawings use the reader's colours, and every mark differs from what lies behind it.
  for (const e of document.querySelectorAll("svg :is(path, circle, rect, line, polyline, polygon, ellipse, text, tspan, use)")) {
    if (e.closest("defs, symbol, clipPath, mask") || !e.checkVisibility({ visibilityProperty: true, opacityProperty: true })) continue;
    const s = getComputedStyle(e);
    for (const kind of ["fill", "stroke"]) {
      const colour = s[kind];
      if (colour === "none" || colour.startsWith("url") || clear(colour) || (kind === "stroke" && parseFloat(s.strokeWidth) === 0)) continue;
      if (!system.has(colour)) found.push(`${name(e)} in ${name(e.closest("svg"))} is drawn in ${colour}, not in the reader's colours`);
    }
  }
  return JSON.stringify([...new Set(found)]);
})()
