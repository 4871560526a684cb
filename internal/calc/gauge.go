package calc

import (
	"errors"
	"fmt"

	"holdfast/internal/spc/gauge"
)

var gauges = []Topic{
	topic("gauge", "A crossed gauge study, parts by appraisers by trials, by analysis of variance.",
		`{"measurements": [[[10.1, 10.0], [10.2, 10.2]], [[10.6, 10.7], [10.7, 10.9]], [[9.6, 9.5], [9.6, 9.8]], [[10.3, 10.4], [10.4, 10.3]]], "tolerance": 3}`, gaugeStudy),
	topic("gauge-range", "The same study by averages and ranges, as it is done with paper.",
		`{"measurements": [[[10.1, 10.0], [10.2, 10.2]], [[10.6, 10.7], [10.7, 10.9]], [[9.6, 9.5], [9.6, 9.8]]], "tolerance": 3}`, gaugeRange),
	topic("gauge-quick", "The spread of a gauge from the ranges of repeated readings of parts.",
		`{"readings": [[0.85, 0.80], [0.75, 0.70], [1.00, 0.95], [0.45, 0.55], [0.50, 0.60]]}`, gaugeQuick),
	topic("gauge-bias", "Bias of a gauge from repeated readings of one master, with Cg and Cgk.",
		`{"x": [10.02, 10.01, 9.99, 10.03, 10.01], "reference": 10, "tolerance": 0.6}`, gaugeBias),
	topic("linearity", "How the bias of a gauge changes over its range.",
		`{"reference": [2, 4, 6], "measured": [[2.1, 2.0, 2.2], [4.0, 4.1, 4.0], [5.9, 5.8, 6.0]]}`, linearity),
	topic("agreement", "Agreement of people who sort: kappa of all together and of each two.",
		`{"ratings": [["good", "good"], ["bad", "bad"], ["good", "bad"], ["good", "good"], ["bad", "bad"]]}`, agreement),
	topic("inspection-errors", "How often good items are rejected and bad ones missed.",
		`{"rejected": [true, false, false, true, false], "nonconforming": [true, false, true, false, false]}`, inspectionErrors),
	topic("anova", "One-way analysis of variance: several levels, each with its own readings.",
		`{"levels": [[6.9, 5.4, 5.8], [8.3, 6.8, 7.8], [8.0, 10.5, 8.1]]}`, anova),
}

type gaugeIn struct {
	Measurements [][][]float64 `json:"measurements"`
	Tolerance    number        `json:"tolerance"`
	PoolAbove    number        `json:"pool_above"`
}

type gaugeOut struct {
	Anova            []anovaRow  `json:"anova"`
	Variance         components  `json:"variance"`
	PercentTotal     components  `json:"percent_of_total"`
	PercentTolerance *components `json:"percent_tolerance"`
	Categories       int         `json:"categories"`
	Pooled           bool        `json:"pooled"`
}

type anovaRow struct {
	Source string  `json:"source"`
	DF     int     `json:"df"`
	SS     float64 `json:"ss"`
	MS     number  `json:"ms"`
	F      number  `json:"f"`
	P      number  `json:"p"`
}

func writeRow(r gauge.Row) anovaRow {
	return anovaRow{Source: string(r.Source), DF: r.DF, SS: r.SS, MS: r.MS, F: r.F, P: r.P}
}

type components struct {
	Repeatability   float64 `json:"repeatability"`
	Appraiser       float64 `json:"appraiser"`
	Interaction     float64 `json:"interaction"`
	Reproducibility float64 `json:"reproducibility"`
	Gauge           float64 `json:"gauge"`
	Part            float64 `json:"part"`
	Total           float64 `json:"total"`
}

func gaugeStudy(in gaugeIn) (gaugeOut, error) {
	if err := positive("tolerance", in.Tolerance); err != nil {
		return gaugeOut{}, err
	}
	if in.PoolAbove != nil && (*in.PoolAbove < 0 || *in.PoolAbove > 1) {
		return gaugeOut{}, fmt.Errorf("pool_above is a probability, 0 to 1, not %v", *in.PoolAbove)
	}
	c, err := gauge.Cross(in.Measurements, gauge.Options{Tolerance: in.Tolerance, PoolAbove: in.PoolAbove})
	if err != nil {
		return gaugeOut{}, err
	}
	out := gaugeOut{
		Variance: components(c.Variance), PercentTotal: components(c.OfTotal), PercentTolerance: (*components)(c.OfTolerance),
		Categories: c.Categories, Pooled: c.Pooled,
	}
	for _, r := range c.Table {
		out.Anova = append(out.Anova, writeRow(r))
	}
	return out, nil
}

type gaugeRangeIn struct {
	Measurements [][][]float64 `json:"measurements"`
	Tolerance    number        `json:"tolerance"`
}

type gaugeRangeOut struct {
	MeanRange        float64     `json:"mean_range"`
	AppraiserSpan    float64     `json:"appraiser_span"`
	PartSpan         float64     `json:"part_span"`
	SD               rangeSDOut  `json:"sd"`
	PercentTotal     components  `json:"percent_of_total"`
	PercentTolerance *components `json:"percent_tolerance"`
	Categories       int         `json:"categories"`
	CategoriesUncut  float64     `json:"categories_uncut"`
}

// rangeSDOut has no interaction: averages and ranges cannot see it.
type rangeSDOut struct {
	Repeatability float64 `json:"repeatability"`
	Appraiser     float64 `json:"appraiser"`
	Gauge         float64 `json:"gauge"`
	Part          float64 `json:"part"`
	Total         float64 `json:"total"`
}

func gaugeRange(in gaugeRangeIn) (gaugeRangeOut, error) {
	if err := positive("tolerance", in.Tolerance); err != nil {
		return gaugeRangeOut{}, err
	}
	a, err := gauge.CrossByRange(in.Measurements, in.Tolerance)
	if err != nil {
		return gaugeRangeOut{}, err
	}
	return gaugeRangeOut{
		MeanRange: a.MeanRange, AppraiserSpan: a.AppraiserSpan, PartSpan: a.PartSpan,
		SD:           rangeSDOut{Repeatability: a.Equipment, Appraiser: a.AppraiserSD, Gauge: a.Gauge, Part: a.PartSD, Total: a.TotalSD},
		PercentTotal: components(a.OfTotal), PercentTolerance: (*components)(a.OfTolerance),
		Categories: a.Categories, CategoriesUncut: a.CategoriesUncut,
	}, nil
}

type gaugeQuickIn struct {
	Readings [][]float64 `json:"readings"`
}

// gaugeQuickOut divides the mean range by d2*, the form for a few parts, and by d2, the
// form for many.
type gaugeQuickOut struct {
	MeanRange float64 `json:"mean_range"`
	D2Star    float64 `json:"d2_star"`
	SDFew     float64 `json:"sd_few_parts"`
	D2        float64 `json:"d2"`
	SDMany    float64 `json:"sd_many_parts"`
}

func gaugeQuick(in gaugeQuickIn) (gaugeQuickOut, error) {
	few, err := gauge.QuickRange(in.Readings)
	if err != nil {
		return gaugeQuickOut{}, err
	}
	many, err := gauge.RangeOverD2(in.Readings)
	return gaugeQuickOut{MeanRange: few.MeanRange, D2Star: few.Factor, SDFew: few.Gauge, D2: many.Factor, SDMany: many.Gauge}, err
}

type gaugeBiasIn struct {
	X         []float64 `json:"x"`
	Reference float64   `json:"reference"`
	Tolerance number    `json:"tolerance"`
}

type gaugeBiasOut struct {
	Bias     float64 `json:"bias"`
	SD       float64 `json:"sd"`
	T        float64 `json:"t"`
	P        float64 `json:"p"`
	Cg       number  `json:"cg"`
	Cgk      number  `json:"cgk"`
	Interval pair    `json:"interval"`
}

func gaugeBias(in gaugeBiasIn) (gaugeBiasOut, error) {
	if err := positive("tolerance", in.Tolerance); err != nil {
		return gaugeBiasOut{}, err
	}
	b, err := gauge.MeasureBias(in.X, in.Reference, in.Tolerance)
	return gaugeBiasOut{
		Bias: plain(b.Bias), SD: b.SD, T: plain(b.T), P: b.P, Cg: b.Cg, Cgk: b.Cgk, Interval: pair{plain(b.Low), plain(b.High)},
	}, err
}

type linearityIn struct {
	Reference []float64   `json:"reference"`
	Measured  [][]float64 `json:"measured"`
}

type linearityOut struct {
	Slope      float64   `json:"slope"`
	Intercept  float64   `json:"intercept"`
	R2         float64   `json:"r2"`
	PSlope     float64   `json:"p_slope"`
	PIntercept float64   `json:"p_intercept"`
	TSlope     number    `json:"t_slope"`
	TIntercept number    `json:"t_intercept"`
	ResidualSD float64   `json:"residual_sd"`
	DF         int       `json:"df"`
	MeanBias   []float64 `json:"mean_bias"`
}

func linearity(in linearityIn) (linearityOut, error) {
	l, err := gauge.MeasureLinearity(in.Reference, in.Measured)
	return linearityOut{
		Slope: plain(l.Slope), Intercept: plain(l.Intercept), R2: l.RSquared, PSlope: l.PSlope, PIntercept: l.PIntercept,
		TSlope: l.TSlope, TIntercept: l.TIntercept, ResidualSD: l.ResidualSD, DF: l.DF, MeanBias: list(l.MeanBias),
	}, err
}

// label is what a rater calls an item: a text, a number or true and false.
type label string

func (l *label) UnmarshalJSON(b []byte) error {
	switch string(b[:1]) {
	case "[", "{", "n":
		return errors.New("a rating must be a text, a number, true or false")
	}
	*l = label(b)
	return nil
}

type agreementIn struct {
	Ratings [][]label `json:"ratings"`
}

type agreementOut struct {
	Fleiss float64    `json:"fleiss_kappa"`
	Cohen  [][]number `json:"cohen_kappa"`
}

// maxRaters bounds the table of pairs.
const maxRaters = 200

func agreement(in agreementIn) (agreementOut, error) {
	ratings := make([][]string, len(in.Ratings))
	for i, item := range in.Ratings {
		if len(item) > maxRaters {
			return agreementOut{}, fmt.Errorf("ratings[%d] has %d raters, at most %d are taken", i, len(item), maxRaters)
		}
		for _, r := range item {
			ratings[i] = append(ratings[i], string(r))
		}
	}
	a, err := gauge.Agree(ratings)
	return agreementOut{Fleiss: plain(a.Fleiss), Cohen: list(a.Cohen)}, err
}

type inspectionErrorsIn struct {
	Rejected      []bool `json:"rejected"`
	Nonconforming []bool `json:"nonconforming"`
}

type inspectionErrorsOut struct {
	FalseReject *rateOut `json:"false_reject"`
	Miss        *rateOut `json:"miss"`
}

type rateOut struct {
	Value    float64 `json:"value"`
	Interval pair    `json:"interval"`
	Of       int     `json:"of"`
}

func inspectionErrors(in inspectionErrorsIn) (inspectionErrorsOut, error) {
	e, err := gauge.InspectionErrors(in.Rejected, in.Nonconforming)
	if err != nil {
		return inspectionErrorsOut{}, err
	}
	write := func(r *gauge.Rate) *rateOut {
		if r == nil {
			return nil
		}
		return &rateOut{Value: r.Value, Interval: pair{r.Low, r.High}, Of: r.Of}
	}
	return inspectionErrorsOut{FalseReject: write(e.FalseReject), Miss: write(e.Miss)}, nil
}

type anovaIn struct {
	Levels [][]float64 `json:"levels"`
}

type anovaOut struct {
	Anova           []anovaRow `json:"anova"`
	R2              float64    `json:"r2"`
	WithinSD        float64    `json:"within_sd"`
	BetweenVariance float64    `json:"between_variance"`
}

func anova(in anovaIn) (anovaOut, error) {
	o, err := gauge.Levels(in.Levels)
	if err != nil {
		return anovaOut{}, err
	}
	out := anovaOut{R2: o.RSquared, WithinSD: o.WithinSD, BetweenVariance: o.BetweenVariance}
	for i, r := range []gauge.Row{o.Between, o.Within, o.Total} {
		row := writeRow(r)
		row.Source = []string{"between", "within", "total"}[i]
		out.Anova = append(out.Anova, row)
	}
	return out, nil
}
