package plant

import (
	"errors"
	"sort"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// Study turns phase-1 data into trial limits. The desk shows it while subgroups are
// left out, and freezing runs it again over the record, so that what is frozen is
// computed and not sent.
type Study struct {
	Setup     Setup
	Points    []Point // all of the stretch, oldest first
	LeftOut   []LeftOut
	Estimator limits.Estimator
	Multiple  float64
	Rules     Rules

	Result  limits.Study
	Used    int
	Firings [][]Firing // by point: what the trial limits and rules say of it; nil for points left out
}

// MinSubgroups is how few subgroups limits can be frozen from at all; below twenty
// there is a warning.
const MinSubgroups = 5

// Run computes the study. Points must be of one set-up whose limits mean the same.
// course tells where moving ranges may not cross; a point that was left out is not
// crossed either.
func (s *Study) Run(course Course) error {
	out := make(map[uuid.UUID]bool, len(s.LeftOut))
	for _, l := range s.LeftOut {
		if CleanText(l.Cause) == "" {
			return Invalidf("cause", "A subgroup is left out only with a cause.")
		}
		out[l.Subgroup] = true
	}
	in := limits.StudyInput{Chart: s.Setup.Chart, Estimator: s.Estimator, Multiple: s.Multiple}
	var before Segment
	for i, p := range s.Points {
		if p.Setup != s.Setup.Version && p.Stats.Decimals != s.Setup.Decimals {
			return Invalidf("from", "The stretch holds subgroups that were measured in another way. Begin it later.")
		}
		seg := course.At(p.TakenAt)
		in.Subgroups = append(in.Subgroups, limits.Subgroup{
			N: p.Stats.N, Location: p.Stats.Mean(), Range: p.Stats.RangeFloat(), SD: p.Stats.SD,
			Break: i > 0 && !seg.From.Equal(before.From),
		})
		before = seg
		if out[p.Subgroup] {
			in.Excluded = append(in.Excluded, i)
			delete(out, p.Subgroup)
		}
	}
	if len(out) > 0 {
		return Conflictf("", "A subgroup that was left out is not in the stretch any more. Look at the study again.")
	}
	s.Used = len(s.Points) - len(in.Excluded)
	if s.Used < MinSubgroups {
		return Invalidf("from", "There are %d subgroups to compute limits from; %d are the least, and 20 are asked.", s.Used, MinSubgroups)
	}
	var err error
	if s.Result, err = limits.RunStudy(in); err != nil {
		if errors.Is(err, limits.ErrInput) {
			return Invalidf("", "No limits can be computed from this stretch.").Because(err)
		}
		return err
	}
	if s.Result.Standard.Sigma <= 0 {
		return nil // zero spread: there is a warning and no limits
	}
	return s.judge(in)
}

// judge runs the trial limits and rules over the points that are in.
func (s *Study) judge(in limits.StudyInput) error {
	judge, err := watch.NewJudge(watch.Standard{Standard: s.Result.Standard, LocationRules: s.Rules.Location, DispersionRules: s.Rules.Dispersion})
	if err != nil {
		return Invalidf("rules", "These rules cannot be used: %v", err)
	}
	s.Firings = make([][]Firing, len(s.Points))
	var m watch.Memory
	next := 0
	for i, p := range s.Points {
		if next < len(in.Excluded) && in.Excluded[next] == i {
			next++
			continue
		}
		if in.Subgroups[i].Break {
			m = watch.Memory{}
		}
		j := judge.Step(&m, p.Stats.Watch())
		s.Firings[i] = Firings(Setup{}, nil, p.Stats.Decimals, s.Rules, j, j.Err == nil)
	}
	return nil
}

// CanFreeze reports whether there are limits to freeze.
func (s *Study) CanFreeze() bool { return s.Result.Standard.Sigma > 0 }

// Revision is the study as a revision, still without number and instants.
func (s *Study) Revision() Revision {
	r := Revision{
		SetupVersion: s.Setup.Version, Chart: s.Setup.Chart, Estimator: s.Estimator,
		Center: s.Result.Standard.Center, Sigma: s.Result.Standard.Sigma, Multiple: s.Result.Standard.Multiple, Rules: s.Rules,
		Basis: Basis{Subgroups: s.Used, LeftOut: s.LeftOut},
	}
	if r.Estimator == "" {
		r.Estimator = s.Setup.Chart.DefaultEstimator()
	}
	if r.Multiple == 0 {
		r.Multiple = limits.DefaultMultiple
	}
	if n := len(s.Points); n > 0 {
		r.Basis.From, r.Basis.To = s.Points[0].TakenAt, s.Points[n-1].TakenAt
	}
	sort.Slice(r.Basis.LeftOut, func(i, j int) bool { return r.Basis.LeftOut[i].TakenAt.Before(r.Basis.LeftOut[j].TakenAt) })
	return r
}

// DefaultRules are the rules that a chart starts with, by common practice of its kind.
func (s Setup) DefaultRules() Rules {
	return Rules{
		Location:   watch.Defaults(s.Chart, s.Size, false),
		Dispersion: watch.Defaults(s.Chart, s.Size, true),
	}
}

// Check says what in the request cannot be.
func (f *FreezeRequest) Check(now time.Time) error {
	f.Reason = CleanText(f.Reason)
	switch {
	case f.Reason == "":
		return Invalidf("reason", "Say why these limits are frozen: is the change known, is it wanted, will it last?")
	case len([]rune(f.Reason)) > 500:
		return Invalidf("reason", "Please use at most 500 characters here.")
	case !f.InForceFrom.IsZero() && f.InForceFrom.Before(now.Add(-time.Second)):
		return Invalidf("in_force_from", "Limits come into force now or later, never in the past.")
	case f.Multiple != 0 && (f.Multiple < 1 || f.Multiple > 6):
		return Invalidf("multiple", "Limits stand between 1 and 6 sigma from the centre.")
	case len(f.Rules.Location) == 0:
		return Invalidf("rules", "At least one rule must be on.")
	}
	for _, rules := range [][]watch.Rule{f.Rules.Location, f.Rules.Dispersion} {
		seen := map[string]bool{}
		for _, r := range rules {
			if err := r.Validate(); err != nil {
				return Invalidf("rules", "A rule cannot be used: %v", err)
			}
			if key := RuleKey(r); seen[key] {
				return Invalidf("rules", "A rule is there twice.")
			} else {
				seen[key] = true
			}
		}
		if len(rules) > watch.MaxRules {
			return Invalidf("rules", "At most %d rules can be on.", watch.MaxRules)
		}
	}
	return nil
}
