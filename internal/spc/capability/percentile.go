package capability

import (
	"math"

	"holdfast/internal/spc/dist"
)

// Tail areas of the reference points 0.135 % and 99.865 %.
const outer = 0.00135

// CDF returns P(X ≤ x) of a fitted distribution.
func (f Fit) CDF(x float64) (float64, error) {
	lower, _, err := f.tails(x)
	return lower, err
}

// Survival returns P(X > x) of a fitted distribution, sharp in the upper tail.
func (f Fit) Survival(x float64) (float64, error) {
	_, upper, err := f.tails(x)
	return upper, err
}

func (f Fit) tails(x float64) (lower, upper float64, err error) {
	if f.law == nil {
		return math.NaN(), math.NaN(), invalid("there is no fitted distribution")
	}
	if !finite(x) {
		return math.NaN(), math.NaN(), invalid("x must be a finite number, got %g", x)
	}
	lower, upper = f.law.tails(x)
	return lower, upper, nil
}

// Quantile returns the x with P(X ≤ x) = p, 0 < p < 1.
func (f Fit) Quantile(p float64) (float64, error) { return f.quantile(p, false) }

// UpperQuantile returns the x with P(X > x) = q, 0 < q < 1.
func (f Fit) UpperQuantile(q float64) (float64, error) { return f.quantile(q, true) }

func (f Fit) quantile(p float64, upper bool) (float64, error) {
	if f.law == nil {
		return math.NaN(), invalid("there is no fitted distribution")
	}
	if !(p > 0 && p < 1) {
		return math.NaN(), invalid("a probability must lie between 0 and 1, got %g", p)
	}
	x := f.law.quantile(p, upper)
	if !finite(x) {
		return math.NaN(), invalid("the quantile of the %s distribution at %g is beyond the largest number", f.Family, p)
	}
	return x, nil
}

// Percentile is the comparison of a distribution with a specification through its
// quantiles.
type Percentile struct {
	X0135, X50, X99865 float64 // quantiles at 0.135 %, 50 % and 99.865 %
	Pp, Ppk            *float64
	Expected           PPM
}

// Percentile computes the indices of the percentile method:
//
//	Pp  = (U-L)/(X99.865-X0.135)
//	Ppk = min((U-X50)/(X99.865-X50), (X50-L)/(X50-X0.135))
//
// For the normal distribution they are the usual ones to five digits, since its outer
// points lie 2.99998 standard deviations out. With one limit there is Ppk of that side
// only.
//
// Source: ISO 22514-2 (from memory).
func (f Fit) Percentile(spec Specification) (Percentile, error) {
	if err := spec.check(); err != nil {
		return Percentile{}, err
	}
	var p Percentile
	var err error
	if p.X0135, err = f.Quantile(outer); err != nil {
		return Percentile{}, err
	}
	if p.X50, err = f.Quantile(0.5); err != nil {
		return Percentile{}, err
	}
	if p.X99865, err = f.UpperQuantile(outer); err != nil {
		return Percentile{}, err
	}
	var lower, upper *float64
	if spec.Lower != nil {
		lower = some((p.X50 - *spec.Lower) / (p.X50 - p.X0135))
	}
	if spec.Upper != nil {
		upper = some((*spec.Upper - p.X50) / (p.X99865 - p.X50))
	}
	p.Ppk = nearest(lower, upper)
	if lower != nil && upper != nil {
		p.Pp = some((*spec.Upper - *spec.Lower) / (p.X99865 - p.X0135))
	}
	for _, v := range []*float64{p.Pp, p.Ppk} {
		if v != nil && !finite(*v) {
			return Percentile{}, invalid("the %s distribution is too narrow for this specification to compute with", f.Family)
		}
	}
	p.Expected = spec.expected(f.law)
	return p, nil
}

// Known is a distribution with given parameters instead of fitted ones, in the order
// of the family: mean and sd (normal, foldednormal), log_mean and log_sd (lognormal),
// shape and scale (weibull, gamma), scale (rayleigh). Its likelihood is 0.
func Known(family Family, parameters ...float64) (Fit, error) {
	names, ok := parameterNames[family]
	if !ok {
		return Fit{}, invalid("there is no family %q", family)
	}
	if len(parameters) != len(names) {
		return Fit{}, invalid("the %s distribution has %d parameters, got %d", family, len(names), len(parameters))
	}
	f := Fit{Family: family}
	for i, v := range parameters {
		// A mean may be anything, of a folded normal anything not negative.
		if free := names[i] == "mean" || names[i] == "log_mean"; !finite(v) || math.Abs(v) > 1e150 || !free && v <= 0 || family == FoldedNormal && v < 0 {
			return Fit{}, invalid("the parameter %s of the %s distribution cannot be %g", names[i], family, v)
		}
		f.Parameters = append(f.Parameters, Parameter{names[i], v})
	}
	a, b := parameters[0], parameters[len(parameters)-1]
	switch family {
	case Normal:
		f.law = normalLaw{a, b}
	case Lognormal:
		f.law = lognormalLaw{normalLaw{a, b}}
	case Weibull:
		f.law = weibullLaw{a, b}
	case Gamma:
		if a > dist.MaxParameter {
			return Fit{}, invalid("the shape of the gamma distribution must be at most %g, got %g", dist.MaxParameter, a)
		}
		f.law = gammaLaw{a, b}
	case FoldedNormal:
		f.law = foldedLaw{a, b}
	case Rayleigh:
		f.law = weibullLaw{2, math.Sqrt2 * a}
	}
	return f, nil
}

var parameterNames = map[Family][]string{
	Normal:       {"mean", "sd"},
	Lognormal:    {"log_mean", "log_sd"},
	Weibull:      {"shape", "scale"},
	Gamma:        {"shape", "scale"},
	FoldedNormal: {"mean", "sd"},
	Rayleigh:     {"scale"},
}
