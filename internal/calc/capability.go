package calc

import (
	"errors"
	"fmt"

	"holdfast/internal/spc/capability"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/sample"
)

var capabilities = []Topic{
	topic("capability", "Cp, Cpk, Pp, Ppk and Cpm with their intervals, and parts per million outside.",
		`{"subgroups": [[10.1, 9.9, 10.0], [10.2, 10.0, 9.8], [9.9, 10.1, 10.3], [10.0, 10.0, 9.7]], "lower": 9.4, "upper": 10.6, "target": 10}`, capabilityStudy),
	topic("interval", "Confidence bounds of a capability index that is known with its number of readings.",
		`{"index": "cpk", "value": 1.33, "n": 50}`, indexInterval),
	topic("normality", "Anderson-Darling test of normality, and the Box-Cox power.",
		`{"x": [10.1, 9.9, 10.0, 10.2, 10.0, 9.8, 9.9, 10.1, 10.3, 10.0]}`, normality),
	topic("fit", "A distribution fitted by maximum likelihood, with indices by its percentiles.",
		`{"x": [0.8, 1.4, 2.1, 0.5, 1.1, 3.0, 1.7, 0.9, 1.3, 2.4], "family": "lognormal", "upper": 6}`, fitFamily),
	topic("tolerance", "Normal tolerance factors: how many s.d. from the mean hold a share of the process.",
		`{"n": 43, "coverage": 0.9, "confidence": 0.99}`, tolerance),
}

type capabilityIn struct {
	Subgroups  [][]float64      `json:"subgroups,omitempty"`
	Values     []float64        `json:"values,omitempty"`
	Lower      number           `json:"lower"`
	Upper      number           `json:"upper"`
	Target     number           `json:"target"`
	Confidence number           `json:"confidence"`
	Estimator  limits.Estimator `json:"estimator,omitempty"`
}

type capabilityOut struct {
	N            int     `json:"n"`
	Mean         float64 `json:"mean"`
	SigmaWithin  float64 `json:"sigma_within"`
	SigmaOverall float64 `json:"sigma_overall"`
	Cp           number  `json:"cp"`
	Cpk          number  `json:"cpk"`
	Pp           number  `json:"pp"`
	Ppk          number  `json:"ppk"`
	Cpm          number  `json:"cpm"`
	Interval     struct {
		Cp  *pair `json:"cp"`
		Cpk *pair `json:"cpk"`
		Pp  *pair `json:"pp"`
		Ppk *pair `json:"ppk"`
	} `json:"interval"`
	LowerBound struct {
		Cpk number `json:"cpk"`
		Ppk number `json:"ppk"`
	} `json:"lower_bound"`
	Expected ppmOut `json:"expected_ppm"`
	Observed ppmOut `json:"observed_ppm"`
}

// pair is an interval, low and high.
type pair [2]float64

type ppmOut struct {
	Below number `json:"below"`
	Above number `json:"above"`
}

func capabilityStudy(in capabilityIn) (capabilityOut, error) {
	if (in.Subgroups == nil) == (in.Values == nil) {
		return capabilityOut{}, errors.New("give either subgroups or values")
	}
	confidence, err := confidenceOf(in.Confidence)
	if err != nil {
		return capabilityOut{}, err
	}
	subgroups := capability.Singles(in.Values)
	for _, r := range in.Subgroups {
		subgroups = append(subgroups, capability.Subgroup{Readings: r})
	}
	spec := capability.Specification{Lower: in.Lower, Upper: in.Upper, Target: in.Target}
	unspecified := in.Lower == nil && in.Upper == nil
	if unspecified {
		// Mean and sigmas do not depend on a limit, so any will do; its indices are left out.
		spec.Upper = some(0)
	}
	s, err := capability.Assess(subgroups, spec, capability.Options{Confidence: confidence, Estimator: in.Estimator})
	if err != nil {
		return capabilityOut{}, err
	}
	if unspecified {
		return capabilityOut{N: s.N, Mean: s.Mean, SigmaWithin: s.SigmaWithin, SigmaOverall: s.SigmaOverall}, nil
	}
	out := capabilityOut{
		N: s.N, Mean: s.Mean, SigmaWithin: s.SigmaWithin, SigmaOverall: s.SigmaOverall, Cpm: s.Cpm,
		Expected: ppmOut(s.Expected), Observed: ppmOut(s.Observed),
	}
	out.Cp, out.Interval.Cp, _ = index(s.Cp)
	out.Cpk, out.Interval.Cpk, out.LowerBound.Cpk = index(s.Cpk)
	out.Pp, out.Interval.Pp, _ = index(s.Pp)
	out.Ppk, out.Interval.Ppk, out.LowerBound.Ppk = index(s.Ppk)
	return out, nil
}

func index(i *capability.Index) (value number, interval *pair, lower number) {
	if i == nil {
		return nil, nil, nil
	}
	return some(i.Value), &pair{plain(i.Interval.Low), plain(i.Interval.High)}, some(i.LowerBound)
}

func confidenceOf(x number) (float64, error) {
	c := orDefault(x, 0.95)
	if c <= 0 || c >= 1 {
		return 0, fmt.Errorf("confidence must lie between 0 and 1, not %v", c)
	}
	return c, nil
}

type intervalIn struct {
	Index      string  `json:"index"`
	Value      float64 `json:"value"`
	N          int     `json:"n"`
	Confidence number  `json:"confidence"`
}

type intervalOut struct {
	StandardError number  `json:"standard_error"`
	Interval      pair    `json:"interval"`
	LowerBound    float64 `json:"lower_bound"`
	UpperBound    float64 `json:"upper_bound"`
	Exact         *bounds `json:"exact"`
}

type bounds struct {
	Interval   pair    `json:"interval"`
	LowerBound float64 `json:"lower_bound"`
	UpperBound float64 `json:"upper_bound"`
}

func writeBounds(b capability.Bounds) bounds {
	return bounds{
		Interval:   pair{plain(b.Interval.Low), plain(b.Interval.High)},
		LowerBound: plain(b.LowerBound), UpperBound: plain(b.UpperBound),
	}
}

func indexInterval(in intervalIn) (intervalOut, error) {
	confidence, err := confidenceOf(in.Confidence)
	if err != nil {
		return intervalOut{}, err
	}
	if in.N < 2 {
		return intervalOut{}, fmt.Errorf("n must be at least 2, not %d", in.N)
	}
	nu := float64(in.N - 1)
	switch in.Index {
	case "cp":
		b, err := capability.CpBounds(in.Value, nu, confidence)
		w := writeBounds(b)
		return intervalOut{Interval: w.Interval, LowerBound: w.LowerBound, UpperBound: w.UpperBound}, err
	case "cpk":
		b, se, err := capability.CpkBounds(in.Value, in.N, nu, confidence)
		if err != nil {
			return intervalOut{}, err
		}
		exact, err := capability.ExactBounds(in.Value, in.N, nu, confidence)
		w, e := writeBounds(b), writeBounds(exact)
		return intervalOut{StandardError: some(se), Interval: w.Interval, LowerBound: w.LowerBound, UpperBound: w.UpperBound, Exact: &e}, err
	}
	return intervalOut{}, fmt.Errorf("index must be cp or cpk, not %q", in.Index)
}

type normalityIn struct {
	X []float64 `json:"x"`
}

type normalityOut struct {
	AndersonDarling float64   `json:"anderson_darling"`
	Adjusted        float64   `json:"adjusted"`
	P               float64   `json:"p"`
	BoxCoxLambda    number    `json:"boxcox_lambda"`
	BoxCoxInterval  [2]number `json:"boxcox_interval"`
}

func normality(in normalityIn) (normalityOut, error) {
	if len(in.X) > capability.MaxReadings {
		return normalityOut{}, fmt.Errorf("x has %d readings, at most %d are taken", len(in.X), capability.MaxReadings)
	}
	t, err := sample.AndersonDarling(in.X)
	if err != nil {
		return normalityOut{}, fmt.Errorf("x: %w", err)
	}
	out := normalityOut{AndersonDarling: t.A2, Adjusted: t.Adjusted, P: t.P}
	// Readings that are not all above zero have no power, nor have those for which the
	// best one lies outside the powers that are searched.
	if b, err := capability.FitBoxCox(in.X); err == nil {
		out.BoxCoxLambda = some(b.Lambda)
		out.BoxCoxInterval = [2]number{b.Low, b.High}
	}
	return out, nil
}

type fitIn struct {
	X      []float64         `json:"x"`
	Family capability.Family `json:"family"`
	Lower  number            `json:"lower"`
	Upper  number            `json:"upper"`
}

type fitOut struct {
	Parameters      map[string]float64 `json:"parameters"`
	LogLikelihood   float64            `json:"log_likelihood"`
	AICc            float64            `json:"aicc"`
	AndersonDarling float64            `json:"anderson_darling"`
	Quantiles       map[string]float64 `json:"quantiles"`
	Pp              number             `json:"pp"`
	Ppk             number             `json:"ppk"`
	Expected        ppmOut             `json:"expected_ppm"`
}

func fitFamily(in fitIn) (fitOut, error) {
	fit, err := capability.FitFamily(in.Family, in.X)
	if err != nil {
		return fitOut{}, err
	}
	out := fitOut{
		Parameters: map[string]float64{}, LogLikelihood: plain(fit.LogLikelihood), AICc: plain(fit.AICc),
		AndersonDarling: fit.AndersonDarling,
	}
	for _, p := range fit.Parameters {
		out.Parameters[p.Name] = plain(p.Value)
	}
	spec := capability.Specification{Lower: in.Lower, Upper: in.Upper}
	if in.Lower == nil && in.Upper == nil {
		// The quantiles do not depend on a limit, so any will do; its indices are left out.
		spec.Upper = &in.X[0]
	}
	p, err := fit.Percentile(spec)
	if err != nil {
		return fitOut{}, err
	}
	out.Quantiles = map[string]float64{"0.00135": plain(p.X0135), "0.5": plain(p.X50), "0.99865": plain(p.X99865)}
	if in.Lower != nil || in.Upper != nil {
		out.Pp, out.Ppk, out.Expected = p.Pp, p.Ppk, ppmOut(p.Expected)
	}
	return out, nil
}

type toleranceIn struct {
	N          int     `json:"n"`
	Coverage   float64 `json:"coverage"`
	Confidence float64 `json:"confidence"`
}

type toleranceOut struct {
	OneSided float64 `json:"one_sided"`
	TwoSided float64 `json:"two_sided"`
}

func tolerance(in toleranceIn) (toleranceOut, error) {
	one, err := capability.OneSidedToleranceFactor(in.N, in.Coverage, in.Confidence)
	if err != nil {
		return toleranceOut{}, err
	}
	two, err := capability.TwoSidedToleranceFactor(in.N, in.Coverage, in.Confidence)
	return toleranceOut{OneSided: plain(one), TwoSided: plain(two)}, err
}
