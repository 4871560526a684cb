package calc

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"holdfast/internal/spc/limits"
)

var charts = []Topic{
	topic("limits", "Control limits of means, medians or individuals with their ranges or standard deviations.",
		`{"chart": "xbar-r", "subgroups": [[10.1, 9.9, 10.0], [10.2, 10.0, 9.8], [9.9, 10.1, 10.3], [10.0, 10.0, 9.7]]}`, chartLimits),
	topic("counts", "Control limits of p, np, c and u charts and of Laney's p' and u', by sigma or exact probability.",
		`{"chart": "p", "counts": [3, 5, 2, 4, 6], "sizes": [100, 120, 100, 90, 110]}`, counts),
}

// data is how readings are given: subgroups, or values one at a time.
type data struct {
	subgroups [][]float64
	single    bool
}

// readings picks the one of subgroups and values that a chart takes.
func readings(chart limits.Chart, subgroups [][]float64, values []float64) (data, error) {
	if !chart.Readings() {
		return data{}, fmt.Errorf("chart must be one of xbar-r, xbar-s, median-r, individuals, not %q", chart)
	}
	if chart == limits.Individuals {
		if values == nil || subgroups != nil {
			return data{}, errors.New("a chart of individuals takes values, one reading each")
		}
		return single(values), nil
	}
	if subgroups == nil || values != nil {
		return data{}, fmt.Errorf("a chart of kind %s takes subgroups", chart)
	}
	return data{subgroups: subgroups}, nil
}

func single(values []float64) data {
	d := data{single: true, subgroups: make([][]float64, len(values))}
	for i := range values {
		d.subgroups[i] = values[i : i+1]
	}
	return d
}

// where names a subgroup as the input has it.
func (d data) where(i int) string {
	if d.single {
		return fmt.Sprintf("values[%d]", i)
	}
	return fmt.Sprintf("subgroups[%d]", i)
}

func (d data) reduce(chart limits.Chart) ([]limits.Subgroup, error) {
	if len(d.subgroups) == 0 {
		return nil, errors.New("there are no readings")
	}
	out := make([]limits.Subgroup, len(d.subgroups))
	for i, r := range d.subgroups {
		s, err := limits.NewSubgroup(chart, r)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", d.where(i), err)
		}
		out[i] = s
	}
	return out, nil
}

type limitsIn struct {
	Chart     limits.Chart     `json:"chart"`
	Subgroups [][]float64      `json:"subgroups,omitempty"`
	Values    []float64        `json:"values,omitempty"`
	Estimator limits.Estimator `json:"estimator,omitempty"`
	Multiple  number           `json:"multiple"`
	Sigma     number           `json:"sigma"`
	Center    number           `json:"center"`
}

type limitsOut struct {
	Sigma      float64       `json:"sigma"`
	Center     float64       `json:"center"`
	Location   locationOut   `json:"location"`
	Dispersion dispersionOut `json:"dispersion"`
}

type locationOut struct {
	Center float64   `json:"center"`
	Lower  []number  `json:"lower"`
	Upper  []number  `json:"upper"`
	Points []float64 `json:"points"`
}

type dispersionOut struct {
	Center oneOrMany `json:"center"`
	Lower  []number  `json:"lower"`
	Upper  []number  `json:"upper"`
	Points []number  `json:"points"`
}

// oneOrMany is written as one number while all sizes are equal, else as a list.
type oneOrMany any

func chartLimits(in limitsIn) (limitsOut, error) {
	d, err := readings(in.Chart, in.Subgroups, in.Values)
	if err != nil {
		return limitsOut{}, err
	}
	subgroups, err := d.reduce(in.Chart)
	if err != nil {
		return limitsOut{}, err
	}
	std, err := standard(in, subgroups)
	if err != nil {
		return limitsOut{}, err
	}
	return draw(std, subgroups)
}

// standard is the given centre and sigma, or their estimate from the subgroups.
func standard(in limitsIn, subgroups []limits.Subgroup) (limits.Standard, error) {
	if err := positive("multiple", in.Multiple); err != nil {
		return limits.Standard{}, err
	}
	std := limits.Standard{Chart: in.Chart, Multiple: orDefault(in.Multiple, limits.DefaultMultiple)}
	switch {
	case (in.Sigma == nil) != (in.Center == nil):
		return std, errors.New("sigma and center are given together or not at all")
	case in.Sigma != nil && in.Estimator != "":
		return std, errors.New("with sigma and center given there is nothing to estimate; leave estimator out")
	case in.Sigma != nil:
		std.Sigma, std.Center = *in.Sigma, *in.Center
		return std, std.Check()
	}
	if err := checkEstimator(in.Chart, in.Estimator); err != nil {
		return std, err
	}
	e, err := limits.Estimate(in.Chart, in.Estimator, subgroups)
	if err != nil {
		return std, err
	}
	std.Sigma, std.Center = e.Sigma, e.Center
	return std, nil
}

func checkEstimator(chart limits.Chart, e limits.Estimator) error {
	if e == "" || chart.Allows(e) {
		return nil
	}
	var fits []string
	for _, other := range []limits.Estimator{limits.RBar, limits.SBar, limits.Pooled, limits.MRBar, limits.MedianMR} {
		if chart.Allows(other) {
			fits = append(fits, string(other))
		}
	}
	return fmt.Errorf("estimator must be one of %s on a chart of kind %s, not %q", strings.Join(fits, ", "), chart, e)
}

// draw gives every subgroup its points and limits.
func draw(std limits.Standard, subgroups []limits.Subgroup) (limitsOut, error) {
	table, err := std.Table()
	if err != nil {
		return limitsOut{}, err
	}
	out := limitsOut{Sigma: std.Sigma, Center: std.Center, Location: locationOut{Center: std.Center}}
	var centers []number
	alike := true
	for i, s := range subgroups {
		loc, disp, err := table.Bands(s.N)
		if err != nil {
			return limitsOut{}, fmt.Errorf("subgroups[%d]: %w", i, err)
		}
		alike = alike && s.N == subgroups[0].N
		out.Location.Lower = append(out.Location.Lower, present(loc.Lower))
		out.Location.Upper = append(out.Location.Upper, present(loc.Upper))
		out.Location.Points = append(out.Location.Points, s.Location)
		exists := disp.Exists()
		centers = append(centers, ifExists(disp.Center, exists))
		out.Dispersion.Lower = append(out.Dispersion.Lower, ifExists(disp.Lower, exists && disp.HasLower()))
		out.Dispersion.Upper = append(out.Dispersion.Upper, ifExists(disp.Upper, exists && disp.HasUpper()))
		var before *limits.Subgroup
		if i > 0 {
			before = &subgroups[i-1]
		}
		out.Dispersion.Points = append(out.Dispersion.Points, ifExists(std.Chart.DispersionPoint(before, s)))
	}
	if alike {
		out.Dispersion.Center = centers[0]
	} else {
		out.Dispersion.Center = centers
	}
	return out, nil
}

type countsIn struct {
	Chart    limits.Chart `json:"chart"`
	Counts   []int        `json:"counts"`
	Sizes    []float64    `json:"sizes,omitempty"`
	Limits   string       `json:"limits,omitempty"`
	Multiple number       `json:"multiple"`
	Tail     number       `json:"tail"`
	Center   number       `json:"center"`
}

type countsOut struct {
	Center  float64   `json:"center"`
	Points  []float64 `json:"points"`
	Lower   []number  `json:"lower"`
	Upper   []number  `json:"upper"`
	Between number    `json:"between"`
}

func counts(in countsIn) (countsOut, error) {
	std, err := countStandard(in)
	if err != nil {
		return countsOut{}, err
	}
	out := countsOut{Center: std.Center}
	if laney(in.Chart) {
		out.Between = some(std.Between)
	}
	bands := map[float64]limits.Band{}
	for i, c := range in.Counts {
		size := 1.0
		if in.Chart != limits.C {
			size = in.Sizes[i]
		}
		point, err := std.Point(c, size)
		if err != nil {
			return countsOut{}, fmt.Errorf("counts[%d]: %w", i, err)
		}
		band, known := bands[size]
		if !known {
			if len(bands) == maxSizes {
				return countsOut{}, fmt.Errorf("at most %d different sizes are taken", maxSizes)
			}
			if band, err = std.Band(size); err != nil {
				return countsOut{}, fmt.Errorf("sizes[%d]: %w", i, err)
			}
			bands[size] = band
		}
		out.Points = append(out.Points, point)
		out.Lower = append(out.Lower, present(band.Lower))
		out.Upper = append(out.Upper, present(band.Upper))
	}
	return out, nil
}

// maxSizes bounds the number of exact limits that are searched.
const maxSizes = 20_000

func laney(c limits.Chart) bool { return c == limits.LaneyP || c == limits.LaneyU }

// countStandard is the standard by which the counts are judged: centre given or
// estimated, limits by sigma or by probability.
func countStandard(in countsIn) (limits.CountStandard, error) {
	none := limits.CountStandard{}
	if !in.Chart.Counts() {
		return none, fmt.Errorf("chart must be one of p, np, c, u, laney-p, laney-u, not %q", in.Chart)
	}
	if len(in.Counts) == 0 {
		return none, errors.New("counts are empty")
	}
	if in.Chart == limits.C && in.Sizes != nil {
		return none, errors.New("a c chart has no sizes: every count is of one unit of constant size")
	}
	if in.Chart != limits.C {
		if err := sameLength("counts", len(in.Counts), "sizes", len(in.Sizes)); err != nil {
			return none, err
		}
	}
	if in.Chart == limits.NP && slices.ContainsFunc(in.Sizes, func(s float64) bool { return s != in.Sizes[0] }) {
		return none, errors.New("an np chart needs equal sizes; take a p chart where they differ")
	}
	for name, x := range map[string]number{"multiple": in.Multiple, "tail": in.Tail} {
		if err := positive(name, x); err != nil {
			return none, err
		}
	}
	probability := in.Limits == "probability"
	switch {
	case in.Limits != "" && in.Limits != "sigma" && !probability:
		return none, fmt.Errorf("limits must be sigma or probability, not %q", in.Limits)
	case in.Tail != nil && (!probability || *in.Tail >= 0.5):
		return none, errors.New("tail belongs to limits of kind probability and lies below 0.5")
	case in.Multiple != nil && probability:
		return none, errors.New("multiple belongs to limits of kind sigma; give tail instead")
	case probability && laney(in.Chart):
		return none, errors.New("the charts of Laney have sigma limits only")
	}
	std := limits.CountStandard{Chart: in.Chart}
	var err error
	switch {
	case in.Center == nil:
		std, err = limits.EstimateCounts(in.Chart, in.Counts, in.Sizes)
	case laney(in.Chart):
		std.Center = *in.Center
		std, err = std.Laney(in.Counts, in.Sizes)
	default:
		std.Center = *in.Center
	}
	if err != nil {
		return none, err
	}
	std.Multiple = orDefault(in.Multiple, 0)
	std.Probability, std.Tail = probability, orDefault(in.Tail, 0)
	return std, nil
}
