package calc

import (
	"errors"
	"fmt"
	"time"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// prices are the topics of run length.
var prices = []Topic{
	topic("runlength", "Average run length of run rules, an EWMA or a CUSUM, for shifts of the plotted statistic.",
		`{"rules": [{"kind": "beyond", "z": 3}, {"kind": "one-side", "m": 8}], "shifts": [0, 1]}`, runLength),
	topic("runlength-pair", "Average run length of both charts of a pair watched together.",
		`{"chart": "xbar-r", "n": 5, "location": [{"kind": "beyond"}, {"kind": "one-side", "m": 8}], "dispersion": [{"kind": "beyond"}], "shift": 0.5, "spread": 1.2}`, runLengthPair),
	topic("estimated", "How far the false alarm rate may be off when limits come from m subgroups.",
		`{"m": 25, "n": 5, "estimator": "pooled"}`, estimated),
}

// maxShifts bounds the shifts of one question.
const maxShifts = 100

type runLengthIn struct {
	Rules  []watch.Rule  `json:"rules,omitempty"`
	EWMA   *ewmaLengthIn `json:"ewma"`
	CUSUM  *cusumChartIn `json:"cusum"`
	Shifts []float64     `json:"shifts"`
}

type ewmaLengthIn struct {
	Lambda float64           `json:"lambda"`
	L      float64           `json:"L"`
	Limits runlength.StartUp `json:"limits,omitempty"`
}

type cusumChartIn struct {
	K         float64 `json:"k"`
	H         float64 `json:"h"`
	HeadStart float64 `json:"head_start,omitempty"`
}

type runLengthOut struct {
	ARL           []float64 `json:"arl"`
	StandardError []float64 `json:"standard_error"`
	Method        string    `json:"method"`
	Median        []number  `json:"median"`
}

func runLength(in runLengthIn) (runLengthOut, error) {
	asked := 0
	for _, given := range []bool{in.Rules != nil, in.EWMA != nil, in.CUSUM != nil} {
		if given {
			asked++
		}
	}
	switch {
	case asked != 1:
		return runLengthOut{}, errors.New("give exactly one of rules, ewma, cusum")
	case len(in.Shifts) == 0:
		return runLengthOut{}, errors.New("shifts are empty; 0 is a process that has not changed")
	case len(in.Shifts) > maxShifts:
		return runLengthOut{}, fmt.Errorf("at most %d shifts are taken", maxShifts)
	case in.EWMA != nil && in.EWMA.Limits != "" && in.EWMA.Limits != runlength.ExactLimits && in.EWMA.Limits != runlength.ConstantLimits:
		return runLengthOut{}, fmt.Errorf("ewma.limits must be exact or constant, not %q", in.EWMA.Limits)
	}
	var lengths []runlength.RunLength
	var err error
	switch {
	case in.EWMA != nil:
		lengths, err = oneByOne(in.Shifts, func(shift []float64) ([]runlength.RunLength, error) {
			return runlength.EWMA(watch.EWMA{Lambda: in.EWMA.Lambda, L: in.EWMA.L}, in.EWMA.Limits, shift)
		})
	case in.CUSUM != nil:
		lengths, err = oneByOne(in.Shifts, func(shift []float64) ([]runlength.RunLength, error) {
			return runlength.CUSUM(watch.CUSUM(*in.CUSUM), shift)
		})
	default:
		lengths, err = ruleLengths(in.Rules, in.Shifts)
	}
	if err != nil {
		return runLengthOut{}, err
	}
	return writeLengths(lengths), nil
}

// oneByOne asks for shifts one at a time and gives up after CallTime.
func oneByOne(shifts []float64, ask func([]float64) ([]runlength.RunLength, error)) ([]runlength.RunLength, error) {
	end := time.Now().Add(CallTime)
	var out []runlength.RunLength
	for i := range shifts {
		if time.Now().After(end) {
			return nil, fmt.Errorf("after %v only %d of %d shifts are done: ask for fewer at once", CallTime, i, len(shifts))
		}
		l, err := ask(shifts[i : i+1])
		if err != nil {
			return nil, fmt.Errorf("shifts[%d]: %w", i, err)
		}
		out = append(out, l...)
	}
	return out, nil
}

// ruleLengths shares CallTime out among the shifts, should they have to be simulated.
func ruleLengths(rules []watch.Rule, shifts []float64) ([]runlength.RunLength, error) {
	end := time.Now().Add(CallTime)
	var out []runlength.RunLength
	for i := range shifts {
		share := min(SimulationTime, time.Until(end)/time.Duration(len(shifts)-i))
		l, err := runlength.Rules(rules, shifts[i:i+1], within(share))
		if err != nil {
			return nil, fmt.Errorf("shifts[%d]: %w", i, err)
		}
		// What is computed costs the same chain for every shift: one call does all.
		if i == 0 && l[0].Method != runlength.Simulated {
			return runlength.Rules(rules, shifts, within(SimulationTime))
		}
		out = append(out, l...)
	}
	return out, nil
}

// within lets a simulation run for some time.
func within(d time.Duration) runlength.Options {
	end := time.Now().Add(d)
	return runlength.Options{Seed: seed, Stop: func() bool { return time.Now().After(end) }}
}

func writeLengths(lengths []runlength.RunLength) runLengthOut {
	out := runLengthOut{Method: string(lengths[0].Method)}
	for _, l := range lengths {
		out.ARL = append(out.ARL, l.Mean)
		out.StandardError = append(out.StandardError, l.StandardError)
		median, err := l.Median()
		out.Median = append(out.Median, ifExists(median, err == nil))
	}
	return out
}

type runLengthPairIn struct {
	Chart      limits.Chart  `json:"chart"`
	N          int           `json:"n"`
	Location   []watch.Rule  `json:"location,omitempty"`
	Dispersion []watch.Rule  `json:"dispersion,omitempty"`
	EWMA       *ewmaChartIn  `json:"ewma"`
	CUSUM      *cusumChartIn `json:"cusum"`
	Shift      float64       `json:"shift,omitempty"`
	Spread     number        `json:"spread"`
	Multiple   number        `json:"multiple"`
}

type ewmaChartIn struct {
	Lambda float64 `json:"lambda"`
	L      float64 `json:"L"`
}

// runLengthPair takes shift in sigmas of a reading and spread as a ratio to sigma.
func runLengthPair(in runLengthPairIn) (runLengthOut, error) {
	if !in.Chart.Readings() {
		return runLengthOut{}, fmt.Errorf("chart must be one of xbar-r, xbar-s, median-r, individuals, not %q", in.Chart)
	}
	for name, x := range map[string]number{"multiple": in.Multiple, "spread": in.Spread} {
		if err := positive(name, x); err != nil {
			return runLengthOut{}, err
		}
	}
	std := watch.Standard{
		Standard:        limits.Standard{Chart: in.Chart, Sigma: 1, Multiple: orDefault(in.Multiple, limits.DefaultMultiple)},
		LocationRules:   in.Location,
		DispersionRules: in.Dispersion,
		EWMA:            (*watch.EWMA)(in.EWMA),
		CUSUM:           (*watch.CUSUM)(in.CUSUM),
	}
	change := runlength.Change{Shift: in.Shift, Spread: orDefault(in.Spread, 1)}
	opt := within(SimulationTime)
	opt.Points = pairPoints(in.N)
	l, err := runlength.Standard(std, in.N, change, opt)
	if err != nil {
		return runLengthOut{}, err
	}
	return writeLengths([]runlength.RunLength{l}), nil
}

// pairPoints bounds a simulation of subgroups of n by its cost, for a single run that
// never signals is not interrupted: at most some 0.1 µs a reading on two cores.
func pairPoints(n int) int {
	const nanoseconds = 4e9
	return int(nanoseconds / (100 + 100*float64(max(n, 1))))
}

type estimatedIn struct {
	M         int                 `json:"m"`
	N         int                 `json:"n"`
	Estimator runlength.Estimator `json:"estimator"`
}

type estimatedOut struct {
	P10           float64            `json:"arl_p10"`
	P50           float64            `json:"arl_p50"`
	P90           float64            `json:"arl_p90"`
	Mean          number             `json:"arl_mean"`
	FalseAlarm    float64            `json:"false_alarm"`
	StandardError estimatedErrorsOut `json:"standard_error"`
	Method        string             `json:"method"`
}

type estimatedErrorsOut struct {
	P10        float64 `json:"arl_p10"`
	P50        float64 `json:"arl_p50"`
	P90        float64 `json:"arl_p90"`
	Mean       number  `json:"arl_mean"`
	FalseAlarm float64 `json:"false_alarm"`
}

func estimated(in estimatedIn) (estimatedOut, error) {
	s, err := runlength.Estimated(in.M, in.N, in.Estimator, within(SimulationTime))
	if err != nil {
		return estimatedOut{}, err
	}
	return estimatedOut{
		P10: s.P10.Value, P50: s.P50.Value, P90: s.P90.Value, Mean: ifExists(s.Mean.Value, s.HasMean), FalseAlarm: s.FalseAlarm.Value,
		StandardError: estimatedErrorsOut{
			P10: s.P10.SE, P50: s.P50.SE, P90: s.P90.SE, Mean: ifExists(s.Mean.SE, s.HasMean), FalseAlarm: s.FalseAlarm.SE,
		},
		Method: string(s.Method),
	}, nil
}
