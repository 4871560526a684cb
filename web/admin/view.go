package admin

import (
	"strings"
	"time"

	"holdfast/internal/qualify"
	"holdfast/web/ui"
)

// page is the page of the qualification, ready to print. One of Progress and Record is
// there, or neither while it was never run.
type page struct {
	Broken   string // when the newest run began, if it did not finish
	Progress *progressView
	Record   *recordView
}

type progressView struct {
	Began, BeganMachine string
	By                  string
	Groups, Values      int
	Done                []groupView
}

type recordView struct {
	Facts          []fact
	Passed, Failed int
	Groups         []groupView
	Failures       []failure
	Open           bool // the groups are open on the screen too
}

type fact struct{ Label, Value string }

type groupView struct {
	Name, Passed, Failed, Seconds string
	Unsound                       bool // a case failed
	Sources                       []sourceView
}

// sourceView are cases in a row that come from the same place.
type sourceView struct {
	Status, Source string
	Cases          []caseView
}

type caseView struct {
	Name                                      string
	Expected, Obtained, Difference, Allowance figure
	Passed                                    bool
	Nothing                                   bool // no value was obtained
}

// failure is a case that was not reproduced, in full.
type failure struct {
	Group, Status, Source, Basis, Problem string
	caseView
}

func newPage(s ui.Shell, machine string, st state, open bool) page {
	var p page
	if !st.Broken.IsZero() {
		p.Broken = s.Format.Clock(st.Broken)
	}
	switch {
	case st.Now != nil:
		p.Progress = &progressView{
			Began: s.Format.Clock(st.Now.Began), BeganMachine: s.Format.Machine(st.Now.Began), By: st.Now.By,
			Groups: len(st.Now.Groups), Values: st.Now.Values,
		}
		for _, g := range st.Now.Groups {
			p.Progress.Done = append(p.Progress.Done, newGroup(s.Format, g))
		}
	case st.Last != nil:
		p.Record = newRecord(s, machine, *st.Last)
		p.Record.Open = open
	}
	return p
}

func newRecord(s ui.Shell, machine string, done finished) *recordView {
	r, f := done.Record, s.Format
	v := &recordView{Facts: newFacts(s, machine, done), Passed: r.Passed, Failed: r.Failed}
	rest := r.Results
	for _, g := range r.Groups {
		group := newGroup(f, g)
		for ; len(rest) > 0 && rest[0].Group == g.Name; rest = rest[1:] {
			result := rest[0]
			c := newCase(f, result, sizeDigits)
			status := statusWord(f, result.Status)
			last := len(group.Sources) - 1
			if last < 0 || group.Sources[last].Source != result.Source || group.Sources[last].Status != status {
				group.Sources = append(group.Sources, sourceView{Status: status, Source: result.Source})
				last++
			}
			group.Sources[last].Cases = append(group.Sources[last].Cases, c)
			if !result.Passed {
				v.Failures = append(v.Failures, failure{g.Name, status, result.Source, result.Basis, result.Problem, newCase(f, result, valueDigits)})
			}
		}
		v.Groups = append(v.Groups, group)
	}
	return v
}

func newGroup(f ui.Format, g qualify.GroupTotal) groupView {
	return groupView{Name: g.Name, Passed: f.Count(g.Passed), Failed: f.Count(g.Failed), Seconds: f.Number(g.Seconds, 2), Unsound: g.Failed > 0}
}

func newCase(f ui.Format, r qualify.Result, sizes int) caseView {
	c := caseView{
		Name: r.Name, Expected: newFigure(f, r.Expected, valueDigits), Allowance: newFigure(f, r.Allowance, sizes),
		Passed: r.Passed, Nothing: r.Problem != "",
	}
	if !c.Nothing {
		c.Obtained, c.Difference = newFigure(f, r.Obtained, valueDigits), newFigure(f, r.Difference, sizes)
	}
	return c
}

func statusWord(f ui.Format, s qualify.Status) string {
	return f.Words.T("admin.status." + strings.ReplaceAll(string(s), " ", "-"))
}

// newFacts says what was run, where, when and by whom.
func newFacts(s ui.Shell, machine string, done finished) []fact {
	r, f, w := done.Record, s.Format, s.Words
	known := func(text string) string {
		if text == "" {
			return w.T("admin.not-known")
		}
		return text
	}
	revision := known(r.Revision)
	if r.Modified {
		revision = w.T("admin.revision-changed", revision)
	}
	return []fact{
		{w.T("admin.fact-program"), r.Program},
		{w.T("admin.fact-version"), known(r.Version)},
		{w.T("admin.fact-revision"), revision},
		{w.T("admin.fact-go"), r.Go},
		{w.T("admin.fact-system"), r.OS + "/" + r.Arch},
		{w.T("admin.fact-processors"), f.Count(r.CPUs)},
		{w.T("admin.fact-machine"), known(machine)},
		{w.T("admin.fact-plant"), known(s.Plant.Name)},
		{w.T("admin.fact-began"), instant(f, r.Began)},
		{w.T("admin.fact-took"), w.T("admin.seconds", f.Number(r.Seconds, 1))},
		{w.T("admin.fact-by"), known(done.By)},
	}
}

// instant is a moment of the plant as records need it: to the second, with its year
// and what the clocks stood at.
func instant(f ui.Format, t time.Time) string {
	local := t.In(f.Zone)
	return f.Words.T("admin.instant", f.Date(t), local.Format("15:04:05"), local.Format("-07:00"), f.Zone.String())
}
