package calc

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// kinds are the charts beyond means, individuals and counts.
var kinds = []Topic{
	topic("short-run", "Deviations from target of parts made in short runs, standardised where parts differ in spread.",
		`{"chart": "xbar-r", "subgroups": [[10.1, 9.9, 10.0], [20.2, 20.0, 19.8], [9.9, 10.1, 10.3], [20.0, 20.1, 19.7]], "targets": [10, 20, 10, 20]}`, shortRun),
	topic("three-way", "Batch means with limits from their own moving range, beside the spread within batches.",
		`{"chart": "xbar-r", "batches": [[10.1, 9.9, 10.0], [10.9, 11.0, 10.8], [9.3, 9.2, 9.4], [10.5, 10.4, 10.6], [9.8, 9.9, 9.7]]}`, threeWay),
	topic("group", "The highest and the lowest of several streams in each round, and how long one stays extreme.",
		`{"chart": "xbar-r", "rounds": [[[10.1, 9.9], [10.3, 10.2], [9.8, 10.0]], [[10.0, 10.2], [10.4, 10.3], [9.9, 9.7]], [[9.9, 10.1], [10.2, 10.5], [10.0, 9.8]]]}`, group),
	topic("trend", "Limits about a line fitted to tool wear, and the wear at which to change the tool.",
		`{"chart": "individuals", "values": [10.0, 10.3, 10.3, 10.7, 10.8, 10.1, 10.1, 10.5], "wear": [0, 1, 2, 3, 4, 0, 1, 2], "upper": 12, "cpk": 1.33}`, trend),
	topic("t-squared", "Hotelling's T-squared of characteristics measured on the same parts, with each one's share.",
		`{"x": [[1.0, 2.1], [1.2, 2.4], [0.9, 1.9], [1.1, 2.3], [1.3, 2.5], [0.8, 1.8], [1.0, 2.0], [1.1, 2.1]], "later": [[1.0, 2.6]]}`, tSquared),
}

type shortRunIn struct {
	Chart     limits.Chart     `json:"chart"`
	Subgroups [][]float64      `json:"subgroups,omitempty"`
	Values    []float64        `json:"values,omitempty"`
	Targets   []float64        `json:"targets"`
	Sigmas    []float64        `json:"sigmas,omitempty"`
	Estimator limits.Estimator `json:"estimator,omitempty"`
	Multiple  number           `json:"multiple"`
	Sigma     number           `json:"sigma"`
	Center    number           `json:"center"`
}

// shortRun answers like limits, in deviations from target. With sigmas, one for the part
// of each subgroup, it answers in units of those and needs no estimate.
func shortRun(in shortRunIn) (limitsOut, error) {
	d, err := readings(in.Chart, in.Subgroups, in.Values)
	if err != nil {
		return limitsOut{}, err
	}
	subgroups, err := d.reduce(in.Chart)
	if err != nil {
		return limitsOut{}, err
	}
	if err := sameLength("targets", len(in.Targets), "subgroups", len(subgroups)); err != nil {
		return limitsOut{}, err
	}
	asLimits := limitsIn{Chart: in.Chart, Estimator: in.Estimator, Multiple: in.Multiple, Sigma: in.Sigma, Center: in.Center}
	if in.Sigmas != nil {
		if err := sameLength("sigmas", len(in.Sigmas), "subgroups", len(subgroups)); err != nil {
			return limitsOut{}, err
		}
		if in.Sigma != nil || in.Center != nil || in.Estimator != "" {
			return limitsOut{}, errors.New("with sigmas the chart is standardised: center is 0, sigma 1, and nothing is estimated")
		}
		unit := limits.StandardisedUnit(in.Chart)
		asLimits.Sigma, asLimits.Center = &unit.Sigma, &unit.Center
	}
	for i := range subgroups {
		if in.Sigmas != nil {
			subgroups[i], err = subgroups[i].Standardised(in.Targets[i], in.Sigmas[i])
		} else {
			subgroups[i], err = subgroups[i].Deviation(in.Targets[i])
		}
		if err != nil {
			return limitsOut{}, fmt.Errorf("%s: %w", d.where(i), err)
		}
	}
	std, err := standard(asLimits, subgroups)
	if err != nil {
		return limitsOut{}, err
	}
	return draw(std, subgroups)
}

type threeWayIn struct {
	Chart   limits.Chart `json:"chart"`
	Batches [][]float64  `json:"batches"`
}

type threeWayOut struct {
	SigmaMeans  float64       `json:"sigma_means"`
	SigmaWithin float64       `json:"sigma_within"`
	Means       locationOut   `json:"means"`
	MovingRange dispersionOut `json:"moving_range"`
	Within      dispersionOut `json:"within"`
	// Between is the F test on which the chart is offered.
	Between betweenOut `json:"between"`
}

type betweenOut struct {
	F            float64 `json:"f"`
	P            float64 `json:"p"`
	DF           [2]int  `json:"df"`
	SigmaBetween float64 `json:"sigma_between"`
}

func threeWay(in threeWayIn) (threeWayOut, error) {
	if in.Chart != limits.XBarR && in.Chart != limits.XBarS {
		return threeWayOut{}, fmt.Errorf("chart is that of the spread within, xbar-r or xbar-s, not %q", in.Chart)
	}
	batches, err := data{subgroups: in.Batches}.reduce(in.Chart)
	if err != nil {
		return threeWayOut{}, err
	}
	std, err := limits.EstimateThreeWay(in.Chart, batches)
	if err != nil {
		return threeWayOut{}, err
	}
	test, err := limits.CompareBetween(batches)
	if err != nil {
		return threeWayOut{}, err
	}
	single := make([]limits.Subgroup, len(batches))
	for i, b := range batches {
		single[i] = limits.Subgroup{N: 1, Location: b.Location}
	}
	means, err := draw(std.Means, single)
	if err != nil {
		return threeWayOut{}, err
	}
	within, err := draw(std.Within, batches)
	if err != nil {
		return threeWayOut{}, err
	}
	return threeWayOut{
		SigmaMeans: std.Means.Sigma, SigmaWithin: std.Within.Sigma,
		Means: means.Location, MovingRange: means.Dispersion, Within: within.Dispersion,
		Between: betweenOut{F: test.F, P: test.P, DF: [2]int{int(test.DF1), int(test.DF2)}, SigmaBetween: test.SigmaBetween},
	}, nil
}

type groupIn struct {
	Chart     limits.Chart     `json:"chart"`
	Rounds    [][][]float64    `json:"rounds"`
	Estimator limits.Estimator `json:"estimator,omitempty"`
	Tie       float64          `json:"tie,omitempty"`
}

type groupOut struct {
	Sigma  float64    `json:"sigma"`
	Center float64    `json:"center"`
	Rounds []roundOut `json:"rounds"`
	// Chance[k-1] is the probability that one stream is extreme k times in a row when
	// all are alike, and RunFor the shortest run that rare as a point beyond 3 sigma.
	Chance []float64 `json:"chance"`
	RunFor int       `json:"run_for"`
}

type roundOut struct {
	Highest    streamOut `json:"highest"`
	Lowest     streamOut `json:"lowest"`
	Widest     int       `json:"widest"`
	Beyond     bool      `json:"beyond"`
	Dispersion number    `json:"dispersion"`
}

type streamOut struct {
	Stream int     `json:"stream"`
	Value  float64 `json:"value"`
	Limit  number  `json:"limit"`
	Run    int     `json:"run"`
}

func group(in groupIn) (groupOut, error) {
	if !in.Chart.Readings() {
		return groupOut{}, fmt.Errorf("chart must be one of xbar-r, xbar-s, median-r, individuals, not %q", in.Chart)
	}
	if err := checkEstimator(in.Chart, in.Estimator); err != nil {
		return groupOut{}, err
	}
	if len(in.Rounds) == 0 {
		return groupOut{}, errors.New("rounds are empty")
	}
	streams := len(in.Rounds[0])
	reduced := make([][]limits.Subgroup, len(in.Rounds))
	for i, round := range in.Rounds {
		if len(round) != streams || streams < 2 {
			return groupOut{}, fmt.Errorf("rounds[%d] must have one subgroup for each of the streams, at least 2, as the others do", i)
		}
		for j, r := range round {
			s, err := limits.NewSubgroup(in.Chart, r)
			if err != nil {
				return groupOut{}, fmt.Errorf("rounds[%d][%d]: %w", i, j, err)
			}
			reduced[i] = append(reduced[i], s)
		}
	}
	// Each stream is a row of its own: no moving range crosses from one to the next.
	var all []limits.Subgroup
	for j := range streams {
		for i := range reduced {
			s := reduced[i][j]
			s.Break = i == 0
			all = append(all, s)
		}
	}
	e, err := limits.Estimate(in.Chart, in.Estimator, all)
	if err != nil {
		return groupOut{}, err
	}
	std := limits.Standard{Chart: in.Chart, Center: e.Center, Sigma: e.Sigma}
	out := groupOut{Sigma: e.Sigma, Center: e.Center}
	if out.RunFor, err = limits.RunFor(streams, 2*limits.DefaultTail); err != nil {
		return groupOut{}, err
	}
	for k := 1; k <= out.RunFor; k++ {
		chance, err := limits.RunChance(streams, k)
		if err != nil {
			return groupOut{}, err
		}
		out.Chance = append(out.Chance, chance)
	}
	return out, drawGroup(&out, std, reduced, in.Tie)
}

func drawGroup(out *groupOut, std limits.Standard, rounds [][]limits.Subgroup, tie float64) error {
	table, err := std.Table()
	if err != nil {
		return err
	}
	var high, low limits.StreamRun
	for i, round := range rounds {
		x, err := limits.FindExtremes(std.Chart, round, tie)
		if err != nil {
			return fmt.Errorf("rounds[%d]: %w", i, err)
		}
		top, _, err := table.Bands(round[x.Highest].N)
		if err != nil {
			return err
		}
		bottom, _, err := table.Bands(round[x.Lowest].N)
		if err != nil {
			return err
		}
		r := roundOut{
			Highest: streamOut{Stream: x.Highest, Value: round[x.Highest].Location, Limit: present(top.Upper), Run: high.Step(x.Highest, x.HighestTied)},
			Lowest:  streamOut{Stream: x.Lowest, Value: round[x.Lowest].Location, Limit: present(bottom.Lower), Run: low.Step(x.Lowest, x.LowestTied)},
			Widest:  x.Widest,
			Beyond:  top.Outside(round[x.Highest].Location) > 0 || bottom.Outside(round[x.Lowest].Location) < 0,
		}
		var before *limits.Subgroup
		if i > 0 {
			before = &rounds[i-1][x.Widest]
		}
		r.Dispersion = ifExists(std.Chart.DispersionPoint(before, round[x.Widest]))
		out.Rounds = append(out.Rounds, r)
	}
	return nil
}

type trendIn struct {
	Chart     limits.Chart     `json:"chart"`
	Subgroups [][]float64      `json:"subgroups,omitempty"`
	Values    []float64        `json:"values,omitempty"`
	Wear      []float64        `json:"wear"`
	Estimator limits.Estimator `json:"estimator,omitempty"`
	Lower     number           `json:"lower"`
	Upper     number           `json:"upper"`
	Cpk       number           `json:"cpk"`
}

type trendOut struct {
	Intercept float64 `json:"intercept"`
	Slope     float64 `json:"slope"`
	SlopeSE   float64 `json:"slope_se"`
	Sigma     float64 `json:"sigma"`
	Location  struct {
		Center []float64 `json:"center"`
		Lower  []number  `json:"lower"`
		Upper  []number  `json:"upper"`
		Points []float64 `json:"points"`
	} `json:"location"`
	// ChangeAt is the wear at which to change the tool; null when the line never gets
	// there or cpk is not given.
	ChangeAt number `json:"change_at"`
}

// trend fits a line to wear, which counts from 0 at each tool change: a wear below the
// one before marks the first subgroup after a change.
func trend(in trendIn) (trendOut, error) {
	d, err := readings(in.Chart, in.Subgroups, in.Values)
	if err != nil {
		return trendOut{}, err
	}
	subgroups, err := d.reduce(in.Chart)
	if err != nil {
		return trendOut{}, err
	}
	if err := sameLength("wear", len(in.Wear), "subgroups", len(subgroups)); err != nil {
		return trendOut{}, err
	}
	if err := checkEstimator(in.Chart, in.Estimator); err != nil {
		return trendOut{}, err
	}
	for i := range subgroups {
		subgroups[i].Break = i > 0 && in.Wear[i] < in.Wear[i-1]
	}
	std, err := limits.EstimateTrend(in.Chart, in.Estimator, subgroups, in.Wear)
	if err != nil {
		return trendOut{}, err
	}
	out := trendOut{Intercept: plain(std.Intercept), Slope: plain(std.Slope), SlopeSE: std.SlopeSE, Sigma: std.Sigma}
	for i, s := range subgroups {
		band, _, err := std.Bands(in.Wear[i], s.N)
		if err != nil {
			return trendOut{}, fmt.Errorf("%s: %w", d.where(i), err)
		}
		out.Location.Center = append(out.Location.Center, plain(band.Center))
		out.Location.Lower = append(out.Location.Lower, present(band.Lower))
		out.Location.Upper = append(out.Location.Upper, present(band.Upper))
		out.Location.Points = append(out.Location.Points, s.Location)
	}
	if in.Cpk == nil {
		return out, nil
	}
	wear, ok, err := std.ChangeAt(in.Lower, in.Upper, *in.Cpk)
	if err != nil {
		return trendOut{}, err
	}
	out.ChangeAt = ifExists(wear, ok && !math.IsInf(wear, 0))
	return out, nil
}

type tSquaredIn struct {
	X     [][]float64 `json:"x"`
	Later [][]float64 `json:"later,omitempty"`
	Alpha number      `json:"alpha"`
}

type tSquaredOut struct {
	Mean       []float64      `json:"mean"`
	Covariance [][]float64    `json:"covariance"`
	Limit1     float64        `json:"limit_phase1"`
	Limit2     float64        `json:"limit_phase2"`
	T2         []float64      `json:"t2"`
	Later      []tSquaredLast `json:"later"`
}

type tSquaredLast struct {
	T2     float64    `json:"t2"`
	Shares []shareOut `json:"shares"`
}

type shareOut struct {
	Unconditional      float64 `json:"unconditional"`
	UnconditionalLimit float64 `json:"unconditional_limit"`
	Conditional        float64 `json:"conditional"`
	ConditionalLimit   float64 `json:"conditional_limit"`
}

func tSquared(in tSquaredIn) (tSquaredOut, error) {
	std, err := limits.EstimateTSquared(in.X)
	if err != nil {
		return tSquaredOut{}, err
	}
	if in.Alpha != nil {
		if *in.Alpha <= 0 || *in.Alpha >= 1 {
			return tSquaredOut{}, fmt.Errorf("alpha must lie between 0 and 1, not %v", *in.Alpha)
		}
		std.Alpha = *in.Alpha
	}
	out := tSquaredOut{Mean: std.Mean, Covariance: std.Covariance, Later: []tSquaredLast{}}
	if out.Limit1, out.Limit2, err = std.Limits(); err != nil {
		return tSquaredOut{}, err
	}
	for i, x := range in.X {
		t2, err := std.Statistic(x)
		if err != nil {
			return tSquaredOut{}, fmt.Errorf("x[%d]: %w", i, err)
		}
		out.T2 = append(out.T2, t2)
	}
	for i, x := range in.Later {
		t2, err := std.Statistic(x)
		if err != nil {
			return tSquaredOut{}, fmt.Errorf("later[%d]: %w", i, err)
		}
		shares, err := std.Shares(x)
		if err != nil {
			return tSquaredOut{}, fmt.Errorf("later[%d]: %w", i, err)
		}
		last := tSquaredLast{T2: t2}
		for _, s := range shares {
			last.Shares = append(last.Shares, shareOut(s))
		}
		out.Later = append(out.Later, last)
	}
	return out, nil
}
