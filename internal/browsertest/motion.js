// What moves although the reader asked that nothing does.
(() => {
  const found = [];
  const name = (e) => e.tagName.toLowerCase() + (e.id ? `#${e.id}` : "") + [...e.classList].map((c) => `.${c}`).join("");
  const longest = (list) => Math.max(0, ...list.split(",").map((d) => parseFloat(d) * (d.trim().endsWith("ms") ? 0.001 : 1)));
  for (const a of document.getAnimations()) {
    const t = a.effect?.getComputedTiming();
    if (a.playState === "running" && t && t.duration > 10) found.push(`${name(a.effect.target)} moves for ${t.duration} ms`);
  }
  for (const e of document.querySelectorAll("*")) {
    for (const part of [undefined, "::before", "::after"]) {
      const s = getComputedStyle(e, part);
      if (s.transitionProperty !== "none" && longest(s.transitionDuration) > 0.01) found.push(`${name(e)}${part ?? ""} has a transition of ${s.transitionDuration}`);
      if (s.animationName !== "none" && longest(s.animationDuration) > 0.01) found.push(`${name(e)}${part ?? ""} has an animation of ${s.animationDuration}`);
      if (s.scrollBehavior === "smooth") found.push(`${name(e)} scrolls smoothly`);
    }
  }
  return JSON.stringify([...new Set(found)]);
})()
