// The size of an adjustment in steps of the unit's last digit.
//
//   [data-stepper data-decimals="3"] with one input and two [data-step="±1"]
//
// The value stays what was typed until a step is made; a step from something that is
// no number begins at one step.

for (const stepper of document.querySelectorAll("[data-stepper]")) {
  const input = stepper.querySelector("input");
  const decimals = Number(stepper.dataset.decimals) || 0;
  for (const button of stepper.querySelectorAll("[data-step]")) {
    button.hidden = false;
    button.addEventListener("click", () => {
      const value = Number(input.value.replace(",", "."));
      const units = Number.isFinite(value) ? Math.round(value * 10 ** decimals) + Number(button.dataset.step) : 1;
      input.value = (Math.max(1, units) / 10 ** decimals).toFixed(decimals);
    });
  }
}
