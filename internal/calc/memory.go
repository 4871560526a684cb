package calc

import (
	"errors"
	"fmt"

	"holdfast/internal/spc/watch"
)

// memory are the topics of charts and rules that remember earlier points.
var memory = []Topic{
	topic("ewma", "An exponentially weighted moving average with its exact limits at each point.",
		`{"x": [10.1, 9.8, 10.4, 10.6, 10.9], "center": 10, "sigma": 0.3, "lambda": 0.2, "L": 2.86}`, ewma),
	topic("cusum", "Both sides of a tabular cumulative sum.",
		`{"x": [10.1, 9.8, 10.4, 10.6, 10.9], "center": 10, "sigma": 0.3, "k": 0.5, "h": 4}`, cusum),
	topic("rules", "Every point at which a run rule holds.",
		`{"z": [0.4, 2.1, 1.2, 2.3, -0.5, 3.2], "rules": [{"kind": "beyond", "z": 3}, {"kind": "k-of-m", "k": 2, "m": 3, "z": 2}]}`, runRules),
}

// about turns readings into distances from the centre in sigmas.
func about(x []float64, center, sigma float64) ([]float64, error) {
	if len(x) == 0 {
		return nil, errors.New("x is empty")
	}
	if sigma <= 0 {
		return nil, fmt.Errorf("sigma must be above 0, not %v", sigma)
	}
	z := make([]float64, len(x))
	for i := range x {
		z[i] = (x[i] - center) / sigma
	}
	return z, nil
}

type ewmaIn struct {
	X      []float64 `json:"x"`
	Center float64   `json:"center"`
	Sigma  float64   `json:"sigma"`
	Lambda float64   `json:"lambda"`
	L      float64   `json:"L"`
}

type ewmaOut struct {
	Z     []float64 `json:"z"`
	Lower []float64 `json:"lower"`
	Upper []float64 `json:"upper"`
	Fired []int     `json:"fired"`
}

func ewma(in ewmaIn) (ewmaOut, error) {
	chart := watch.EWMA{Lambda: in.Lambda, L: in.L}
	if err := chart.Validate(); err != nil {
		return ewmaOut{}, err
	}
	z, err := about(in.X, in.Center, in.Sigma)
	if err != nil {
		return ewmaOut{}, err
	}
	out := ewmaOut{Fired: []int{}}
	var s watch.EWMAState
	for i := range z {
		half, side := chart.Step(&s, z[i], 1)
		out.Z = append(out.Z, in.Center+in.Sigma*s.Deviation)
		out.Lower = append(out.Lower, in.Center-in.Sigma*half)
		out.Upper = append(out.Upper, in.Center+in.Sigma*half)
		if side != watch.None {
			out.Fired = append(out.Fired, i)
		}
	}
	return out, nil
}

type cusumIn struct {
	X         []float64 `json:"x"`
	Center    float64   `json:"center"`
	Sigma     float64   `json:"sigma"`
	K         float64   `json:"k"`
	H         float64   `json:"h"`
	HeadStart float64   `json:"head_start,omitempty"`
}

type cusumOut struct {
	High  []float64 `json:"high"`
	Low   []float64 `json:"low"`
	Fired []int     `json:"fired"`
}

func cusum(in cusumIn) (cusumOut, error) {
	chart := watch.CUSUM{K: in.K, H: in.H, HeadStart: in.HeadStart}
	if err := chart.Validate(); err != nil {
		return cusumOut{}, err
	}
	z, err := about(in.X, in.Center, in.Sigma)
	if err != nil {
		return cusumOut{}, err
	}
	out := cusumOut{Fired: []int{}}
	var s watch.CUSUMState
	for i := range z {
		if chart.Step(&s, z[i]) != watch.None {
			out.Fired = append(out.Fired, i)
		}
		out.High = append(out.High, plain(s.High))
		out.Low = append(out.Low, plain(s.Low))
	}
	return out, nil
}

type rulesIn struct {
	Z     []float64    `json:"z"`
	Rules []watch.Rule `json:"rules"`
}

type rulesOut struct {
	Fired []firing `json:"fired"`
}

type firing struct {
	Index int `json:"index"`
	Rule  int `json:"rule"`
}

func runRules(in rulesIn) (rulesOut, error) {
	rules, err := watch.Compile(in.Rules)
	if err != nil {
		return rulesOut{}, fmt.Errorf("rules: %w", err)
	}
	out := rulesOut{Fired: []firing{}}
	var s watch.State
	for i, z := range in.Z {
		fired := rules.Step(&s, watch.Point{Z: z, X: z})
		for r := range rules.Len() {
			if fired.Has(r) {
				out.Fired = append(out.Fired, firing{Index: i, Rule: r})
			}
		}
	}
	return out, nil
}
