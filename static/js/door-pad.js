// Keys of the sign-in at a tablet and of the page where a code is typed.
//
//   form[data-pad-form]
//     input[data-pad-field]   in order; Enter leads to the next one that is empty,
//                             so that a scanner that ends with Enter fills the badge
//     input[data-pad-last]    the one after which Enter sends the form
//     [data-pad-keys]         button[data-key], a digit or "back", hidden without a script
//   [data-draft-waits]        the station; its text becomes data-say with {n} put in

import { waiting } from "./draft.js";

function start(form) {
  const fields = [...form.querySelectorAll("[data-pad-field]")];
  const keys = form.querySelector("[data-pad-keys]");
  for (const key of keys.querySelectorAll("[data-key]")) key.hidden = false;
  keys.dataset.scripted = "yes";
  fields.at(-1).inputMode = "none"; // the keys are the keyboard
  let current = fields.find((f) => f === document.activeElement) ?? fields.find((f) => f.value === "") ?? fields.at(-1);

  form.addEventListener("focusin", (event) => {
    if (event.target.matches("[data-pad-field]")) current = event.target;
  });
  form.addEventListener("keydown", (event) => {
    if (event.key !== "Enter" || !event.target.matches("[data-pad-field]")) return;
    const next = fields.find((f) => f !== event.target && f.value === "");
    if (event.target.value === "" || !next) return; // a plain form: Enter sends it
    event.preventDefault();
    next.focus();
  });
  // A scanner that ends with two line ends must not send the form without a PIN.
  form.addEventListener("submit", (event) => {
    const empty = fields.find((f) => f.value === "");
    if (!empty) return;
    event.preventDefault();
    empty.focus();
  });
  keys.addEventListener("pointerdown", (event) => {
    if (event.target.closest("[data-key]")) event.preventDefault(); // the field keeps the focus
  });
  keys.addEventListener("click", (event) => {
    const key = event.target.closest("[data-key]")?.dataset.key;
    if (!key) return;
    if (document.activeElement !== current) current.focus();
    const { selectionStart: from, selectionEnd: to } = current;
    if (key !== "back") current.setRangeText(key, from, to, "end");
    else current.setRangeText("", from === to ? Math.max(0, from - 1) : from, to, "end");
  });
}

for (const form of document.querySelectorAll("form[data-pad-form]")) start(form);

const note = document.querySelector("[data-draft-waits]");
if (note) {
  const n = waiting(note.dataset.draftWaits);
  if (n > 0) {
    note.textContent = note.dataset.say.replace("{n}", String(n));
    note.hidden = false;
  }
}
