package calc

import (
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// studies are the topics of phase 1: trial limits, and whether they still hold.
var studies = []Topic{
	topic("study", "Trial limits from history, the subgroups beyond them, and what speaks against freezing them.",
		`{"chart": "xbar-r", "subgroups": [[10.1, 9.9, 10.0], [10.2, 10.0, 9.8], [9.9, 10.1, 10.3], [10.0, 10.0, 9.7], [11.4, 11.2, 11.3]], "excluded": [4]}`, study),
	topic("compare", "Whether newer subgroups disagree with those that a standard rests on.",
		`{"chart": "xbar-r", "old": [[10.1, 9.9, 10.0], [10.2, 10.0, 9.8], [9.9, 10.1, 10.3]], "newer": [[10.5, 10.3, 10.4], [10.6, 10.4, 10.2], [10.3, 10.5, 10.7]]}`, compare),
}

type studyIn struct {
	Chart       limits.Chart     `json:"chart"`
	Subgroups   [][]float64      `json:"subgroups,omitempty"`
	Values      []float64        `json:"values,omitempty"`
	Estimator   limits.Estimator `json:"estimator,omitempty"`
	Multiple    number           `json:"multiple"`
	Probability bool             `json:"probability,omitempty"`
	Excluded    []int            `json:"excluded,omitempty"`
}

type studyOut struct {
	Sigma            number       `json:"sigma"`
	Center           number       `json:"center"`
	CenterSE         number       `json:"center_se"`
	DF               number       `json:"df"`
	BeyondDispersion []int        `json:"beyond_dispersion"`
	BeyondLocation   []int        `json:"beyond_location"`
	Warnings         []warningOut `json:"warnings"`
}

// warningOut is one reason to doubt the limits: found against wanted.
type warningOut struct {
	Kind   string `json:"kind"`
	Found  number `json:"found"`
	Wanted number `json:"wanted"`
}

func study(in studyIn) (studyOut, error) {
	d, err := readings(in.Chart, in.Subgroups, in.Values)
	if err != nil {
		return studyOut{}, err
	}
	subgroups, err := d.reduce(in.Chart)
	if err != nil {
		return studyOut{}, err
	}
	if err := positive("multiple", in.Multiple); err != nil {
		return studyOut{}, err
	}
	if err := checkEstimator(in.Chart, in.Estimator); err != nil {
		return studyOut{}, err
	}
	s, err := limits.RunStudy(limits.StudyInput{
		Chart: in.Chart, Estimator: in.Estimator, Multiple: orDefault(in.Multiple, 0), Probability: in.Probability,
		Subgroups: subgroups, Excluded: in.Excluded,
	})
	if err != nil {
		return studyOut{}, err
	}
	known := s.Standard.Sigma > 0
	out := studyOut{
		Sigma: ifExists(s.Standard.Sigma, known), Center: ifExists(s.Standard.Center, known),
		CenterSE: ifExists(s.Estimated.CenterSE, known), DF: ifExists(s.Estimated.DF, known && !math.IsInf(s.Estimated.DF, 0)),
		BeyondDispersion: list(s.BeyondDispersion), BeyondLocation: list(s.BeyondLocation), Warnings: []warningOut{},
	}
	for _, w := range s.Warnings {
		out.Warnings = append(out.Warnings, writeWarning(w))
	}
	return out, nil
}

func writeWarning(w limits.Warning) warningOut {
	switch w := w.(type) {
	case limits.FewSubgroups:
		return warningOut{"few-subgroups", some(float64(w.Have)), some(float64(w.Want))}
	case limits.ZeroSpread:
		return warningOut{"zero-spread", some(0), nil}
	case limits.CoarseGauge:
		return warningOut{"coarse-gauge", some(float64(w.Distinct)), some(float64(w.Want))}
	case limits.Autocorrelated:
		return warningOut{"autocorrelated", some(w.Lag1), some(w.Limit)}
	case limits.NotNormal:
		return warningOut{"not-normal", some(w.Test.P), some(w.Level)}
	}
	return warningOut{Kind: fmt.Sprintf("%T", w)}
}

type compareIn struct {
	Chart     limits.Chart     `json:"chart"`
	Old       [][]float64      `json:"old"`
	Newer     [][]float64      `json:"newer"`
	Estimator limits.Estimator `json:"estimator,omitempty"`
}

type compareOut struct {
	CenterShift float64 `json:"center_shift"`
	CenterP     float64 `json:"center_p"`
	SigmaRatio  float64 `json:"sigma_ratio"`
	SigmaP      float64 `json:"sigma_p"`
}

func compare(in compareIn) (compareOut, error) {
	if !in.Chart.Readings() {
		return compareOut{}, fmt.Errorf("chart must be one of xbar-r, xbar-s, median-r, individuals, not %q", in.Chart)
	}
	if err := checkEstimator(in.Chart, in.Estimator); err != nil {
		return compareOut{}, err
	}
	var both [2]limits.Estimated
	for i, readings := range [][][]float64{in.Old, in.Newer} {
		name := []string{"old", "newer"}[i]
		subgroups, err := data{subgroups: readings}.reduce(in.Chart)
		if err != nil {
			return compareOut{}, fmt.Errorf("%s: %w", name, err)
		}
		if both[i], err = limits.Estimate(in.Chart, in.Estimator, subgroups); err != nil {
			return compareOut{}, fmt.Errorf("%s: %w", name, err)
		}
	}
	c, err := limits.Compare(both[0], both[1])
	return compareOut{CenterShift: plain(c.CenterShift), CenterP: c.CenterP, SigmaRatio: c.SigmaRatio, SigmaP: c.SigmaP}, err
}
