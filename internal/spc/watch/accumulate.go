package watch

import (
	"fmt"
	"math"
)

// EWMA is an exponentially weighted moving average with exact start-up limits.
// Lambda is the weight of the newest point, 0 < Lambda <= 1; L the distance of the
// limits in standard deviations of the average.
//
// Source: Roberts (1959), Technometrics 1; limits by Lucas and Saccucci (1990),
// Technometrics 32.
type EWMA struct {
	Lambda float64 `json:"lambda"`
	L      float64 `json:"L"`
}

// Validate says in one sentence which parameter is wrong, or nil.
func (e EWMA) Validate() error {
	switch {
	case !(e.Lambda > 0 && e.Lambda <= 1):
		return fmt.Errorf("lambda: the weight of an EWMA is above 0 and at most 1, got %v", e.Lambda)
	case !(e.L > 0) || math.IsInf(e.L, 1):
		return fmt.Errorf("limits L: those of an EWMA need a finite distance above 0, got %v", e.L)
	}
	return nil
}

// EWMAState is what an EWMA remembers: its deviation from the centre in sigmas of
// a reading, and its variance in sigmas squared. Zero starts at the centre.
type EWMAState struct{ Deviation, Variance float64 }

// Step adds a statistic that lies x sigmas of a reading from the centre and has
// the given variance, in sigmas squared (1/n for a mean of n). It returns the
// half-width of the limits in sigmas of a reading and the side on which the
// average is outside them.
//
//	z_i = λ x_i + (1-λ) z_{i-1},  v_i = λ² var_i + (1-λ)² v_{i-1},  limits ± L √v_i
//
// For equal sizes v_i is the closed form λ/(2-λ) (1-(1-λ)^(2i)) / n.
func (e EWMA) Step(s *EWMAState, x, variance float64) (halfWidth float64, side Side) {
	keep := 1 - e.Lambda
	// The conversions forbid fused multiply-add, so that every processor gets the
	// same bits and a stored state can be compared.
	s.Deviation = float64(e.Lambda*x) + float64(keep*s.Deviation)
	s.Variance = float64(float64(e.Lambda*e.Lambda)*variance) + float64(float64(keep*keep)*s.Variance)
	halfWidth = float64(e.L * math.Sqrt(s.Variance))
	return halfWidth, sides(s.Deviation >= halfWidth+Tie, s.Deviation <= -halfWidth-Tie)
}

// CUSUM is a tabular two-sided cumulative sum. K is the slack and H the decision
// interval, both in standard errors of the plotted statistic; HeadStart is the
// fraction of H, 0 to 1, at which both sums start (0.5 is the usual fast initial
// response).
//
// Source: Page (1954), Biometrika 41; Lucas and Crosier (1982), Technometrics 24,
// for the head start.
type CUSUM struct {
	K         float64 `json:"k"`
	H         float64 `json:"h"`
	HeadStart float64 `json:"head_start,omitempty"`
}

// Validate says in one sentence which parameter is wrong, or nil.
func (c CUSUM) Validate() error {
	switch {
	case !(c.K >= 0) || math.IsInf(c.K, 1):
		return fmt.Errorf("k: the slack of a CUSUM is a finite number from 0, got %v", c.K)
	case !(c.H > 0) || math.IsInf(c.H, 1):
		return fmt.Errorf("h: the decision interval of a CUSUM is a finite number above 0, got %v", c.H)
	case !(c.HeadStart >= 0 && c.HeadStart <= 1):
		return fmt.Errorf("head_start: the head start of a CUSUM is a fraction of h from 0 to 1, got %v", c.HeadStart)
	}
	return nil
}

// CUSUMState is what a CUSUM remembers: both sums, kept positive, in standard
// errors. Zero has not started: the head start is given at the first point.
type CUSUMState struct {
	High, Low float64
	Started   bool
}

// Step adds a point z standard errors from the centre and returns the sides whose
// sum is above H. Nothing is reset after a signal.
//
//	H_i = max(0, H_{i-1} + z_i - k),  L_i = max(0, L_{i-1} - z_i - k)
func (c CUSUM) Step(s *CUSUMState, z float64) Side {
	if !s.Started {
		start := c.HeadStart * c.H
		*s = CUSUMState{High: start, Low: start, Started: true}
	}
	s.High = max(0, s.High+z-c.K)
	s.Low = max(0, s.Low-z-c.K)
	return sides(s.High-c.H >= Tie, s.Low-c.H >= Tie)
}

func sides(high, low bool) Side { return Side(bit(high) | bit(low)<<1) }
