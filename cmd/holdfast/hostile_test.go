package main

import (
	"context"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/store/storetest"
)

// junk is what no field expects.
var junk = []string{
	"", "\x00", "a\x00b", "\xff\xfe", "1e400", "NaN", "-1", "-999999999999999999", "99999999999999999999999999",
	strings.Repeat("9", 5000), strings.Repeat("\U0001f600", 700), "2026-03-29T01:30", "9999-12-31T23:59", "0000-00-00T00:00", "9999-12-31T23:59:59.999999999Z",
	"-0001-01-01T00:00:00Z", "253402300799999", "00000000-0000-0000-0000-000000000000", "<b>", "%", "\\", "'; --", "\r\nSet-Cookie: x=1",
}

// TestHostileInputNeverFails puts junk into every field of every form and every query,
// once and many times over: no answer is a fault of ours, and nothing of it is recorded
// but what was right.
func TestHostileInputNeverFails(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	a := r.MustRecord(t, r.Diameter, 14998, 14999, 14998, 14999, 14998)
	m := r.openMatter(t)
	ctx := context.Background()
	at := "/station/" + r.Station.ID.String()
	desk := "/desk/characteristic/" + r.Diameter.ID.String()
	_, round := r.roundOf(storetest.ID(), "14.990", "14.991", "14.992", "14.990", "x") // never right, so never recorded
	for k, v := range map[string]string{"due": "", "taken": "", "sent": "", "short-" + r.Diameter.ID.String(): "", "first-" + r.Diameter.ID.String() + "-0": "149.9"} {
		round.Set(k, v)
	}
	forms := []struct {
		who, method, path string
		form              url.Values
	}{
		{"operator1", "POST", at + "/round", round},
		{"operator1", "POST", at + "/correct", url.Values{"characteristic": {r.Diameter.ID.String()}, "subgroup": {a.Parts[0].Subgroup.String()}, "replaces": {"7"},
			"reading": {"14.990", "14.991", "14.992", "14.990", "14.991"}, "reason": {"typing slip"}, "short": {""}, "do": {""}}},
		{"operator1", "POST", at + "/matter/" + m.ID.String() + "/take", url.Values{"version": {"77"}}},
		{"operator1", "POST", at + "/matter/" + m.ID.String() + "/close", url.Values{"version": {"77"}, "cause": {"own"}, "own": {"a cause"}, "action": {"done"},
			"done": {""}, "fixed": {""}, "fixed_day": {""}, "fixed_time": {""}}},
		{"operator1", "POST", at + "/change", url.Values{"id": {"x"}, "machine": {r.Machine.ID.String()}, "kind": {"adjustment"},
			"characteristic": {r.Diameter.ID.String()}, "size": {"0.001"}, "direction": {"up"}, "note": {"n"}, "taken": {""}, "sent": {""}}},
		{"operator1", "POST", at + "/change", url.Values{"id": {storetest.ID().String()}, "machine": {r.Machine.ID.String()}, "kind": {"adjustment"},
			"characteristic": {r.Diameter.ID.String()}, "size": {"x"}, "direction": {"up"}, "note": {"n"}, "taken": {""}, "sent": {""}}},
		{"operator1", "POST", at + "/machine/" + r.Machine.ID.String(), url.Values{"id": {"x"}, "do": {"changeover"}, "part": {r.PartA.ID.String()}, "lot": {"7"}}},
		{"operator1", "POST", at + "/machine/" + r.Machine.ID.String(), url.Values{"id": {storetest.ID().String()}, "do": {"x"}, "part": {r.PartA.ID.String()}, "lot": {"7"}}},
		{"operator1", "GET", at, url.Values{"measure": {r.Diameter.ID.String()}, "done": {""}}},
		{"operator1", "GET", "/board", url.Values{"line": {r.Line.ID.String()}, "owner": {""}, "lanes": {"1"}}},
		{"engineer1", "GET", "/desk", url.Values{"show": {""}, "line": {""}}},
		{"engineer1", "GET", desk, url.Values{"from": {""}, "to": {""}, "last": {"20"}, "span": {""}, "before": {""}, "after": {""}, "as": {"table"}}},
		{"engineer1", "GET", desk + "/revisions", url.Values{"at": {""}, "frozen": {"1"}}},
		{"engineer1", "GET", desk + "/study", url.Values{"from": {""}, "to": {""}, "last": {""}, "estimator": {""}, "multiple": {"3"}, "rules": {"1"}, "loc": {""}, "dis": {""},
			"out": {""}, "do": {""}, "no": {"1"}, "own": {"x"}, "cause": {""}, "kind": {""}, "k": {"2"}, "m": {"3"}, "z": {"2"}}},
		{"engineer1", "POST", desk + "/study/freeze", url.Values{"from": {""}, "to": {""}, "estimator": {""}, "multiple": {"3"}, "after": {"9"}, "seen": {""}, "known": {"yes"},
			"wanted": {"yes"}, "lasting": {"yes"}, "reason": {"r"}, "in-force": {""}, "secret": {"x"}, "out": {""}, "loc": {""}, "dis": {""}}},
		{"", "POST", "/sign-in", url.Values{"login": {"nobody"}, "password": {"x"}, "to": {"/"}}},
		{"", "GET", "/sign-in", url.Values{"to": {"/"}}},
		{"", "POST", "/theme", url.Values{"theme": {"night"}, "to": {"/"}}},
	}
	var before, after [4]int
	count := func(into *[4]int) {
		t.Helper()
		if err := r.Pool().QueryRow(ctx, `select (select count(*) from subgroup), (select count(*) from change), (select count(*) from machine_state),
			(select count(*) from revision)`).Scan(&into[0], &into[1], &into[2], &into[3]); err != nil {
			t.Fatal(err)
		}
	}
	count(&before)
	visitors := map[string]*visitor{}
	for _, f := range forms {
		v := visitors[f.who]
		if v == nil {
			v = r.visit(t, f.who)
			visitors[f.who] = v
		}
		send := func(what string, form url.Values) {
			t.Helper()
			var res *http.Response
			var body string
			if f.method == "GET" {
				res, body = v.get(f.path + "?" + form.Encode())
			} else {
				res, body = v.post(f.path, form)
			}
			if res.StatusCode >= 500 || res.Header.Get("Set-Cookie") == "x=1" {
				t.Errorf("%s %s with %s: %s\n%.300s", f.method, f.path, what, res.Status, body)
			}
		}
		for field := range f.form {
			for _, text := range junk {
				form := url.Values{}
				for k, values := range f.form {
					form[k] = values
				}
				form[field] = []string{text}
				send(fmt.Sprintf("%s=%.20q", field, text), form)
			}
			form := url.Values{field: make([]string, 3000)}
			send(field+" 3000 times and nothing else", form)
		}
		many := url.Values{}
		for i := range 20000 {
			many.Set(fmt.Sprint("f", i), "1")
		}
		if f.method == "POST" {
			send("20000 fields", many)
		}
	}
	count(&after)
	if before != after {
		t.Errorf("on record before %v, after %v", before, after)
	}
	consistentRecord(t, r)
}

func consistentRecord(t *testing.T, r *running) {
	t.Helper()
	ctx := context.Background()
	if _, differences, err := r.CheckJudgements(ctx); err != nil || len(differences) > 0 {
		t.Errorf("judgements: %v, %v", differences, err)
	}
	if n, err := r.VerifyLedger(ctx); err != nil {
		t.Errorf("ledger breaks after %d entries: %v", n, err)
	}
}
