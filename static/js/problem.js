// A refused entry must not look as if nothing had happened: the page comes back with its
// top in view, and what has to be mended may stand far below.
//
//   main [aria-invalid=true], main .problem[role=alert]   the first of them is brought into
//                                view, and its field gets the focus
//   main .message[role=alert]    is about the whole form: brought into view only
//   form[data-round], [autofocus]   see to their own focus
//
// A problem belongs to the field, or to the group of fields, that names it by
// aria-describedby.

const PROBLEMS = "[aria-invalid=true], .problem[role=alert]:not(:empty), .message[role=alert]";
const FIELDS = "input:not([type=hidden]), select, textarea";

const fieldOf = (problem) => {
  if (problem.matches("[aria-invalid=true]")) return problem;
  const named = problem.id && document.querySelector(`[aria-describedby~="${CSS.escape(problem.id)}"]`);
  if (!named || named.matches(FIELDS)) return named || null;
  return named.querySelector("input:checked") ?? named.querySelector(FIELDS);
};

const saidOf = (field) => {
  const id = field.getAttribute("aria-describedby")?.split(" ").find((one) => document.getElementById(one)?.matches(".problem"));
  return id ? document.getElementById(id) : field;
};

const inView = (element) => {
  const { top, bottom } = element.getBoundingClientRect();
  return top >= 0 && bottom <= innerHeight;
};

function show(problem) {
  for (let d = problem.closest("details"); d; d = d.parentElement.closest("details")) d.open = true;
  const field = fieldOf(problem);
  field?.focus({ preventScroll: true });
  const said = problem === field ? saidOf(field) : problem;
  if (!inView(said)) said.scrollIntoView({ block: "center" });
  if (field && !inView(field)) field.scrollIntoView({ block: "nearest" });
}

const main = document.getElementById("main");
if (main && !main.querySelector("form[data-round], [autofocus]")) {
  const first = [...main.querySelectorAll(PROBLEMS)].find((p) => p.closest("details:not([open])") || p.getClientRects().length);
  if (first) show(first);
}
