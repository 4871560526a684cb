package calc

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/sample"
)

var basics = []Topic{
	topic("summary", "Mean, standard deviation, median, moving ranges and lag-1 correlation of readings.",
		`{"x": [10.2, 10.4, 9.9, 10.1, 10.0]}`, summary),
	topic("factors", "Factors of control limits for a subgroup size: d2, d3, c4, A2, B3, D4 and the others.",
		`{"n": 5}`, factors),
	topic("range", "Quantiles, or probabilities, of the relative range of normal readings.",
		`{"n": 5, "probability": [0.00135, 0.5, 0.99865]}`, relativeRange),
}

type summaryIn struct {
	X []float64 `json:"x"`
}

type summaryOut struct {
	N                 int     `json:"n"`
	Mean              float64 `json:"mean"`
	SD                float64 `json:"sd"`
	Min               float64 `json:"min"`
	Median            float64 `json:"median"`
	Max               float64 `json:"max"`
	MeanMovingRange   float64 `json:"mean_moving_range"`
	MedianMovingRange float64 `json:"median_moving_range"`
	Lag1              number  `json:"lag1"`
	Skewness          number  `json:"skewness"`
}

func summary(in summaryIn) (summaryOut, error) {
	s, err := sample.Summarize(in.X)
	if err != nil {
		return summaryOut{}, fmt.Errorf("x: %w", err)
	}
	return summaryOut{
		N: s.N, Mean: s.Mean, SD: s.SD, Min: s.Min, Median: s.Median, Max: s.Max,
		MeanMovingRange: s.MeanMovingRange, MedianMovingRange: s.MedianMovingRange,
		Lag1: ifExists(s.Lag1, !s.Constant), Skewness: ifExists(s.Skewness, !s.Constant && s.N > 2),
	}, nil
}

type factorsIn struct {
	N        int    `json:"n"`
	Multiple number `json:"multiple"`
}

// factorsOut holds the constants and, with L the multiple, the factors of limits: of
// means from sigma (A), mean range (A2) and mean s.d. (A3); of the s.d. from its mean
// (B3, B4) and from sigma (B5, B6); of the range from sigma (D1, D2) and from its mean
// (D3, D4); of individuals from the mean range (E2) and mean s.d. (E3).
type factorsOut struct {
	D2          float64 `json:"d2"`
	D3          float64 `json:"d3"`
	C4          float64 `json:"c4"`
	C5          float64 `json:"c5"`
	MedianRange float64 `json:"median_range"`
	MedianSE    float64 `json:"median_se"`
	A           float64 `json:"A"`
	A2          float64 `json:"A2"`
	A3          float64 `json:"A3"`
	B3          number  `json:"B3"`
	B4          float64 `json:"B4"`
	B5          number  `json:"B5"`
	B6          float64 `json:"B6"`
	LowerD1     number  `json:"D1"`
	UpperD2     float64 `json:"D2"`
	LowerD3     number  `json:"D3"`
	UpperD4     float64 `json:"D4"`
	E2          float64 `json:"E2"`
	E3          float64 `json:"E3"`
}

func factors(in factorsIn) (factorsOut, error) {
	if err := positive("multiple", in.Multiple); err != nil {
		return factorsOut{}, err
	}
	l := orDefault(in.Multiple, limits.DefaultMultiple)
	var constants [6]float64
	for i, f := range []func(int) (float64, error){
		factor.D2, factor.D3, factor.C4, factor.C5, factor.MedianRange, factor.MedianSE,
	} {
		x, err := f(in.N)
		if err != nil {
			return factorsOut{}, fmt.Errorf("n: %w", err)
		}
		constants[i] = x
	}
	d2, d3, c4, c5 := constants[0], constants[1], constants[2], constants[3]
	root := math.Sqrt(float64(in.N))
	above := func(x float64) number { return ifExists(x, x > 0) }
	return factorsOut{
		D2: d2, D3: d3, C4: c4, C5: c5, MedianRange: constants[4], MedianSE: constants[5],
		A: l / root, A2: l / (d2 * root), A3: l / (c4 * root),
		B3: above(1 - l*c5/c4), B4: 1 + l*c5/c4, B5: above(c4 - l*c5), B6: c4 + l*c5,
		LowerD1: above(d2 - l*d3), UpperD2: d2 + l*d3, LowerD3: above(1 - l*d3/d2), UpperD4: 1 + l*d3/d2,
		E2: l / d2, E3: l / c4,
	}, nil
}

type rangeIn struct {
	N           int       `json:"n"`
	Probability []float64 `json:"probability,omitempty"`
	W           []float64 `json:"w,omitempty"`
}

type rangeOut struct {
	Quantile []float64 `json:"quantile"`
	CDF      []float64 `json:"cdf"`
}

// maxRange bounds the number of integrals.
const maxRange = 1000

func relativeRange(in rangeIn) (rangeOut, error) {
	if (in.Probability == nil) == (in.W == nil) {
		return rangeOut{}, errors.New("give either probability, for quantiles, or w, for probabilities")
	}
	if len(in.Probability) > maxRange || len(in.W) > maxRange {
		return rangeOut{}, fmt.Errorf("at most %d values are taken", maxRange)
	}
	if in.N < 2 || in.N > factor.MaxSize {
		return rangeOut{}, fmt.Errorf("n must lie between 2 and %d, not %d", factor.MaxSize, in.N)
	}
	var out rangeOut
	for i, p := range in.Probability {
		w, err := factor.RangeQuantile(in.N, p)
		if err != nil {
			return rangeOut{}, fmt.Errorf("probability[%d]: %w", i, err)
		}
		out.Quantile = append(out.Quantile, w)
	}
	for i, w := range in.W {
		p, err := factor.RangeCDF(in.N, w)
		if err != nil {
			return rangeOut{}, fmt.Errorf("w[%d]: %w", i, err)
		}
		out.CDF = append(out.CDF, p)
	}
	if in.Probability != nil {
		out.Quantile = list(out.Quantile)
	} else {
		out.CDF = list(out.CDF)
	}
	return out, nil
}
