package limits

import "math"

// EWMAPoints is an EWMA chart drawn over a series.
type EWMAPoints struct {
	Z, Lower, Upper []float64
	Fired           []int // indices, from 0, strictly outside the limits
}

// EWMASeries draws the exponentially weighted moving average of x about a known
// centre, with sigma that of one x, weight 0 < lambda ≤ 1 and limits at L > 0:
//
//	z_i = λ x_i + (1-λ) z_{i-1}, z_0 = centre
//	centre ± L σ √(λ/(2-λ) (1-(1-λ)^(2i))), i from 1
//
// It is the whole-series form for equal sizes; package watch steps through one point
// at a time and through unequal ones.
//
// Source: Lucas and Saccucci, Technometrics 32 (1990), 1-12; NIST/SEMATECH
// e-Handbook 6.3.2.4.
func EWMASeries(x []float64, center, sigma, lambda, l float64) (EWMAPoints, error) {
	if err := checkSeries(x, center, sigma); err != nil {
		return EWMAPoints{}, err
	}
	if !(lambda > 0 && lambda <= 1) {
		return EWMAPoints{}, invalid("lambda must be above 0 and at most 1, got %g", lambda)
	}
	if !(l > 0 && l <= 100) {
		return EWMAPoints{}, invalid("L must be above 0 and at most 100, got %g", l)
	}
	n := len(x)
	p := EWMAPoints{Z: make([]float64, n), Lower: make([]float64, n), Upper: make([]float64, n), Fired: []int{}}
	keep := math.Log1p(-lambda)
	d := 0.0
	for i, v := range x {
		d = lambda*(v-center) + (1-lambda)*d
		share := lambda / (2 - lambda) * -math.Expm1(2*float64(i+1)*keep)
		half := l * sigma * math.Sqrt(share)
		p.Z[i], p.Lower[i], p.Upper[i] = center+d, center-half, center+half
		if math.Abs(d) > half+Tie*sigma {
			p.Fired = append(p.Fired, i)
		}
		if !finite(p.Z[i]) || !finite(p.Upper[i]) || !finite(p.Lower[i]) {
			return EWMAPoints{}, invalid("the values are too large to compute with")
		}
	}
	return p, nil
}

// CUSUMPoints is a two-sided CUSUM drawn over a series; both sums are kept positive,
// in sigmas.
type CUSUMPoints struct {
	High, Low []float64
	Fired     []int // indices, from 0, where either sum is strictly above h
}

// CUSUMSeries draws the tabular cumulative sums of x about a known centre, sigma
// that of one x, slack k ≥ 0 and decision interval h > 0 in sigmas, and a head start
// as a share of h, 0 to 1:
//
//	H_i = max(0, H_{i-1} + z_i - k),  L_i = max(0, L_{i-1} - z_i - k)
//
// Nothing is reset after a signal. Package watch steps through one point at a time.
//
// Source: Page, Biometrika 41 (1954), 100-115; Lucas and Crosier, Technometrics 24
// (1982), 199-205, for the head start.
func CUSUMSeries(x []float64, center, sigma, k, h, headStart float64) (CUSUMPoints, error) {
	if err := checkSeries(x, center, sigma); err != nil {
		return CUSUMPoints{}, err
	}
	switch {
	case !(k >= 0 && k <= 100):
		return CUSUMPoints{}, invalid("k must be 0 to 100, got %g", k)
	case !(h > 0 && h <= 1e6):
		return CUSUMPoints{}, invalid("h must be above 0 and at most 1e6, got %g", h)
	case !(headStart >= 0 && headStart <= 1):
		return CUSUMPoints{}, invalid("the head start must be 0 to 1, got %g", headStart)
	}
	n := len(x)
	p := CUSUMPoints{High: make([]float64, n), Low: make([]float64, n), Fired: []int{}}
	high, low := headStart*h, headStart*h
	for i, v := range x {
		z := (v - center) / sigma
		high, low = math.Max(0, high+z-k), math.Max(0, low-z-k)
		if !finite(high) || !finite(low) {
			return CUSUMPoints{}, invalid("the values are too large to compute with")
		}
		p.High[i], p.Low[i] = high, low
		if high > h+Tie || low > h+Tie {
			p.Fired = append(p.Fired, i)
		}
	}
	return p, nil
}

func checkSeries(x []float64, center, sigma float64) error {
	switch {
	case len(x) == 0:
		return invalid("there are no values")
	case !finite(center):
		return invalid("the centre must be a finite number, got %g", center)
	case !(sigma > 0) || math.IsInf(sigma, 1):
		return invalid("sigma must be above zero, got %g", sigma)
	}
	for i, v := range x {
		if !finite(v) {
			return invalid("value %d is not a finite number: %g", i+1, v)
		}
	}
	return nil
}
