// What was typed into a form and not saved, kept in this browser: the lock of a tablet,
// another person at it, another language, a broken connection or a look elsewhere lose
// nothing. A round keeps its readings by itself (draft.js), since each has its own author.
//
//   body[data-person]            who is signed in
//   body[data-shared]            an enrolled tablet: what one typed, another goes on with.
//                                Elsewhere everybody has their own.
//   form[data-typed="a b"]       a form that is kept; with its address the hidden fields a
//                                and b say which one it is
//     [data-typed-kept]          says that something was brought back; data-other says so
//                                when somebody else typed it: what is sent is the sender's
//       [data-typed-afresh]      throws it away
//
// Passwords and hidden fields are never kept, but for the number of the record and the
// time of the first try (name="id", [data-taken]): a send whose answer was lost is repeated
// as the same record. A draft is dropped only when the server says that it took it: each
// send carries a number, and the redirect after it names that number in a cookie.

const PREFIX = "holdfast.typed.";
const TAKEN = "typed-taken";
const KEPT = 24 * 60 * 60 * 1000;

const { person = "", shared } = document.body.dataset;
const touched = new WeakSet(); // fields that somebody typed into, now or before

function read(key) {
  try {
    const draft = JSON.parse(localStorage.getItem(key));
    return draft && Date.now() - draft.saved < KEPT ? draft : null;
  } catch {
    return null;
  }
}

function write(key, draft) {
  try {
    localStorage.setItem(key, JSON.stringify({ ...draft, saved: Date.now() }));
  } catch {
    // no room or not allowed: the page itself still holds what was typed
  }
}

function drop(key) {
  try {
    localStorage.removeItem(key);
  } catch {
    // then there was none
  }
}

function keys() {
  try {
    return Object.keys(localStorage).filter((key) => key.startsWith(PREFIX));
  } catch {
    return [];
  }
}

const hidden = (form, name) => form.querySelector(`input[type="hidden"][name="${name}"]`);

// A form has a field named "action", so its own properties cannot be trusted.
function keyOf(form) {
  const of = form.dataset.typed.split(" ").filter(Boolean).map((name) => hidden(form, name)?.value ?? "");
  return PREFIX + [form.getAttribute("action"), ...of, ...(shared === undefined ? [person] : [])].join(" ");
}

const fieldsOf = (form) => [...form.querySelectorAll("input[name], textarea[name], select[name]")]
  .filter((f) => !["hidden", "password", "file", "submit", "button"].includes(f.type));

const ticked = (f) => f.type === "radio" || f.type === "checkbox";

function differs(f) {
  if (ticked(f)) return f.checked !== f.defaultChecked;
  if (f instanceof HTMLSelectElement) return [...f.options].some((o) => o.selected !== o.defaultSelected);
  return f.value !== f.defaultValue;
}

// The fields of a draft: name, which of that name, value, and whether it is ticked.
function typedIn(form) {
  const seen = {};
  const out = [];
  for (const f of fieldsOf(form)) {
    const at = (seen[f.name] = (seen[f.name] ?? -1) + 1);
    if (touched.has(f) || differs(f)) out.push([f.name, at, f.value, ticked(f) ? f.checked : null]);
  }
  return out;
}

const number = () => [...crypto.getRandomValues(new Uint8Array(12))].map((b) => b.toString(16).padStart(2, "0")).join("");

function keep(form, more = {}) {
  const key = keyOf(form);
  const fields = typedIn(form);
  if (fields.every(([, , value, on]) => (on === null ? value === "" : !on))) {
    drop(key);
    return null;
  }
  const draft = { number: number(), ...read(key), person, fields, ...more };
  write(key, draft);
  return draft;
}

function find(form, [name, at, value, on]) {
  const all = fieldsOf(form).filter((f) => f.name === name);
  return on === null ? all[at] : all.find((f) => f.value === value);
}

function restore(form) {
  const draft = read(keyOf(form));
  if (!draft) return;
  const refused = form.querySelector("[aria-invalid=true]") || document.querySelector("main [role=alert].message");
  let brought = false;
  for (const one of draft.fields) {
    const f = find(form, one);
    if (!f) continue;
    touched.add(f);
    const [, , value, on] = one;
    if (on === null && f.value !== value) f.value = value;
    else if (on !== null && f.checked !== on) f.checked = on;
    else continue;
    if (!differs(f)) continue;
    brought = true;
    const details = f.closest("details");
    if (details) details.open = true;
  }
  if (draft.sent && refused) write(keyOf(form), { ...draft, sent: null }); // answered, and not taken
  else if (draft.sent) {
    for (const [name, value] of Object.entries(draft.sent)) {
      if (value && hidden(form, name)) hidden(form, name).value = value;
    }
  }
  const note = form.querySelector("[data-typed-kept]");
  if (!brought || !note) return;
  if (draft.person !== person) note.querySelector("span").textContent = note.dataset.other;
  note.hidden = false;
}

// A record that the server took is nobody's draft any more.
function forgetTaken() {
  const found = document.cookie.split("; ").find((c) => c.startsWith(`${TAKEN}=`));
  if (!found) return;
  document.cookie = `${TAKEN}=; path=/; max-age=0; samesite=lax${location.protocol === "https:" ? "; secure" : ""}`;
  const taken = found.slice(TAKEN.length + 1);
  for (const key of keys()) if (read(key)?.number === taken) drop(key);
}

const formOf = (event) => event.target.closest?.("form[data-typed]");

forgetTaken();
for (const key of keys()) if (!read(key)) drop(key);
for (const form of document.querySelectorAll("form[data-typed]")) restore(form);

document.addEventListener("input", (event) => {
  const form = formOf(event);
  if (!form || !event.target.name || event.target.type === "password") return;
  for (const f of fieldsOf(form)) if (f.name === event.target.name && (f === event.target || f.type === "radio")) touched.add(f);
  keep(form);
});

document.addEventListener("click", (event) => {
  if (!event.target.closest("[data-typed-afresh]")) return;
  drop(keyOf(formOf(event)));
  location.reload();
});

// At the window, after the listeners that stamp the time of sending.
addEventListener("submit", (event) => {
  const form = formOf(event);
  if (!form || event.defaultPrevented) return;
  const draft = keep(form, { sent: { id: hidden(form, "id")?.value ?? "", taken: hidden(form, "taken")?.value ?? "" } });
  if (!draft) return;
  let field = hidden(form, "typed");
  if (!field) {
    field = document.createElement("input");
    field.type = "hidden";
    field.name = "typed";
    form.append(field);
  }
  field.value = draft.number;
});
