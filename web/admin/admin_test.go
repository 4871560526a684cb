package admin

import (
	"context"
	"encoding/json"
	"errors"
	"net/http"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/qualify"
)

func TestOnlyAdministratorsSeeTheQualification(t *testing.T) {
	t.Parallel()
	s := newSite(t, newRunner(sample()).run)
	for login, want := range map[string]int{"": 303, "operator": 403, "supervisor": 403, "engineer": 403} {
		v := s.visitor(t, login)
		for _, at := range []string{"GET /admin/qualification", "POST /admin/qualification", "GET /admin/qualification.json"} {
			method, path, _ := strings.Cut(at, " ")
			if res := v.Do(v.Request(method, path, nil)); res.StatusCode != want {
				t.Errorf("%s as %q: %d, want %d", at, login, res.StatusCode, want)
			}
		}
	}
	if s.admin.qualification.state().Now != nil {
		t.Error("somebody who may not has started one")
	}
}

func TestStartPageLeadsToTheQualification(t *testing.T) {
	t.Parallel()
	s := newSite(t, newRunner(sample()).run)
	_, page := s.visitor(t, "administrator").get("/admin")
	for _, want := range []string{`href="/admin/qualification"`, "who measures and who manages stay apart", `aria-current="page"`} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not hold %s", want)
		}
	}
}

func TestQualificationRunsInTheBackgroundAndIsShown(t *testing.T) {
	t.Parallel()
	r := newRunner(sample())
	s := newSite(t, r.run)
	v := s.visitor(t, "administrator")
	if _, page := v.get("/admin/qualification"); !strings.Contains(part(t, page, "never"), "from a few seconds to half a minute") {
		t.Error("the page does not say that none was run and how long it takes")
	}
	if res, _ := v.get("/admin/qualification.json"); res.StatusCode != http.StatusNotFound {
		t.Errorf("a file of no record: %d", res.StatusCode)
	}

	if res, _ := v.post("/admin/qualification", nil); res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != "/admin/qualification" {
		t.Fatalf("starting: %d to %s", res.StatusCode, res.Header.Get("Location"))
	}
	<-r.began
	r.group <- struct{}{}
	r.group <- struct{}{} // taken only when the first is reported
	if res, _ := v.post("/admin/qualification", nil); res.StatusCode != http.StatusSeeOther {
		t.Errorf("starting while one runs: %d", res.StatusCode)
	}
	_, page := v.get("/admin/qualification")
	running := part(t, page, "running")
	for _, want := range []string{"Since 12:00 , started by Administrator 1.", "factors 2 1 0.50", "Look again"} {
		if !strings.Contains(running, want) {
			t.Errorf("while it runs the page says %q, without %q", running, want)
		}
	}
	if !strings.Contains(page, "js/admin-progress.js") {
		t.Error("nothing follows the progress")
	}

	r.end <- nil
	s.admin.qualification.running.Wait()
	if len(r.began) != 0 {
		t.Error("a second one was begun beside the first")
	}
	_, page = v.get("/admin/qualification")
	if got, want := part(t, page, "outcome"), "2 of 5 reference values were not reproduced within their allowance. Do not rely on"; !strings.HasPrefix(got, want) {
		t.Errorf("outcome %q, want %q", got, want)
	}
	facts := part(t, page, "facts")
	for _, want := range []string{
		"Program holdfast", "Version v1.4.0", "Revision 0123456789abcdef0123456789abcdef01234567, changed after it", "Built with go1.26",
		"System linux/arm64", "Processors 4", "Machine press-hall-1", "Plant Kestrel Row",
		"Begun 12 March 2026, 11:58:07 (UTC+01:00, Plant/Time)", "Took 12.3 s", "Run by Administrator 1",
	} {
		if !strings.Contains(facts, want) {
			t.Errorf("the facts %q lack %q", facts, want)
		}
	}
	failures := part(t, page, "failures")
	for _, want := range []string{
		"d3 for n = 5 factors Expected 0.864 Obtained 0.8664 Difference 0.0024 Allowance 0.0005 Allowance from half a unit of the last place printed Source From memory: a table of 1950",
		"least sample lot sampling Expected 125 Nothing was obtained no plan holds both risks Allowance 0",
	} {
		if !strings.Contains(failures, want) {
			t.Errorf("the failures %q lack %q", failures, want)
		}
	}
	if got := part(t, page, "groups"); !strings.Contains(got, "factors 2 1 0.50 lot sampling 1 1 0.50") {
		t.Errorf("groups %q", got)
	}
	values := part(t, page, "values")
	for _, want := range []string{
		"From memory a table of 1950 d2 for n = 5 2.326 2.32592894727 −7.11 × 10 −5 0.0005 passed d3 for n = 5 0.864 0.8664 0.0024 0.0005 FAILED",
		"Computed closed form c4 for n = 2 0.3 0.3 5.55 × 10 −17 5 × 10 −11 passed",
		"3.2966356769 × 10 −6 3.29663567688 × 10 −6 −1.7 × 10 −17 5 × 10 −16 passed",
		"least sample 125 nothing 0 FAILED",
	} {
		if !strings.Contains(values, want) {
			t.Errorf("the values %q lack %q", values, want)
		}
	}
	if strings.Contains(page, "<details class=\"panel admin-values\" open") {
		t.Error("the groups are open before anybody asks")
	}
	if _, opened := v.get("/admin/qualification?values=open"); strings.Count(opened, `<details class="panel admin-values" open`) != 2 {
		t.Error("the groups do not open without a script")
	}
	order := []int{strings.Index(page, `data-testid="outcome"`), strings.Index(page, "checks the computing on this machine and nothing else"), strings.Index(page, `data-testid="failures"`),
		strings.Index(page, `data-testid="groups"`), strings.Index(page, `data-testid="values"`), strings.Index(page, `data-testid="sign"`)}
	if order[0] < 0 || !slices.IsSorted(order) {
		t.Errorf("the parts stand at %v", order)
	}
}

func TestFileHoldsTheWholeRecord(t *testing.T) {
	t.Parallel()
	r := newRunner(sample())
	s := newSite(t, r.run)
	v := s.visitor(t, "administrator")
	v.post("/admin/qualification", nil)
	r.end <- nil
	s.admin.qualification.running.Wait()
	res, body := v.get("/admin/qualification.json")
	if got := res.Header.Get("Content-Disposition"); res.Header.Get("Content-Type") != "application/json" || got != `attachment; filename="holdfast-qualification-20260312-105807.json"` {
		t.Errorf("%s, %s", res.Header.Get("Content-Type"), got)
	}
	var got file
	if err := json.Unmarshal([]byte(body), &got); err != nil {
		t.Fatal(err)
	}
	if want := sample(); got.Plant != "Kestrel Row" || got.Machine != "press-hall-1" || got.RunBy != "Administrator 1" ||
		!slices.Equal(got.Results, want.Results) || !slices.Equal(got.Groups, want.Groups) || !got.Began.Equal(want.Began) || got.Failed != 2 {
		t.Errorf("the file holds %+v", got)
	}
}

func TestWhatDidNotFinishIsSaidAndLogged(t *testing.T) {
	t.Parallel()
	r := newRunner(sample())
	s := newSite(t, r.run)
	v := s.visitor(t, "administrator")
	try := func(end error) string {
		v.post("/admin/qualification", nil)
		r.end <- end
		s.admin.qualification.running.Wait()
		_, page := v.get("/admin/qualification")
		return page
	}
	page := try(errors.New("cases/x.json: a secret place"))
	if got := part(t, page, "broken"); got != "The qualification begun 12:00 did not finish. The log of the program says why." || part(t, page, "never") == "" {
		t.Errorf("after an error: %q", got)
	}
	if strings.Contains(page, "secret place") || !strings.Contains(s.log.String(), "secret place") {
		t.Error("the error belongs into the log and not on the page")
	}
	if page = try(nil); part(t, page, "broken") != "" || part(t, page, "outcome") == "" {
		t.Error("after one that finished the page still speaks of the other")
	}
	page = try(errors.New("again"))
	if got := part(t, page, "broken"); !strings.HasSuffix(got, "What stands below is the last one that did.") || part(t, page, "outcome") == "" {
		t.Errorf("after an error with a record before it: %q", got)
	}
}

func TestPanicInTheComputingEndsTheRunOnly(t *testing.T) {
	t.Parallel()
	s := newSite(t, func(context.Context, qualify.Options) (qualify.Record, error) { panic("index out of range") })
	v := s.visitor(t, "administrator")
	v.post("/admin/qualification", nil)
	s.admin.qualification.running.Wait()
	if _, page := v.get("/admin/qualification"); part(t, page, "broken") == "" || !strings.Contains(s.log.String(), "index out of range") {
		t.Error("a panic is neither shown nor logged")
	}
}

func TestCloseEndsTheRun(t *testing.T) {
	t.Parallel()
	r := newRunner(sample())
	s := newSite(t, r.run)
	v := s.visitor(t, "administrator")
	v.post("/admin/qualification", nil)
	<-r.began
	s.admin.Close()
	if st := s.admin.qualification.state(); st.Now != nil || st.Last != nil || !st.Broken.IsZero() || s.log.Len() > 0 {
		t.Errorf("after the end of the program: %+v, log %q", st, s.log)
	}
	if res, _ := v.post("/admin/qualification", nil); res.StatusCode != http.StatusConflict {
		t.Errorf("starting after the end: %d", res.StatusCode)
	}
}

func TestRealGroupsReachThePage(t *testing.T) {
	t.Parallel()
	// The real computing, ended by its own context after the groups that take no time.
	s := newSite(t, func(ctx context.Context, opt qualify.Options) (qualify.Record, error) {
		ctx, cancel := context.WithCancel(ctx)
		defer cancel()
		var got qualify.Record
		each, group := opt.Each, opt.Group
		opt.Begin = func(r qualify.Record) { got = r }
		opt.Each = func(r qualify.Result) { each(r); got.Results = append(got.Results, r) }
		opt.Group = func(g qualify.GroupTotal) {
			group(g)
			got.Groups, got.Passed, got.Failed = append(got.Groups, g), got.Passed+g.Passed, got.Failed+g.Failed
			if len(got.Groups) == 3 {
				cancel()
			}
		}
		if _, err := qualify.Report(ctx, opt); !errors.Is(err, context.Canceled) {
			return got, err
		}
		return got, nil
	})
	v := s.visitor(t, "administrator")
	v.post("/admin/qualification", nil)
	s.admin.qualification.running.Wait()
	_, page := v.get("/admin/qualification")
	outcome := part(t, page, "outcome")
	if !strings.HasPrefix(outcome, "All 1,") || !strings.HasSuffix(outcome, "reference values were reproduced within their allowance.") || part(t, page, "failures") != "" {
		t.Errorf("outcome %q", outcome)
	}
	values := part(t, page, "values")
	// From memory: tables of factors print d2 of 5 as 2.326; the long figure is what the page adds to it.
	for _, want := range []string{"d2 for n = 5 2.325928947", "Published", "From memory", "Computed"} {
		if !strings.Contains(values, want) {
			t.Errorf("the values lack %q", want)
		}
	}
	if strings.Contains(values, "e-1") || strings.Contains(values, "NaN") {
		t.Error("a number is written as machines do")
	}
}
