package desk

import (
	"math"
	"strings"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

// proposalLevel is the level at which two samples count as different (methods, phase 1).
const proposalLevel = 0.01

// before sets the revision in force, all subgroups and the trial side by side.
func (s *studied) before() comparison {
	w := s.f.Words
	var columns []column
	if r := s.h.State.Revision; r != nil {
		columns = append(columns, revisionColumn(s.f, *r))
	}
	if s.whole != nil {
		columns = append(columns, column{Title: w.T("desk.compare.all", len(s.h.Points)), Standard: s.whole.Result.Standard})
	}
	columns = append(columns, column{Title: w.T("desk.compare.trial", s.trial.Used), Standard: s.trial.Result.Standard, Strong: true,
		Rules: &s.state.Rules, Ways: ways(s.f, s.state.Estimator, s.trial.Result.Standard.Multiple)})
	c := compare(s.f, s.h.State.Setup, columns)
	c.Caption = w.T("desk.compare.caption")
	return c
}

// checks says what speaks for and against freezing.
func (s *studied) checks() []check {
	w, setup := s.f.Words, s.h.State.Setup
	var warn, fine []check
	bad := func(bold, text string) { warn = append(warn, check{Warn: true, Bold: bold, Text: text}) }
	good := func(text string) { fine = append(fine, check{Text: text}) }

	found := map[string]bool{}
	for _, x := range s.trial.Result.Warnings {
		switch x := x.(type) {
		case limits.ZeroSpread:
			found["zero"] = true
			bad(w.T("desk.warn.zero"), w.T("desk.warn.zero-text"))
		case limits.FewSubgroups:
			found["few"] = true
			bad(w.T("desk.warn.few", x.Have, x.Want), w.T("desk.warn.few-text"))
		case limits.CoarseGauge:
			found["coarse"] = true
			bad(w.T("desk.warn.coarse", x.Distinct, x.Want), w.T("desk.warn.coarse-text"))
		case limits.Autocorrelated:
			found["lag"] = true
			bad(w.T("desk.warn.lag", s.f.Signed(x.Lag1, 2), s.f.Number(x.Limit, 2)), w.T("desk.warn.lag-text"))
		case limits.NotNormal:
			found["normal"] = true
			bad(w.T("desk.warn.normal", pWords(s, x.Test.P)), w.T("desk.warn.normal-text"))
		}
	}
	if s.trial.CanFreeze() {
		if n := len(s.trial.Result.BeyondDispersion); n > 0 {
			bad(w.T("desk.warn.spread", n), w.T("desk.warn.spread-text"))
		}
		if n := len(s.trial.Result.BeyondLocation); n > 0 {
			bad(w.T("desk.warn.location", n), w.T("desk.warn.location-text"))
		}
		if n := len(s.trial.LeftOut); 5*n > len(s.h.Points) {
			bad(w.T("desk.warn.many-out", n, len(s.h.Points)), w.T("desk.warn.many-out-text"))
		}
	}
	if m := s.h.State.Matter; m != nil && !s.h.Points[len(s.h.Points)-1].TakenAt.Before(m.OpenedTaken) {
		bad(w.T("desk.warn.open"), w.T("desk.warn.open-text"))
	}
	if !found["few"] {
		good(w.T("desk.fine.few", s.trial.Used, limits.EnoughSubgroups))
	}
	if s.trial.CanFreeze() {
		if !found["coarse"] && s.trial.Used > limits.DistinctRanges {
			good(w.T("desk.fine.coarse", limits.DistinctRanges))
		}
		if !found["lag"] {
			good(w.T("desk.fine.lag"))
		}
		if !found["normal"] && setup.Chart == limits.Individuals && s.trial.Used >= 8 {
			good(w.T("desk.fine.normal"))
		}
	}
	for _, c := range s.comparedWithBasis() {
		if c.Warn {
			warn = append(warn, c)
		} else {
			fine = append(fine, c)
		}
	}
	return append(warn, fine...)
}

// comparedWithBasis says what the two-sample tests find against the basis of the
// revision in force.
func (s *studied) comparedWithBasis() []check {
	w, rev, setup := s.f.Words, s.h.State.Revision, s.h.State.Setup
	switch {
	case s.basis.Overlap:
		return []check{{Warn: true, Text: w.T("desk.basis.overlap", rev.Number)}}
	case !s.basis.Done:
		return nil
	}
	c := s.basis.Result
	shift := w.T("desk.basis.centre", s.f.WithUnit(s.f.Signed(c.CenterShift, setup.LimitDecimals()), setup.Unit), rev.Number, pWords(s, c.CenterP))
	sigma := w.T("desk.basis.sigma-above", percent(c.SigmaRatio-1), rev.Number, pWords(s, c.SigmaP))
	if c.SigmaRatio < 1 {
		sigma = w.T("desk.basis.sigma-below", percent(1-c.SigmaRatio), rev.Number, pWords(s, c.SigmaP))
	}
	otherCentre, otherSigma := c.CenterP < proposalLevel, c.SigmaP < proposalLevel
	verdict := w.T("desk.basis.same")
	if otherCentre || otherSigma {
		verdict = w.T("desk.basis.differs")
	}
	return []check{{Text: shift, Warn: otherCentre}, {Text: sigma, Warn: otherSigma}, {Text: verdict, Warn: otherCentre || otherSigma}}
}

func percent(v float64) int { return int(math.Round(v * 100)) }

// pWords writes a p value with as many decimals as say something.
func pWords(s *studied, p float64) string {
	if p < 0.001 {
		return s.f.Words.T("desk.p-below", s.f.Number(0.001, 3))
	}
	return s.f.Words.T("desk.p", s.f.Number(p, 3))
}

// would counts, rule by rule, at how many subgroups of the stretch the trial signals,
// beside what the record says was signalled there by the limits of their time.
func (v *studyView) would(s *studied) {
	w := s.f.Words
	index := map[string]int{}
	at := func(fi plant.Firing) *wouldRow {
		key := string(fi.Panel) + fi.Rule
		i, ok := index[key]
		if !ok {
			i = len(v.Would)
			index[key] = i
			fi.Side = plant.Neither
			v.Would = append(v.Would, wouldRow{Rule: upperFirst(w.Firing(fi, plant.Setup{}))})
		}
		return &v.Would[i]
	}
	for _, rules := range []struct {
		panel plant.Panel
		list  []string
	}{{plant.Location, keysOf(s.state.Rules.Location)}, {plant.Dispersion, keysOf(s.state.Rules.Dispersion)}} {
		for _, key := range rules.list {
			at(plant.Firing{Panel: rules.panel, Rule: key})
		}
	}
	trial, then := 0, 0
	for i, p := range s.h.Points {
		if i < len(s.trial.Firings) && len(s.trial.Firings[i]) > 0 {
			trial++
			for _, fi := range s.trial.Firings[i] {
				at(fi).Trial++
			}
		}
		any := false
		for _, sig := range p.Standing() {
			if sig.Panel.HoldsProduct() {
				continue
			}
			any = true
			at(sig.Firing).Then++
		}
		if any {
			then++
		}
	}
	if s.h.State.Revision == nil && then == 0 {
		v.WouldIn = w.T("desk.would.first", trial, s.trial.Used)
	} else {
		v.WouldIn = strings.Join([]string{w.T("desk.would.trial", trial, s.trial.Used), w.T("desk.would.then", then, len(s.h.Points))}, " ")
	}
}
