// Follows a qualification that runs: asks for the page again and again, shows how far
// it is, and opens the page anew once there is something else to show.
//
//   <section data-running>
//     <p data-progress="far" role="status">, <div data-progress="groups">

const AGAIN = 1500; // ms

const parts = (root) => Array.from(root.querySelectorAll('[data-progress]'));

async function look() {
  try {
    const answer = await fetch(location.href);
    const page = new DOMParser().parseFromString(await answer.text(), 'text/html');
    if (!answer.ok || !page.querySelector('[data-running]')) {
      location.reload();
      return;
    }
    for (const part of parts(document)) {
      const fresh = page.querySelector(`[data-progress="${part.dataset.progress}"]`);
      if (fresh && fresh.innerHTML !== part.innerHTML) part.replaceChildren(...fresh.childNodes);
    }
  } catch {
    // out of contact; the next look may find it again
  }
  setTimeout(look, AGAIN);
}

setTimeout(look, AGAIN);
