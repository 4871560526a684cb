package capability

import "math"

// Overall returns Pp and Ppk from the number, the mean and the overall s.d. (divisor
// n-1) of readings that are not at hand themselves. The figures are those of Assess;
// pp is nil with one limit. Input without an answer, zero spread included, is an error.
func Overall(n int, mean, sd float64, spec Specification, confidence float64) (pp, ppk *Index, err error) {
	s, err := moments(n, mean, sd, spec)
	if err != nil {
		return nil, nil, err
	}
	return s.indices(spec, sd, float64(n-1), confidence)
}

// Ppk returns the value of Ppk alone, which costs nothing beside its bounds.
func Ppk(n int, mean, sd float64, spec Specification) (float64, error) {
	s, err := moments(n, mean, sd, spec)
	if err != nil {
		return math.NaN(), err
	}
	var lower, upper *float64
	if spec.Lower != nil {
		lower = some((s.Mean - *spec.Lower) / sd / 3)
	}
	if spec.Upper != nil {
		upper = some((*spec.Upper - s.Mean) / sd / 3)
	}
	return *nearest(lower, upper), nil
}

// PpkLowerBound returns the one-sided lower bound of Ppk estimated as value from n
// readings: the LowerBound of Assess and Overall. It grows with value and with n.
func PpkLowerBound(value float64, n int, confidence float64) (float64, error) {
	return exactAt(value, n, float64(n-1), confidence, confidence)
}

func moments(n int, mean, sd float64, spec Specification) (Study, error) {
	if err := spec.check(); err != nil {
		return Study{}, err
	}
	switch {
	case n < 2 || n > MaxReadings:
		return Study{}, invalid("between 2 and %d readings are needed, got %d", MaxReadings, n)
	case !finite(mean):
		return Study{}, invalid("the mean must be a finite number, got %g", mean)
	case !(sd > 0) || math.IsInf(sd, 1):
		return Study{}, invalid("the s.d. must be above zero, got %g", sd)
	}
	return Study{N: n, Mean: mean, SigmaOverall: sd}, nil
}
