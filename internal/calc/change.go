package calc

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/adjust"
	"holdfast/internal/spc/changepoint"
)

var changes = []Topic{
	topic("changepoint", "When the level of means or counts changed, given a signal at the last of them.",
		`{"means": [10.1, 9.9, 10.0, 10.2, 10.9, 11.1, 10.8, 11.2], "center": 10, "sigma": 0.3}`, changePoint),
	topic("changepoint-spread", "When the spread within subgroups changed, given a signal at the last of them.",
		`{"variances": [1.1, 0.8, 1.2, 0.9, 3.8, 4.4], "df": [4, 4, 4, 4, 4, 4], "sigma": 1}`, changePointSpread),
	topic("advice", "Whether to adjust after a signal, and by how much.",
		`{"means": [10.1, 9.9, 10.0, 10.9, 11.1, 10.8], "center": 10, "sigma": 0.3, "target": 10, "step": 0.1}`, advice),
	topic("setup", "The adjustment after each try when a machine is set up (harmonic rule).",
		`{"y": [12.4, 10.9, 10.2], "target": 10}`, setup),
	topic("adjustments", "What the adjustments of a stretch gained or cost.",
		`{"y": [0.4, -0.6, 0.9, -1.1, 0.3, 0.8, -0.5, 0.2], "target": 0, "adjustments": [{"before": 1, "size": -0.4, "prompted": false}, {"before": 3, "size": -0.9, "prompted": false}], "seed": 1}`, adjustments),
}

type changePointIn struct {
	Means  []float64 `json:"means,omitempty"`
	Counts []float64 `json:"counts,omitempty"`
	Sizes  []float64 `json:"sizes,omitempty"`
	Center float64   `json:"center"`
	Sigma  number    `json:"sigma"`
	Model  string    `json:"model,omitempty"`
}

type changePointOut struct {
	After     int     `json:"after"`
	Likely    []int   `json:"likely"`
	Size      float64 `json:"size"`
	SizeSE    float64 `json:"size_se"`
	Statistic float64 `json:"statistic"`
	Level     float64 `json:"level"`
}

func changePoint(in changePointIn) (changePointOut, error) {
	var e changepoint.Estimate
	var err error
	switch {
	case (in.Means == nil) == (in.Counts == nil):
		return changePointOut{}, errors.New("give either means, with sigma, or counts, with model")
	case in.Means != nil && in.Model != "":
		return changePointOut{}, errors.New("model belongs to counts")
	case in.Means != nil && in.Sigma == nil:
		return changePointOut{}, errors.New("sigma is missing: the standard deviation of a mean, or of a reading where sizes are given")
	case in.Counts != nil && in.Sigma != nil:
		return changePointOut{}, errors.New("sigma belongs to means; the spread of counts follows from their model")
	case in.Means != nil:
		var sizes []int
		if sizes, err = wholeSizes(in.Sizes); err != nil {
			return changePointOut{}, err
		}
		e, err = changepoint.Location(in.Means, sizes, in.Center, *in.Sigma)
	case in.Model == "poisson":
		e, err = changepoint.Poisson(in.Counts, in.Sizes, in.Center)
	case in.Model == "binomial":
		e, err = changepoint.Binomial(in.Counts, in.Sizes, in.Center)
	default:
		return changePointOut{}, fmt.Errorf("model must be poisson or binomial, not %q", in.Model)
	}
	return changed(e), err
}

func changed(e changepoint.Estimate) changePointOut {
	return changePointOut{
		After: e.After, Likely: list(e.Likely), Size: plain(e.Size), SizeSE: e.SizeSE,
		Statistic: plain(e.Statistic), Level: plain(e.Level),
	}
}

// wholeSizes turns sizes of subgroups into whole numbers.
func wholeSizes(sizes []float64) ([]int, error) {
	if sizes == nil {
		return nil, nil
	}
	out := make([]int, len(sizes))
	for i, s := range sizes {
		out[i] = int(s)
		if float64(out[i]) != s || s < 1 || s > 1e6 {
			return nil, fmt.Errorf("sizes[%d] must be a whole number of readings, not %v", i, s)
		}
	}
	return out, nil
}

type changePointSpreadIn struct {
	Variances  []float64 `json:"variances"`
	DF         []int     `json:"df"`
	Sigma      float64   `json:"sigma"`
	Resolution float64   `json:"resolution,omitempty"`
}

// changePointSpread answers with size as the ratio of the s.d. after the change to sigma
// and level as that s.d.
func changePointSpread(in changePointSpreadIn) (changePointOut, error) {
	for i, df := range in.DF {
		if df > 1e6 {
			return changePointOut{}, fmt.Errorf("df[%d] must be at most 1000000", i)
		}
	}
	e, err := changepoint.Dispersion(in.Variances, in.DF, in.Sigma, in.Resolution)
	return changed(e), err
}

type adviceIn struct {
	Means  []float64 `json:"means"`
	Center float64   `json:"center"`
	Sigma  float64   `json:"sigma"`
	Target float64   `json:"target"`
	Step   float64   `json:"step"`
}

type adviceOut struct {
	Adjust   float64    `json:"adjust"`
	Offset   float64    `json:"offset"`
	Interval [2]float64 `json:"interval"`
}

func advice(in adviceIn) (adviceOut, error) {
	a, err := adjust.AdviseAtSignal(in.Means, nil, in.Center, in.Sigma, in.Target, in.Step)
	return adviceOut{Adjust: plain(a.Adjust), Offset: plain(a.Offset), Interval: [2]float64{plain(a.Low), plain(a.High)}}, err
}

type setupIn struct {
	Y      []float64 `json:"y"`
	Target float64   `json:"target"`
	Ratio  float64   `json:"ratio,omitempty"`
}

type setupOut struct {
	Adjust []float64 `json:"adjust"`
}

func setup(in setupIn) (setupOut, error) {
	a, err := adjust.Harmonic(in.Y, in.Target, in.Ratio)
	for i := range a {
		a[i] = plain(a[i])
	}
	return setupOut{Adjust: list(a)}, err
}

type adjustmentsIn struct {
	Y           []float64      `json:"y"`
	Target      float64        `json:"target"`
	Adjustments []adjustmentIn `json:"adjustments"`
	Zero        []int          `json:"zero,omitempty"`
	Seed        uint64         `json:"seed,omitempty"`
}

type adjustmentIn struct {
	Before   int     `json:"before"`
	Size     float64 `json:"size"`
	Prompted bool    `json:"prompted"`
}

type adjustmentsOut struct {
	Gains      []float64  `json:"gains"`
	Governed   []int      `json:"governed"`
	Prompted   float64    `json:"prompted"`
	Unprompted float64    `json:"unprompted"`
	Ratio      float64    `json:"ratio"`
	Interval   [2]float64 `json:"interval"`
	Lag1       float64    `json:"lag1"`
}

// maxAudit bounds the bootstrap, which runs over the series two thousand times.
const maxAudit = 100_000

func adjustments(in adjustmentsIn) (adjustmentsOut, error) {
	if len(in.Y) > maxAudit {
		return adjustmentsOut{}, fmt.Errorf("y has %d subgroups, at most %d are taken", len(in.Y), maxAudit)
	}
	made := make([]adjust.Adjustment, len(in.Adjustments))
	for i, a := range in.Adjustments {
		made[i] = adjust.Adjustment(a)
	}
	a, err := adjust.Review(in.Y, in.Target, made, in.Zero, in.Seed)
	if err == nil && math.IsInf(a.High, 1) {
		return adjustmentsOut{}, errors.New("the stretch is too short to bound the ratio")
	}
	for i := range a.Gains {
		a.Gains[i] = plain(a.Gains[i])
	}
	return adjustmentsOut{
		Gains: list(a.Gains), Governed: list(a.Governed), Prompted: plain(a.Prompted), Unprompted: plain(a.Unprompted),
		Ratio: a.Ratio, Interval: [2]float64{a.Low, a.High}, Lag1: plain(a.Lag1),
	}, err
}
