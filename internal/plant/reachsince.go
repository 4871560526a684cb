package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/changepoint"
	"holdfast/internal/spc/limits"
)

// change estimates when what a panel's first firing shows began.
func (e ReachEvidence) change(panel Panel, setup Setup) Suspicion {
	w := e.Location
	if panel == Dispersion {
		w = e.Dispersion
	}
	s := Suspicion{Since: SinceChange, Panel: panel, From: e.Matter.OpenedTaken, Cut: true}
	if len(w.Points) == 0 {
		return s
	}
	segment := e.Segments[panel]
	last := w.Points[len(w.Points)-1]
	rev, ok := e.Revisions[segment.Revision]
	var est changepoint.Estimate
	var err error
	if ok {
		est, err = estimateChange(rev, setup, w.Points, panel)
	}
	if !ok || err != nil {
		// Nothing can be estimated: the last subgroup before the signal is all that is known.
		s.From, s.Cut = w.Points[max(len(w.Points)-2, 0)].TakenAt, true
		return s
	}
	s.Change = &EstimatedChange{Panel: panel, Subgroup: last.Subgroup, Signal: last.TakenAt, Began: w.Points[est.After+1].TakenAt, Size: est.Size, SE: est.SizeSE}
	switch earliest := est.Likely[0]; {
	case earliest >= 0:
		s.From, s.Cut = w.Points[earliest].TakenAt, false
	case w.Cut:
		s.From = w.Points[0].TakenAt
	default:
		s.From, s.Cut, s.Start = segment.From, false, true
	}
	return s
}

func estimateChange(rev Revision, s Setup, points []ReachPoint, panel Panel) (changepoint.Estimate, error) {
	if panel == Location {
		means, sizes := make([]float64, len(points)), make([]int, len(points))
		for i, p := range points {
			means[i], sizes[i] = p.Stats.Mean(), p.Stats.N
		}
		return changepoint.Location(means, sizes, rev.Center, rev.Sigma)
	}
	variances, df := make([]float64, len(points)), make([]int, len(points))
	for i, p := range points {
		variances[i], df[i] = p.Stats.SD*p.Stats.SD, p.Stats.N-1
		if rev.Chart == limits.Individuals {
			d := p.Stats.Mean() - rev.Center
			variances[i], df[i] = d*d, 1
		}
	}
	return changepoint.Dispersion(variances, df, rev.Sigma, Decimal{Units: 1, Decimals: s.Decimals}.Float())
}

// goodRounds goes back, for each stream with a reading outside in the first such
// subgroup, to the last round in which all of its readings were within. Where readings
// name no stream the whole subgroup counts.
func (e ReachEvidence) goodRounds() []Suspicion {
	points := e.Reading.Points
	if len(points) == 0 {
		return []Suspicion{{Since: SinceGoodRound, Panel: Reading, From: e.Matter.OpenedTaken, Cut: true}}
	}
	first := points[len(points)-1]
	streams := first.outsideStreams(e.Setups[first.Setup])
	if len(streams) == 0 {
		return []Suspicion{e.goodRound(func(p ReachPoint) bool { return p.Outside == 0 })}
	}
	var out []Suspicion
	for _, id := range streams {
		s := e.goodRound(func(p ReachPoint) bool { return p.streamWithin(id, e.Setups[p.Setup]) })
		s.Streams = []uuid.UUID{id}
		out = append(out, s)
	}
	return out
}

func (e ReachEvidence) goodRound(good func(ReachPoint) bool) Suspicion {
	points := e.Reading.Points
	s := Suspicion{Since: SinceGoodRound, Panel: Reading}
	for i := len(points) - 2; i >= 0; i-- {
		if good(points[i]) {
			s.From = points[i].TakenAt
			return s
		}
	}
	s.Cut = true // no good round is on record, or none within the window
	if e.Reading.Cut || len(points) > 1 {
		s.From = points[0].TakenAt
	}
	return s
}

// outsideStreams are the streams with a reading outside; none when readings name none.
func (p ReachPoint) outsideStreams(s Setup) (out []uuid.UUID) {
	if len(p.Streams) != len(p.Readings) {
		return nil
	}
	for i, v := range p.Readings {
		if id := p.Streams[i]; s.Outside(v, p.Stats.Decimals) != Neither && !slices.Contains(out, id) {
			out = append(out, id)
		}
	}
	return out
}

// streamWithin reports whether the subgroup shows that a stream was within specification.
func (p ReachPoint) streamWithin(id uuid.UUID, s Setup) bool {
	if len(p.Streams) != len(p.Readings) {
		return p.Outside == 0
	}
	seen := false
	for i, v := range p.Readings {
		if p.Streams[i] != id {
			continue
		}
		if seen = true; s.Outside(v, p.Stats.Decimals) != Neither {
			return false
		}
	}
	return seen
}

// goodCheck goes back from the first failed check to the last good one of that gauge, and
// forward to the first good one after the last that failed.
func (e ReachEvidence) goodCheck(first time.Time) Suspicion {
	s := Suspicion{Since: SinceGoodCheck, Panel: GaugeCheck, Cut: true}
	var lastFailed time.Time
	for _, c := range e.Checks {
		switch {
		case !c.Good && c.At.After(lastFailed):
			lastFailed = c.At
		case c.Good && c.At.Before(first) && c.At.After(s.From):
			s.From, s.Cut = c.At, false
		}
	}
	for _, c := range e.Checks {
		if c.Good && c.At.After(lastFailed) && (s.Until.IsZero() || c.At.Before(s.Until)) {
			s.Until = c.At
		}
	}
	return s
}
