// Looks whether a code was used, and opens the page anew when one was, so that the new
// device stands in the list. A form that somebody is filling in is left alone.

const AGAIN = 2000; // ms

const codes = (root) => [...root.querySelectorAll("[data-code]")].map((c) => c.dataset.code).join();

function typing() {
  return [...document.querySelectorAll("form input, form select")].some((f) =>
    f.matches("select") ? f === document.activeElement : f.value !== f.defaultValue || f.checked !== f.defaultChecked);
}

async function look() {
  try {
    const answer = await fetch(location.pathname);
    const page = new DOMParser().parseFromString(await answer.text(), "text/html");
    if (answer.ok && codes(page) !== codes(document) && !typing()) {
      location.assign(location.pathname);
      return;
    }
  } catch {
    // out of contact; the next look may find it again
  }
  setTimeout(look, AGAIN);
}

setTimeout(look, AGAIN);
