package changepoint

import (
	"fmt"
	"math"
)

// Dispersion estimates when the spread within subgroups changed from the known
// sigma of a single reading.
//
//	C_t = ν (v/σ² - 1 - ln(v/σ²))
//
// with v the pooled variance of the subgroups after t on ν degrees of freedom.
// variances holds the subgroup variances (divisor n-1) in the square of the
// characteristic's unit, df their degrees of freedom, n-1; subgroups with 0
// degrees of freedom say nothing and are passed over. Individuals take the
// squared deviation from the known centre on 1 degree of freedom.
//
// resolution is the step of the recorded readings, in the characteristic's
// unit; rounding hides spread below it, so a pooled variance smaller than that
// of rounding alone, resolution²/12, counts as that much. With resolution 0 a
// moment after which all readings are equal is passed over, since the
// likelihood has no value there.
//
// Level is the standard deviation after the change, Size its ratio to sigma,
// SizeSE is Size/√(2ν), the large sample standard error of a standard
// deviation.
//
// It fails when a value is not finite or negative, sigma is not above zero, the
// lengths differ, or no moment can be judged.
//
// Source: the likelihood ratio of a normal variance against a known one, with
// the maximisation of Samuel, Pignatiello and Calvin (1998), Quality
// Engineering 10.
func Dispersion(variances []float64, df []int, sigma, resolution float64) (Estimate, error) {
	if err := checkStretch(len(variances), "variances"); err != nil {
		return Estimate{}, err
	}
	if len(df) != len(variances) {
		return Estimate{}, fmt.Errorf("%w: %d variances but %d degrees of freedom", ErrInput, len(variances), len(df))
	}
	if !finite(sigma) || sigma <= 0 {
		return Estimate{}, fmt.Errorf("%w: sigma must be above zero", ErrInput)
	}
	if !finite(resolution) || resolution < 0 {
		return Estimate{}, fmt.Errorf("%w: resolution must not be negative", ErrInput)
	}
	for i, v := range variances {
		if !finite(v) || v < 0 {
			return Estimate{}, fmt.Errorf("%w: variance %d must be a number, not negative", ErrInput, i)
		}
		if df[i] < 0 {
			return Estimate{}, fmt.Errorf("%w: degrees of freedom %d must not be negative", ErrInput, i)
		}
	}
	floor := resolution / sigma * (resolution / sigma) / 12
	profile := make([]float64, len(variances))
	ratios := make([]float64, len(variances)) // v/σ² after t
	nus := make([]float64, len(variances))
	var sum, nu float64
	for i := len(variances) - 1; i >= 0; i-- {
		if df[i] == 0 {
			// The change cannot be told from one at the next subgroup.
			profile[i] = math.NaN()
			continue
		}
		w := float64(df[i])
		sum += float64(w * (variances[i] / sigma / sigma))
		nu += w
		r := math.Max(sum/nu, floor)
		profile[i] = math.NaN()
		if r > 0 {
			profile[i] = nu * varianceDivergence(r)
		}
		ratios[i], nus[i] = r, nu
	}
	e, at, err := maximum(profile)
	if err != nil {
		return Estimate{}, err
	}
	e.Size = math.Sqrt(ratios[at])
	e.SizeSE = e.Size / math.Sqrt(2*nus[at])
	e.Level = e.Size * sigma
	return e.checked()
}

// varianceDivergence is r - 1 - ln r without cancellation near 1.
func varianceDivergence(r float64) float64 {
	if d := r - 1; math.Abs(d) < 0.5 {
		return d - math.Log1p(d)
	}
	return r - 1 - math.Log(r)
}
