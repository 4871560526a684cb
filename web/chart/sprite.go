package chart

// Sprite holds the state symbols. A page places it once, first in its body, and
// uses one as <svg class="sym" aria-hidden="true"><use href="#s-look"/></svg>.
// The count of corners grows with urgency: ring (leave), triangle (due), diamond
// (look), octagon (hold); two bars are a stopped machine, the dotted ring is
// learning, the ring with a question mark is unknown.
const Sprite = `<svg class="sprite" aria-hidden="true" focusable="false"><defs>` +
	`<symbol id="s-leave" viewBox="0 0 24 24"><circle cx="12" cy="12" r="8.5" fill="none" stroke="currentColor" stroke-width="2.6"/></symbol>` +
	`<symbol id="s-due" viewBox="0 0 24 24"><path d="M5.5 3.2 21 12 5.5 20.8Z" fill="currentColor" stroke="currentColor" stroke-width="2" stroke-linejoin="round"/></symbol>` +
	`<symbol id="s-look" viewBox="0 0 24 24"><path d="M12 1.8 22.2 12 12 22.2 1.8 12Z" fill="none" stroke="currentColor" stroke-width="2.8" stroke-linejoin="round"/><circle cx="12" cy="12" r="3.6" fill="currentColor"/></symbol>` +
	`<symbol id="s-hold" viewBox="0 0 24 24"><path fill-rule="evenodd" fill="currentColor" d="M7.4 1h9.2L23 7.4v9.2L16.6 23H7.4L1 16.6V7.4ZM5.4 9.9v4.2h13.2V9.9Z"/></symbol>` +
	`<symbol id="s-stop" viewBox="0 0 24 24"><path d="M8 4.5v15M16 4.5v15" fill="none" stroke="currentColor" stroke-width="3.4" stroke-linecap="round"/></symbol>` +
	`<symbol id="s-learn" viewBox="0 0 24 24"><circle cx="12" cy="12" r="8.5" fill="none" stroke="currentColor" stroke-width="2.8" stroke-dasharray="0.01 5.33" stroke-linecap="round"/></symbol>` +
	`<symbol id="s-unknown" viewBox="0 0 24 24"><circle cx="12" cy="12" r="9.6" fill="none" stroke="currentColor" stroke-width="2.4"/><path d="M9 9.6a3 3 0 1 1 4.4 2.6c-.9.5-1.4 1-1.4 2" fill="none" stroke="currentColor" stroke-width="2.2" stroke-linecap="round"/><circle cx="12" cy="17" r="1.5" fill="currentColor"/></symbol>` +
	`<symbol id="s-ok" viewBox="0 0 24 24"><path d="M4.5 12.5 10 18 20 6.5" fill="none" stroke="currentColor" stroke-width="2.6" stroke-linecap="round" stroke-linejoin="round"/></symbol>` +
	`<symbol id="s-back" viewBox="0 0 24 24"><path d="M9 5h12v14H9L3 12Zm4 4 5 6m0-6-5 6" fill="none" stroke="currentColor" stroke-width="2.2" stroke-linecap="round" stroke-linejoin="round"/></symbol>` +
	`<symbol id="s-up" viewBox="0 0 22 34"><path d="M11 2 20 14h-5.6v18H7.6V14H2Z" stroke="currentColor" stroke-width="1.8" stroke-linejoin="round"/></symbol>` +
	`<symbol id="s-down" viewBox="0 0 22 34"><path d="M11 32 20 20h-5.6V2H7.6v18H2Z" stroke="currentColor" stroke-width="1.8" stroke-linejoin="round"/></symbol>` +
	`<symbol id="s-post" viewBox="0 0 22 34"><path d="M14 32V4H4v10h10" fill="currentColor" stroke="currentColor" stroke-width="2"/></symbol>` +
	`</defs></svg>`

// MarkSVG is the product's mark: a point held between two banks. It stands
// before the name inside an element of class "mark".
const MarkSVG = `<svg viewBox="0 0 26 26" aria-hidden="true" focusable="false"><rect class="water" x="2" y="7" width="22" height="12"/><rect class="bank" x="2" y="4" width="22" height="3"/><rect class="bank" x="2" y="19" width="22" height="3"/><circle class="held" cx="13" cy="13" r="3.6"/></svg>`

// HatchSwatch is the reach pattern as a key, for the box that says what to keep
// aside. id must be unique on the page.
func HatchSwatch(id string) string {
	d := &builder{}
	id = ident(id)
	d.raw(`<svg class="swatch" viewBox="0 0 64 64" aria-hidden="true">`)
	d.hatch(id, 9)
	d.hatched("reach", 1, 1, 62, 62, id)
	d.rect("edge-box", 1, 1, 62, 62)
	d.raw("</svg>")
	return string(d.b)
}
