// The time in the zone that is being chosen, so that a wrong one is seen at once.
//
//   [data-zone]          the field; data-zone=preset: nobody has chosen yet, so it begins
//                        with the browser's own zone
//   [data-zone-now]      where the time there is said, as data-zone-now has it, with {time}
//                        and {day} to be filled in; empty while the name is none

const field = document.querySelector("[data-zone]");
const said = document.querySelector("[data-zone-now]");

function say() {
  let parts;
  try {
    const at = new Intl.DateTimeFormat("en-GB", { timeZone: field.value.trim() || "none", weekday: "long", hour: "2-digit", minute: "2-digit" });
    parts = Object.fromEntries(at.formatToParts(new Date()).map((p) => [p.type, p.value]));
  } catch {
    said.textContent = "";
    return;
  }
  said.textContent = said.dataset.zoneNow.replace("{time}", `${parts.hour}:${parts.minute}`).replace("{day}", parts.weekday);
}

if (field && said) {
  const own = Intl.DateTimeFormat().resolvedOptions().timeZone;
  if (field.dataset.zone === "preset" && [...field.list.options].some((o) => o.value === own)) field.value = own;
  field.addEventListener("input", say);
  say();
  setInterval(say, 10_000);
}
