package main

import (
	"testing"

	"holdfast/internal/browsertest"
)

// TestALostAnswerMakesNoSecondRecord: the change was saved and its answer never came. It is
// brought back under its number, and saving it again is the same record.
func TestALostAnswerMakesNoSecondRecord(t *testing.T) {
	t.Parallel()
	r := serve(t)
	p := r.signIn(t, browsertest.Start(t), "operator1")
	at := "/station/" + r.Station.ID.String() + "/change"
	const tool = "button[name=kind][value=tool]"
	p.Open(at)
	into(p, "input[name=note]", "Insert turned")
	// What the browser would send goes out, and the answer and its cookies are thrown away.
	p.Value(`addEventListener("submit", (e) => { e.preventDefault(); const f = e.target;
		fetch(f.getAttribute("action"), { method: "POST", body: new URLSearchParams(new FormData(f, e.submitter)), redirect: "manual" })
			.finally(() => { document.cookie = "typed-taken=; path=/; max-age=0"; window.lost = true; }); })`)
	p.Click(tool)
	p.WaitFor(`window.lost`)
	changes := func() (n int) {
		t.Helper()
		if err := r.Pool().QueryRow(t.Context(), `select count(*) from change where note = 'Insert turned'`).Scan(&n); err != nil {
			t.Fatal(err)
		}
		return n
	}
	if n := changes(); n != 1 {
		t.Fatalf("%d changes after the send whose answer is lost, want 1", n)
	}
	p.Open(at)
	p.WaitFor(find("[data-typed-kept]:not([hidden])"))
	p.Want("what was typed", find("input[name=note]")+".value", "Insert turned")
	p.Click(tool)
	p.WaitFor(`!location.pathname.endsWith("/change")`)
	p.WaitFor(`Object.keys(localStorage).every((k) => !k.startsWith("holdfast.typed."))`)
	if n := changes(); n != 1 {
		t.Errorf("%d changes after it was sent again, want 1", n)
	}
	whole(t, r)
}
