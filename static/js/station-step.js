// The size of an adjustment in steps of so many last digits.
//
//   [data-stepper data-decimals="3" data-by="5" data-decimal="."] with one input and two [data-step="±1"]
//
// The value stays what was typed until a step is made; a step from something that is
// no number begins at one step.

for (const stepper of document.querySelectorAll("[data-stepper]")) {
  const input = stepper.querySelector("input");
  const decimals = Number(stepper.dataset.decimals) || 0;
  const by = Number(stepper.dataset.by) || 1;
  for (const button of stepper.querySelectorAll("[data-step]")) {
    button.hidden = false;
    button.addEventListener("click", () => {
      const value = Number(input.value.replace(",", "."));
      const units = Number.isFinite(value) ? Math.round(value * 10 ** decimals) + by * Number(button.dataset.step) : by;
      input.value = (Math.max(by, units) / 10 ** decimals).toFixed(decimals).replace(".", stepper.dataset.decimal || ".");
      input.dispatchEvent(new Event("input", { bubbles: true })); // typed is typed, see typed.js
    });
  }
}
