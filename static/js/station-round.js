// Typing a round: one characteristic at a time, the keypad, a gauge that types and
// ends with Enter, and where the round falls meanwhile. Nothing is judged here; the
// server parses and asks again whatever this file thinks.
//
// The page brings along (web/station/round.templ):
//
//   form[data-round]              data-say-…: the words that are needed
//     [data-choice]               radio buttons "entry": "full" or "deviation"
//     [data-ask]                  one characteristic
//       data-decimals             decimals of a reading
//       data-target               target, absent if there is none
//       data-below, data-above    readings beyond these are asked for once more
//       data-sign                 a reading can be negative
//       [data-heading]            becomes data-heading-says of the current reading
//       input[data-reading]       the readings in order
//       input[data-keyed]         beside each: who keyed it, data-person of the form
//       [data-from]               beside each: which stream of the machine it is from
//       select[data-stream]       where that is changed, by the id of the reading
//       [data-short]              why there are fewer, radio buttons
//       [data-falls]              see falls.js
//     [data-pad]                  the keys, and [data-main], which is "next" until
//                                 everything is in and then saves
//
// What is typed is kept in this browser (draft.js) until it is sent, so that leaving the
// page, the lock of a tablet or another person at it lose nothing. data-station names the
// place; data-several says that readings of other people may be sent from here, which is
// so on an enrolled tablet. [data-kept] tells that something was brought back,
// [data-unfit] that it does not fit what is asked now, and [data-afresh] throws it away.
//
// Targets, bounds and values are whole last digits ("units"): 12.500 with three
// decimals is 12500. They stay below 1e12, so a Number holds them exactly.

import * as drafts from "./draft.js";
import { update } from "./falls.js";

const SAME_ENTER = 400; // ms within which a second Enter belongs to the first

function start(form) {
  const sections = [...form.querySelectorAll("[data-ask]")].map((root) => new Section(root, form));
  const pad = form.querySelector("[data-pad]");
  const main = form.querySelector("[data-main]");
  const say = form.dataset;
  let current = null; // the reading that keys go to
  let mode = form.querySelector('[name="entry"]:checked')?.value ?? "full";

  form.dataset.scripted = "yes";
  for (const key of pad.querySelectorAll("[data-key]")) key.hidden = false;
  for (const s of sections) {
    for (const input of s.inputs) input.inputMode = "none"; // the keypad is the keyboard
  }

  const sectionOf = (input) => sections.find((s) => s.inputs.includes(input));
  const complete = () => sections.every((s) => s.complete());

  function show(section) {
    for (const s of sections) s.root.hidden = s !== section;
    const deviation = mode === "deviation" && section.target !== null;
    const point = section.decimals > 0 && !deviation;
    const sign = section.sign || deviation;
    pad.classList.toggle("with-sign", sign && !point);
    pad.classList.toggle("with-both", sign && point);
    pad.classList.toggle("whole", !sign && !point);
  }

  function mark() {
    for (const s of sections) {
      for (const input of s.inputs) input.parentElement.classList.toggle("now", input === current);
      s.draw(mode);
    }
    const label = complete() ? say.saySave : say.sayNext;
    if (main.textContent !== label) main.textContent = label;
  }

  const field = (name) => form.elements[name];
  const draftKey = drafts.keyOf(say.station, field("due").value, field("occasion").value, sections.map((s) => s.root.dataset.ask));

  function keep() {
    if (sections.every((s) => s.filled() === 0)) {
      drafts.drop(draftKey);
      return;
    }
    const parts = Object.fromEntries(sections.map((s) => [s.root.dataset.ask, s.kept()]));
    drafts.write(draftKey, { round: field("round").value, taken: field("taken").value, mode, parts });
  }

  // restore brings back what was typed into an empty form. It comes back under the number
  // and the time that it had, so that what was sent already is recognised.
  function restore() {
    const draft = drafts.read(draftKey);
    const empty = sections.every((s) => s.filled() === 0) && !form.querySelector("[aria-invalid]");
    if (!draft || !empty) return;
    const mine = (r) => r.value.trim() === "" || r.keyed === say.person;
    const typed = Object.values(draft.parts).flatMap((p) => p.readings);
    if (say.several === undefined && !typed.every(mine)) {
      drafts.drop(draftKey);
      return;
    }
    if (!sections.every((s) => s.takes(draft.parts[s.root.dataset.ask]))) {
      tellUnfit(typed.map((r) => r.value).filter((v) => v.trim() !== ""));
      return;
    }
    field("round").value = draft.round;
    field("taken").value = draft.taken;
    for (const s of sections) {
      s.fill(draft.parts[s.root.dataset.ask]);
      s.convert(draft.mode, mode);
    }
    form.querySelector("[data-kept]").hidden = false;
  }

  // tellUnfit says that the set-up was changed while something was typed, and what that
  // was. It stays in the browser until it was seen, or something else is typed.
  function tellUnfit(values) {
    const line = form.querySelector("[data-unfit]");
    line.querySelector("b").textContent = values.join("  ");
    line.hidden = false;
  }

  for (const button of form.querySelectorAll("[data-afresh]")) {
    button.addEventListener("click", () => {
      drafts.drop(draftKey);
      location.reload();
    });
  }

  function go(input) {
    current = input;
    const section = sectionOf(input);
    show(section);
    if (document.activeElement !== input) input.focus();
    if (input.value) input.select();
    section.heading(input.dataset.headingSays, section.from(input));
    mark();
  }

  // arm makes one more Enter save. A gauge may end with two; the second must not.
  let armedAt = -Infinity;
  function arm() {
    armedAt = performance.now();
    const section = sections.find((s) => !s.root.hidden) ?? sections[0];
    current = null;
    section.heading(say.sayReady);
    mark();
    main.focus();
  }

  // next leads to the first reading that is still asked for, behind this one first.
  function next(input) {
    const all = sections.flatMap((s) => (s.complete() ? [] : s.inputs));
    const open = all.filter((i) => i.value.trim() === "");
    const at = all.indexOf(input);
    const target = open.find((i) => all.indexOf(i) > at) ?? open[0];
    if (target) go(target);
    else arm();
  }

  // commit takes what stands in a reading; it stays there when that cannot be right.
  function commit(input) {
    const section = sectionOf(input);
    if (input.value.trim() === "") return false;
    const problem = section.judge(input, mode, say);
    section.problem(input, problem);
    if (problem) {
      if (problem === say.sayLook) {
        section.again(input);
        keep();
      }
      go(input);
      return false;
    }
    settle(input);
    return true;
  }

  // settle writes a reading as it is recorded: with all its decimals and the decimal sign
  // of the page. What is no reading stays as it was typed, and so does a deviation.
  function settle(input) {
    const written = sectionOf(input).written(input.value, mode);
    if (written === null || written === input.value) return;
    input.value = written;
    keep();
  }

  form.addEventListener("focusin", (event) => {
    if (event.target.matches("[data-reading]") && event.target !== current) go(event.target);
  });
  form.addEventListener("focusout", (event) => {
    const input = event.target;
    if (input.matches("[data-reading]") && sectionOf(input).judge(input, mode, say) === "") settle(input);
  });
  form.addEventListener("input", (event) => {
    if (event.target.matches("[data-reading]")) {
      sectionOf(event.target).problem(event.target, "");
      keyedBy(event.target, say.person);
      mark();
      keep();
    }
  });
  form.addEventListener("change", (event) => {
    if (event.target.name === "entry") change(event.target.value);
    else if (event.target.matches("[data-stream]")) {
      sections.find((s) => s.root.contains(event.target)).names();
      keep();
    }
    else if (event.target.closest("[data-short]")) {
      mark();
      keep();
    }
  });
  form.addEventListener("keydown", (event) => {
    if (event.key !== "Enter" || !event.target.matches("[data-reading]")) return;
    event.preventDefault(); // Enter ends a reading, it does not send the form
    if (event.isComposing || event.repeat) return;
    if (commit(event.target)) next(event.target);
    else if (event.target.value.trim() === "" && complete()) arm();
  });

  // Keys must not take the focus from the reading that they type into.
  pad.addEventListener("pointerdown", (event) => {
    if (event.target.closest("[data-key]")) event.preventDefault();
  });
  pad.addEventListener("click", (event) => {
    const key = event.target.closest("[data-key]");
    if (!key) return;
    if (!current) go(sections.find((s) => !s.root.hidden).inputs.at(-1));
    type(current, key.dataset.types ?? key.dataset.key);
    current.dispatchEvent(new Event("input", { bubbles: true }));
  });

  main.addEventListener("click", (event) => {
    const byKey = event.detail === 0;
    if (complete() && !(byKey && performance.now() - armedAt < SAME_ENTER)) return; // it saves
    event.preventDefault();
    if (complete()) return;
    if (current && current.value.trim() === "") go(current);
    else if (!current || commit(current)) next(current);
  });
  // A gauge may go on typing when all parts are in. That belongs to no part, and its Enter
  // must not save: it is said instead.
  let spilt = false;
  main.addEventListener("keydown", (event) => {
    if (/^[-+.,\d\u2212]$/.test(event.key)) spilt = true;
    else if (event.key === "Enter" && spilt) {
      event.preventDefault();
      spilt = false;
      armedAt = performance.now();
      (sections.find((s) => !s.root.hidden) ?? sections[0]).heading(say.saySpilt);
    }
  });
  form.addEventListener("submit", (event) => {
    for (const s of sections) {
      for (const input of s.inputs) {
        if (input.value.trim() !== "" && !commit(input)) {
          event.preventDefault();
          event.stopImmediatePropagation();
          return;
        }
      }
    }
  });

  function change(to) {
    for (const s of sections) s.convert(mode, to);
    mode = to;
    keep();
    document.cookie = `entry=${to}; path=/station; max-age=31536000; samesite=lax${location.protocol === "https:" ? "; secure" : ""}`;
    if (current) go(current);
    else mark();
  }

  // After the other listeners: by then the time of sending stands in the form, and a
  // send that never arrives can be repeated as the same record.
  form.addEventListener("submit", (event) => setTimeout(() => { if (!event.defaultPrevented) keep(); }));

  drafts.prune();
  restore();
  if (sections.some((s) => s.filled() > 0)) keep(); // under the number that the server gave
  const all = sections.flatMap((s) => s.inputs);
  const first = all.find((i) => i.getAttribute("aria-invalid")) ?? all.find((i) => i.value === "") ?? null;
  if (first) go(first);
  else {
    show(sections[0]);
    mark();
  }
  if (sections.some((s) => s.root.querySelector("[data-short] .problem"))) {
    const s = sections.find((one) => one.root.querySelector("[data-short] .problem"));
    show(s);
    s.root.querySelector("[data-short] input")?.focus();
  }
}

// keyedBy notes who keyed a reading; an empty one is nobody's.
function keyedBy(input, person) {
  input.parentElement.querySelector("[data-keyed]").value = input.value.trim() === "" ? "" : person;
}

// type puts one key into a reading, over what is selected.
function type(input, key) {
  const { selectionStart: from, selectionEnd: to, value } = input;
  if (key === "back") input.setRangeText("", from === to ? Math.max(0, from - 1) : from, to, "end");
  else if (key === "sign") {
    input.value = /^[-\u2212]/.test(value) ? value.slice(1) : `-${value.replace(/^\+/, "")}`;
  } else input.setRangeText(key, from, to, "end");
}

// digits reads a number as whole last digits: null when it is none, NaN when it has
// more decimals than there are.
function digits(text, decimals) {
  const m = /^\s*([-+\u2212]?)(\d*)(?:[.,](\d*))?\s*$/.exec(text);
  if (!m || (m[2] === "" && !m[3])) return null;
  const fraction = (m[3] ?? "").replace(/0+$/, "");
  if (fraction.length > decimals) return NaN;
  const units = Number(m[2] + fraction.padEnd(decimals, "0"));
  return m[1] === "-" || m[1] === "\u2212" ? 0 - units : units;
}

// text writes whole last digits as a number with its decimals and the decimal sign of
// the page.
function text(units, decimals, sign = ".") {
  const s = String(Math.abs(units)).padStart(decimals + 1, "0");
  const cut = s.length - decimals;
  return (units < 0 ? "-" : "") + (decimals ? `${s.slice(0, cut)}${sign}${s.slice(cut)}` : s);
}

const numberOr = (value, none) => (value === undefined ? none : Number(value));

// Section is one characteristic of the round.
class Section {
  constructor(root, form) {
    this.root = root;
    this.form = form;
    this.inputs = [...root.querySelectorAll("[data-reading]")];
    this.falls = root.querySelector("[data-falls]");
    this.decimals = Number(root.dataset.decimals) || 0;
    this.target = numberOr(root.dataset.target, null);
    this.below = numberOr(root.dataset.below, -Infinity);
    this.above = numberOr(root.dataset.above, Infinity);
    this.sign = root.dataset.sign !== undefined;
    const { sayInside, sayAbove, sayBelow } = this.falls.dataset;
    this.soFar = { sayInside, sayAbove, sayBelow };
  }

  // units is a reading in full, whichever way it was typed.
  units(value, mode) {
    if (mode !== "deviation" || this.target === null) return digits(value, this.decimals);
    const deviation = digits(value, 0);
    return deviation === null ? null : deviation + this.target;
  }

  // written is a reading in full as it is recorded, null when it is none.
  written(value, mode) {
    if (value.trim() === "" || (mode === "deviation" && this.target !== null)) return null;
    const units = digits(value, this.decimals);
    return units === null || Number.isNaN(units) ? null : text(units, this.decimals, this.falls.dataset.decimal);
  }

  filled() {
    return this.inputs.filter((i) => i.value.trim() !== "").length;
  }

  complete() {
    const n = this.filled();
    return n === this.inputs.length || (n > 0 && this.root.querySelector("[data-short] input:checked") !== null);
  }

  heading(words, from = "") {
    const h = this.root.querySelector("[data-heading]");
    const says = from ? `${words} · ${from}` : words;
    if (h.textContent !== says) h.textContent = says;
  }

  stream(input) {
    return this.root.querySelector(`[data-stream="${input.id}"]`);
  }

  // from is the name of the stream that a part is to come from, "" where there are none.
  from(input) {
    return this.stream(input)?.selectedOptions[0]?.textContent ?? "";
  }

  // names says beside each reading which stream is chosen for it.
  names() {
    for (const input of this.inputs) {
      const place = input.parentElement.querySelector("[data-from]");
      if (place) place.textContent = this.from(input);
    }
  }

  // judge says what is wrong with a reading, "" when nothing is.
  judge(input, mode, say) {
    const units = this.units(input.value, mode);
    if (units === null) return say.sayNotANumber;
    if (Number.isNaN(units)) {
      if (mode === "deviation" && this.target !== null) return say.sayWholeDigits;
      return this.decimals === 0 ? say.sayWholeNumbers : say.sayDecimals;
    }
    if (units >= this.below && units <= this.above) return "";
    return this.firsts(input).some((f) => this.units(f.value, mode) === units) ? "" : say.sayLook;
  }

  firsts(input) {
    return [...input.parentElement.querySelectorAll("[data-first]")];
  }

  // again keeps what was typed and asks for it once more: both go into the record.
  again(input) {
    const first = document.createElement("input");
    first.type = "hidden";
    first.name = `first-${this.root.dataset.ask}${input.id.slice(input.id.lastIndexOf("-"))}`;
    first.value = input.value.trim();
    first.dataset.first = "";
    input.after(first);
    input.value = "";
  }

  // kept is this section as a draft holds it.
  kept() {
    return {
      setup: this.setup(),
      short: this.root.querySelector("[data-short] input:checked")?.value ?? "",
      readings: this.inputs.map((i) => ({
        value: i.value,
        keyed: i.parentElement.querySelector("[data-keyed]").value,
        first: this.firsts(i).map((f) => f.value),
        stream: this.stream(i)?.value,
      })),
    };
  }

  setup() {
    return this.form.elements[`setup-${this.root.dataset.ask}`].value;
  }

  // takes reports whether a draft is of what is asked here.
  takes(part) {
    return part?.setup === this.setup() && part.readings.length === this.inputs.length;
  }

  fill(part) {
    part.readings.forEach((r, at) => {
      const input = this.inputs[at];
      for (const first of r.first) {
        input.value = first;
        this.again(input);
      }
      input.value = r.value;
      keyedBy(input, r.keyed);
      const stream = this.stream(input);
      if (stream && [...stream.options].some((o) => o.value === r.stream)) stream.value = r.stream;
    });
    this.names();
    const short = [...this.root.querySelectorAll("[data-short] input")].find((i) => i.value === part.short);
    if (short) {
      short.checked = true;
      short.closest("details").open = true;
    }
  }

  problem(input, words) {
    const place = document.getElementById(`${input.id}-problem`);
    const says = words ? `${place.dataset.label}: ${words}` : "";
    if (place.textContent.trim() !== says) place.textContent = says;
    if (words) input.setAttribute("aria-invalid", "true");
    else input.removeAttribute("aria-invalid");
  }

  draw(mode) {
    const readings = this.inputs.map((i) => {
      const units = i.value.trim() === "" ? null : this.units(i.value, mode);
      if (units === null || Number.isNaN(units)) return null;
      // "14.9" on its way to 14.991 would throw the dot far out: what is still being
      // typed is drawn once it is a usual number, and whatever it is when it is left.
      if (i === document.activeElement && (units < this.below || units > this.above)) return null;
      return Number(text(units, this.decimals));
    });
    const { dataset } = this.falls;
    const all = this.filled() === this.inputs.length;
    dataset.sayInside = all ? dataset.doneInside : this.soFar.sayInside;
    dataset.sayAbove = all ? dataset.doneAbove : this.soFar.sayAbove;
    dataset.sayBelow = all ? dataset.doneBelow : this.soFar.sayBelow;
    update(this.falls, readings);
  }

  // convert rewrites what was typed when the way of typing changes. What is no
  // reading stays as it is.
  convert(from, to) {
    if (this.target === null || from === to) return;
    for (const input of [...this.inputs, ...this.root.querySelectorAll("[data-first]")]) {
      if (input.value.trim() === "") continue;
      const units = this.units(input.value, from);
      if (units === null || Number.isNaN(units)) continue;
      input.value = to === "deviation" ? String(units - this.target) : text(units, this.decimals, this.falls.dataset.decimal);
    }
  }
}

const form = document.querySelector("form[data-round]");
if (form) start(form);
