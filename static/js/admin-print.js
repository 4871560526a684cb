// Opens every group for the print and closes those again that were closed. Style
// sheets alone do this only in newer browsers.

let opened = [];

addEventListener('beforeprint', () => {
  opened = Array.from(document.querySelectorAll('details:not([open])'));
  for (const group of opened) group.open = true;
});
addEventListener('afterprint', () => {
  for (const group of opened) group.open = false;
  opened = [];
});
