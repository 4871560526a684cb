package watch

import (
	"fmt"
	"math"
)

// Averages is an EWMA drawn over a whole series.
type Averages struct {
	Z, Lower, Upper []float64 // in the unit of the series
	Fired           []int     // indices, from 0, strictly outside the limits
}

// Series draws the EWMA of x about a known centre, with sigma that of one x. It is the
// fold of Step over points of equal size.
func (e EWMA) Series(x []float64, center, sigma float64) (Averages, error) {
	if err := e.Validate(); err != nil {
		return Averages{}, err
	}
	out := Averages{Z: make([]float64, len(x)), Lower: make([]float64, len(x)), Upper: make([]float64, len(x)), Fired: []int{}}
	var s EWMAState
	err := overSeries(x, center, sigma, func(i int, z float64) float64 {
		half, side := e.Step(&s, z, 1)
		half = float64(half * sigma)
		out.Z[i], out.Lower[i], out.Upper[i] = center+float64(s.Deviation*sigma), center-half, center+half
		if side != None {
			out.Fired = append(out.Fired, i)
		}
		return out.Z[i] + out.Lower[i] + out.Upper[i]
	})
	if err != nil {
		return Averages{}, err
	}
	return out, nil
}

// CUSUMSeries is a two-sided CUSUM drawn over a whole series: both sums, kept positive,
// in sigmas.
type CUSUMSeries struct {
	High, Low []float64
	Fired     []int // indices, from 0, where either sum is strictly above h
}

// Series draws the CUSUM of x about a known centre, with sigma that of one x. It is the
// fold of Step.
func (c CUSUM) Series(x []float64, center, sigma float64) (CUSUMSeries, error) {
	if err := c.Validate(); err != nil {
		return CUSUMSeries{}, err
	}
	out := CUSUMSeries{High: make([]float64, len(x)), Low: make([]float64, len(x)), Fired: []int{}}
	var s CUSUMState
	err := overSeries(x, center, sigma, func(i int, z float64) float64 {
		if c.Step(&s, z) != None {
			out.Fired = append(out.Fired, i)
		}
		out.High[i], out.Low[i] = s.High, s.Low
		return s.High + s.Low
	})
	if err != nil {
		return CUSUMSeries{}, err
	}
	return out, nil
}

// overSeries hands each x in sigmas from the centre to step, which returns a number
// that is finite as long as all it made are.
func overSeries(x []float64, center, sigma float64, step func(i int, z float64) float64) error {
	finite := func(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
	switch {
	case len(x) == 0:
		return fmt.Errorf("x: there are no values")
	case !finite(center):
		return fmt.Errorf("center: it must be a finite number, got %v", center)
	case !(sigma > 0) || math.IsInf(sigma, 1):
		return fmt.Errorf("sigma: it must be a finite number above 0, got %v", sigma)
	}
	for i, v := range x {
		if !finite(v) {
			return fmt.Errorf("x: value %d is not a finite number: %v", i+1, v)
		}
		if !finite(step(i, (v-center)/sigma)) {
			return fmt.Errorf("x: value %d is too far from the centre to compute with", i+1)
		}
	}
	return nil
}
