// Says when a form was saved by this device's clock, and sends it once.
//
//   <form data-sent-form> with input[data-taken] and input[data-sent]
//
// data-taken is filled at the first try and stays, so that a repeated send is the
// same record; data-sent is filled at every try, so that the server can measure how
// far this clock is off. Both are milliseconds since 1970. A second tap while the
// first is on its way is swallowed.

document.addEventListener("submit", (event) => {
  const form = event.target.closest("form[data-sent-form]");
  if (!form || event.defaultPrevented) return;
  if (form.dataset.onItsWay) {
    event.preventDefault();
    return;
  }
  form.dataset.onItsWay = "yes";
  const now = String(Date.now());
  for (const field of form.querySelectorAll("[data-taken]")) field.value ||= now;
  for (const field of form.querySelectorAll("[data-sent]")) field.value = now;
});

// A page that comes back from the back-forward cache may be sent again.
addEventListener("pageshow", () => {
  for (const form of document.querySelectorAll("form[data-on-its-way]")) delete form.dataset.onItsWay;
});
