package desk

import (
	"math"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// mostStays is how many subgroups beyond the trial limits are listed.
const mostStays = 15

// studyView is the page of a limit study.
type studyView struct {
	ID       uuid.UUID
	Crumbs   string
	Title    string
	Steps    []step
	Guide    string
	Said     string // what changed, for who does not see it
	From, To string
	Last     string
	Problem  string // why there are no limits, when it is about no field
	Problems map[string]string

	Estimators []option
	Multiple   string
	Hidden     []hidden // exclusions, as the form carries them
	Picture    string
	Empty      bool

	Out                      []outRow
	Stays                    []outRow
	More                     int
	Lost                     string
	Count                    int
	Number                   string
	Causes                   []option
	Own                      string
	Focus                    bool // the cause is asked for next
	Location, Dispersion     []ruleChoice
	LocationSet              string
	LocationName, SpreadName string
	Kinds                    []option
	K, M, Z                  string

	Compare comparison
	Checks  []check
	Would   []wouldRow
	WouldIn string
	Freeze  string // address, "" while there is nothing to freeze
	Next    int    // number of the revision that would be frozen
}

type step struct {
	Text string
	Done bool
	Here bool
}

type option struct {
	Value, Text string
	Chosen      bool
}

type hidden struct{ Name, Value string }

// outRow is a subgroup of the table: left out with its cause, or beyond the limits and
// staying in.
type outRow struct {
	Mark, ID string
	No       int
	Taken    string
	Did      string
	Cause    string
}

// check is one thing to know before freezing.
type check struct {
	Warn bool
	Bold string
	Text string
}

// wouldRow is what one rule would have said over the stretch.
type wouldRow struct {
	Rule  string
	Trial int
	Then  int
}

func newStudyView(shell ui.Shell, s *studied) studyView {
	f, w := s.f, s.f.Words
	v := studyView{ID: s.h.State.ID, Crumbs: w.T("desk.crumbs-of", crumbs(shell, s.h), s.h.State.Name), Problems: s.state.problems, Count: len(s.h.Points)}
	v.Next = 1
	if r := s.h.State.Revision; r != nil {
		v.Next = r.Number + 1
	}
	v.Title = w.T("desk.study.title", v.Next)
	v.stretchFields(s)
	for _, e := range []limits.Estimator{limits.RBar, limits.SBar, limits.Pooled, limits.MRBar, limits.MedianMR} {
		if s.h.State.Setup.Chart.Allows(e) {
			v.Estimators = append(v.Estimators, option{string(e), upperFirst(estimatorWords(f, e)), e == s.state.Estimator})
		}
	}
	v.Multiple = formatMultiple(s.state.Multiple)
	if s.state.problems["multiple"] != "" {
		v.Multiple = s.state.typed.Get("multiple")
	}
	for _, e := range s.state.Out {
		v.Hidden = append(v.Hidden, hidden{"out", e.code()})
	}
	v.leaveFields(s)
	v.ruleFields(s)
	if s.err != nil {
		v.problemOf(s)
	}
	v.Empty = len(s.h.Points) == 0
	if !v.Empty {
		v.Picture = s.picture().SVG()
		v.rows(s)
	}
	v.Steps, v.Guide = s.steps(v.Next)
	if s.lost > 0 {
		v.Lost = w.T("desk.study.lost", s.lost)
	}
	if s.ready() {
		v.Compare = s.before()
		v.would(s)
		v.Freeze = withQuery(address(v.ID, "study", "freeze"), s.state.values(f.Zone))
		v.Said = w.T("desk.study.said", s.trial.Used, f.Limit(s.trial.Result.Standard.Center, s.h.State.Setup),
			f.WithUnit(f.Number(s.trial.Result.Standard.Sigma, s.h.State.Setup.LimitDecimals()+1), s.h.State.Setup.Unit))
	}
	if s.err == nil {
		v.Checks = s.checks()
	}
	return v
}

func (v *studyView) stretchFields(s *studied) {
	typed, zone := s.state.typed, s.f.Zone
	if !s.state.From.IsZero() {
		v.From = s.state.From.In(zone).Format(fieldTime)
	}
	if !s.state.To.IsZero() {
		v.To = s.state.To.In(zone).Format(fieldTime)
	}
	if s.state.problems["from"] != "" || s.state.problems["to"] != "" {
		v.From, v.To = typed.Get("from"), typed.Get("to")
	}
	if s.state.problems["last"] != "" {
		v.Last = typed.Get("last")
	}
}

func (v *studyView) leaveFields(s *studied) {
	typed := s.state.typed
	v.Number, v.Own = typed.Get("no"), typed.Get("own")
	if do, no, _ := strings.Cut(typed.Get("do"), ":"); do == "pick" {
		v.Number, v.Focus = no, true
	}
	for _, c := range s.causes {
		v.Causes = append(v.Causes, option{c.Name, c.Name, c.Name == typed.Get("cause")})
	}
}

func (v *studyView) ruleFields(s *studied) {
	f, setup := s.f, s.h.State.Setup
	defaults := setup.DefaultRules()
	v.Location = ruleChoices(f, "loc", s.state.Rules.Location, defaults.Location)
	v.Dispersion = ruleChoices(f, "dis", s.state.Rules.Dispersion, defaults.Dispersion)
	v.LocationSet = setName(f, s.state.Rules.Location)
	location, dispersion := panels(f.Words, setup)
	v.LocationName, v.SpreadName = location.Name, dispersion.Name
	typed := s.state.typed
	for _, k := range kinds {
		v.Kinds = append(v.Kinds, option{string(k), f.Words.T("desk.kind." + string(k)), string(k) == typed.Get("kind")})
	}
	v.K, v.M, v.Z = typed.Get("k"), typed.Get("m"), typed.Get("z")
}

// problemOf says why there are no trial limits, at the field if it is about one.
func (v *studyView) problemOf(s *studied) {
	for _, field := range []string{"from", "rules", "multiple"} {
		if text := ui.ProblemOf(s.f.Words, s.err, field); text != "" && v.Problems[field] == "" {
			v.Problems[field] = text
			return
		}
	}
	if v.Problem = ui.ProblemOf(s.f.Words, s.err, ""); v.Problem == "" {
		v.Problem = s.f.Words.T("desk.study.none")
	}
}

// letter names the nth left-out subgroup: A to Z, AA and on.
func letter(n int) string {
	text := ""
	for n++; n > 0; n = (n - 1) / 26 {
		text = string(rune('A'+(n-1)%26)) + text
	}
	return text
}

// begins reports whether no moving range reaches back from point i.
func (s *studied) begins(i int) bool {
	if i == 0 {
		return false
	}
	p, q := s.h.Points[i-1], s.h.Points[i]
	return !s.h.Course.At(p.TakenAt).From.Equal(s.h.Course.At(q.TakenAt).From) || s.state.cause(p.Subgroup) != ""
}

func (s *studied) dispersions() []float64 {
	return dispersions(s.h.State.Setup.Chart, s.h.Points, s.h.Setups, s.begins)
}

// picture is the chart of the trial.
func (s *studied) picture() *chart.Control {
	f, w, setup := s.f, s.f.Words, s.h.State.Setup
	c := &chart.Control{ID: "study-of-" + s.h.State.ID.String(), W: 940, H1: 190, H2: 76, Ordinal: true, Zone: f.Zone, Words: chartWords(w)}
	c.Location, c.Dispersion = panels(w, setup)
	values := s.dispersions()
	outs := 0
	for i, p := range s.h.Points {
		cp := chartPoint(f, setup, s.h.State.Machine.Machine, p, values[i], c.Dispersion.Decimals)
		cp.When = w.T("desk.study.when", i+1, cp.When)
		cp.Restart = i > 0 && !s.h.Course.At(s.h.Points[i-1].TakenAt).Same(s.h.Course.At(p.TakenAt))
		if cause := s.state.cause(p.Subgroup); cause != "" {
			cp.Excluded, cp.Note = letter(outs), note(f, cp.Note, cause)
			outs++
		}
		c.Points = append(c.Points, cp)
	}
	if len(s.h.Points) > 0 {
		c.Changes = events{f, s.h, setup}.all()
	}
	used := len(s.h.Points) - outs
	c.Label = w.T("desk.study.label", s.h.State.Name, used, len(s.h.Points))
	if !s.ready() {
		return c
	}
	s.putBand(c)
	s.putGhosts(c)
	s.putFirings(c)
	return c
}

func (s *studied) putBand(c *chart.Control) {
	id := uuid.New() // a key for the cache only
	rev := plant.Revision{Chart: s.trial.Result.Standard.Chart, Center: s.trial.Result.Standard.Center, Sigma: s.trial.Result.Standard.Sigma, Multiple: s.trial.Result.Standard.Multiple}
	bands := bandsOf{f: s.f, setup: s.h.State.Setup, tables: map[uuid.UUID]*limits.Table{}}
	size := 0
	for i, p := range s.h.Points {
		if p.Stats.N == size {
			continue
		}
		seg := chart.Segment{From: i}
		seg.Location, seg.Dispersion = bands.at(map[uuid.UUID]plant.Revision{id: rev}, id, p.Stats.N)
		c.Segments, size = append(c.Segments, seg), p.Stats.N
	}
}

// putGhosts marks the limits of the revision in force at the left end.
func (s *studied) putGhosts(c *chart.Control) {
	rev := s.h.State.Revision
	if rev == nil || rev.Chart != s.h.State.Setup.Chart {
		return
	}
	l, d, err := rev.Standard().Bands(s.h.State.Setup.Size)
	if err != nil {
		return
	}
	name := strings.ToLower(s.f.Words.T("desk.revision", rev.Number))
	for _, g := range []struct {
		panel *chart.Panel
		band  limits.Band
	}{{&c.Location, l}, {&c.Dispersion, d}} {
		if g.band.HasUpper() {
			g.panel.Ghosts = append(g.panel.Ghosts, chart.Ghost{Value: g.band.Upper, Text: name})
		}
		if g.band.HasLower() {
			g.panel.Ghosts = append(g.panel.Ghosts, chart.Ghost{Value: g.band.Lower, Text: name})
		}
	}
}

// putFirings marks what the trial limits and rules say of the subgroups that are in.
func (s *studied) putFirings(c *chart.Control) {
	hung := map[plant.Firing]bool{}
	for i, firings := range s.trial.Firings {
		for _, fi := range firings {
			m := chart.Signal{Point: i, Dispersion: fi.Panel == plant.Dispersion, Open: true}
			if !hung[fi] {
				hung[fi] = true
				m.Text = s.f.Words.T("desk.study.stays-flag", upperFirst(s.f.Words.RuleKey(fi.Rule, fi.Side)))
			}
			c.Signals = append(c.Signals, m)
		}
	}
}

// rows fills the table of what was left out and of what is beyond the limits.
func (v *studyView) rows(s *studied) {
	f, w := s.f, s.f.Words
	values := s.dispersions()
	beyond := map[int]bool{}
	if s.ready() {
		for _, list := range [][]int{s.trial.Result.BeyondDispersion, s.trial.Result.BeyondLocation} {
			for _, i := range list {
				beyond[i] = true
			}
		}
	}
	for i, p := range s.h.Points {
		cause := s.state.cause(p.Subgroup)
		if cause == "" && !beyond[i] {
			continue
		}
		r := outRow{No: i + 1, ID: p.Subgroup.String(), Taken: f.Clock(p.TakenAt), Did: s.did(p, values[i]), Cause: cause}
		switch {
		case cause != "":
			r.Mark = letter(len(v.Out))
			v.Out = append(v.Out, r)
		case len(v.Stays) < mostStays:
			r.Cause = w.T("desk.study.no-cause")
			v.Stays = append(v.Stays, r)
		default:
			v.More++
		}
	}
}

// did says where a subgroup lies against the trial limits.
func (s *studied) did(p plant.Point, dispersion float64) string {
	w := s.f.Words
	if !s.ready() {
		return ""
	}
	l, d, err := s.trial.Result.Standard.Bands(p.Stats.N)
	if err != nil {
		return ""
	}
	location, spread := panels(w, s.h.State.Setup)
	var said []string
	add := func(name string, b limits.Band, v float64) {
		switch b.Outside(v) {
		case 1:
			said = append(said, w.T("desk.study.above", name))
		case -1:
			said = append(said, w.T("desk.study.below", name))
		}
	}
	if !math.IsNaN(dispersion) {
		add(spread.One, d, dispersion)
	}
	add(location.One, l, p.Stats.Mean())
	if len(said) == 0 {
		return w.T("desk.study.within")
	}
	return strings.Join(said, ", ")
}

// steps says how far the study has come and what comes next: the data first, then the
// spread, then the location.
func (s *studied) steps(next int) ([]step, string) {
	w := s.f.Words
	data := s.ready()
	spread := data && len(s.trial.Result.BeyondDispersion) == 0
	location := spread && len(s.trial.Result.BeyondLocation) == 0
	out := []step{
		{w.T("desk.step.data"), data, !data}, {w.T("desk.step.spread"), spread, data && !spread},
		{w.T("desk.step.location"), location, spread && !location}, {w.T("desk.step.freeze"), false, location},
	}
	_, dispersion := panels(w, s.h.State.Setup)
	switch {
	case !data:
		return out, w.T("desk.guide.data")
	case !spread:
		return out, w.T("desk.guide.spread", len(s.trial.Result.BeyondDispersion), strings.ToLower(dispersion.Name))
	case !location:
		return out, w.T("desk.guide.location", len(s.trial.Result.BeyondLocation))
	}
	return out, w.T("desk.guide.freeze", next)
}
