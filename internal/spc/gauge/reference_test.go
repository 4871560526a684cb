package gauge_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"strconv"
	"testing"

	"holdfast/internal/spc/gauge"
)

func load(t testing.TB, name string, into any) {
	t.Helper()
	raw, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

func within(got, want, relative float64) bool {
	return math.Abs(got-want) <= relative*math.Abs(want)
}

// near reports a figure that differs from the printed one; the file has eleven digits.
func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !within(got, want, 2e-10) && math.Abs(got-want) > 1e-15 {
		t.Errorf("%s = %.12g, want %.12g", what, got, want)
	}
}

func value(t *testing.T, what string, v *float64) float64 {
	t.Helper()
	if v == nil {
		t.Fatalf("%s does not exist", what)
	}
	return *v
}

func at(x float64) *float64 { return &x }

// tableRow is a row of the file's table of variance.
type tableRow struct {
	DF        int
	SS, MS, P float64
	FInter    float64 `json:"f_vs_interaction"`
	FRepeat   float64 `json:"f_vs_repeatability"`
	F         float64
}

// components as the file names them.
type components struct {
	Repeatability, Appraiser, Interaction, Reproducibility, GRR, Part, Total float64
}

func (c components) compare(t *testing.T, what string, got gauge.Components) {
	t.Helper()
	near(t, what+" repeatability", got.Repeatability, c.Repeatability)
	near(t, what+" appraiser", got.Appraiser, c.Appraiser)
	near(t, what+" interaction", got.Interaction, c.Interaction)
	near(t, what+" reproducibility", got.Reproducibility, c.Reproducibility)
	near(t, what+" gauge", got.Gauge, c.GRR)
	near(t, what+" part", got.Part, c.Part)
	near(t, what+" total", got.Total, c.Total)
}

// model is one of the two analyses of a study.
type model struct {
	Var, SD      components
	Contribution struct{ Repeatability, Reproducibility, GRR, Part float64 } `json:"percent_contribution"`
	Study        struct{ Repeatability, Reproducibility, GRR, Part float64 } `json:"percent_study_variation"`
	NDC          int
	NDCUncut     float64                                       `json:"ndc_unrounded"`
	Tolerance    *struct{ Multiplier, Tolerance, GRR float64 } `json:"percent_tolerance"`
	Table        map[string]tableRow
}

type study struct {
	Data  map[string][][]float64
	ANOVA struct {
		Table    map[string]tableRow
		With     model           `json:"with_interaction"`
		Pooled   model           `json:"interaction_pooled"`
		Decision map[string]bool `json:"pool_decision"`
	}
	Average struct {
		Means      map[string]float64 `json:"appraiser_means"`
		MeanRanges map[string]float64 `json:"appraiser_mean_ranges"`
		MeanRange  float64            `json:"mean_range"`
		XbarDiff   float64            `json:"xbar_diff"`
		PartRange  float64            `json:"part_range"`
		Exact      averageFigures     `json:"exact_constants"`
		Manual     averageFigures     `json:"manual_constants"`
	} `json:"average_and_range"`
	Published struct {
		Average  map[string]float64 `json:"average_and_range"`
		F        map[string]float64 `json:"f_against_repeatability"`
		ANOVA    map[string]tableRow
		PooledSD map[string]float64 `json:"pooled_sd"`
		Table    map[string]tableRow
		Var      map[string]float64
	}
}

type averageFigures struct {
	K1, K2, K3, EV, AV, GRR, PV, TV float64
	PercentEV                       float64 `json:"percent_ev"`
	PercentAV                       float64 `json:"percent_av"`
	PercentGRR                      float64 `json:"percent_grr"`
	PercentPV                       float64 `json:"percent_pv"`
	NDCUncut                        float64 `json:"ndc_unrounded"`
	NDC                             int
}

// crossed turns data[appraiser][trial][part] round.
func crossed(data map[string][][]float64, appraisers ...string) [][][]float64 {
	parts := len(data[appraisers[0]][0])
	out := make([][][]float64, parts)
	for i := range out {
		for _, a := range appraisers {
			var trials []float64
			for _, trial := range data[a] {
				trials = append(trials, trial[i])
			}
			out[i] = append(out[i], trials)
		}
	}
	return out
}

func studies(t testing.TB) (aiag, thermal study) {
	t.Helper()
	var file struct {
		AIAG    study `json:"crossed_10x3x3_aiag"`
		Thermal study `json:"crossed_10x3x3_thermal_impedance"`
	}
	load(t, "gauge_rr.json", &file)
	return file.AIAG, file.Thermal
}

// Sources: AIAG, Measurement Systems Analysis (from memory); Houf and Berman (1988) as
// printed in Vidakovic (2011); full digits computed independently.
func TestCrossedStudies(t *testing.T) {
	t.Parallel()
	aiag, thermal := studies(t)
	for _, s := range []struct {
		name  string
		study study
		m     [][][]float64
	}{
		{"ten parts", aiag, crossed(aiag.Data, "A", "B", "C")},
		{"thermal impedance", thermal, crossed(thermal.Data, "1", "2", "3")},
	} {
		for _, pooled := range []bool{false, true} {
			want, above := s.study.ANOVA.With, 1.0
			if pooled {
				want, above = s.study.ANOVA.Pooled, 0
			}
			name := fmt.Sprintf("%s, pooled %v", s.name, pooled)
			opt := gauge.Options{PoolAbove: &above, Tolerance: at(80)}
			got, err := gauge.Cross(s.m, opt)
			if err != nil {
				t.Fatal(err)
			}
			if got.Pooled != pooled || got.Categories != want.NDC {
				t.Errorf("%s: pooled %v, %d categories; want %d", name, got.Pooled, got.Categories, want.NDC)
			}
			near(t, name+" uncut categories", 1.41*math.Sqrt(got.Variance.Part/got.Variance.Gauge), want.NDCUncut)
			want.Var.compare(t, name, got.Variance)
			near(t, name+" share of repeatability", got.OfTotal.Repeatability, want.Study.Repeatability)
			near(t, name+" share of reproducibility", got.OfTotal.Reproducibility, want.Study.Reproducibility)
			near(t, name+" share of gauge", got.OfTotal.Gauge, want.Study.GRR)
			near(t, name+" share of parts", got.OfTotal.Part, want.Study.Part)
			near(t, name+" contribution of gauge", 100*got.Variance.Gauge/got.Variance.Total, want.Contribution.GRR)
			near(t, name+" contribution of repeatability", 100*got.Variance.Repeatability/got.Variance.Total, want.Contribution.Repeatability)
			near(t, name+" contribution of reproducibility", 100*got.Variance.Reproducibility/got.Variance.Total, want.Contribution.Reproducibility)
			near(t, name+" contribution of parts", 100*got.Variance.Part/got.Variance.Total, want.Contribution.Part)
			near(t, name+" s.d. of gauge", got.OfTolerance.Gauge*80/600, want.SD.GRR)
			near(t, name+" s.d. of parts", got.OfTolerance.Part*80/600, want.SD.Part)
			if want.Tolerance != nil {
				near(t, name+" share of tolerance", got.OfTolerance.Gauge, want.Tolerance.GRR)
			}
			for _, row := range got.Table {
				w, ok := s.study.ANOVA.Table[string(row.Source)]
				f := w.FInter
				if row.Source == gauge.Interaction {
					f = w.FRepeat
				}
				if pooled && (row.Source == gauge.Part || row.Source == gauge.Appraiser) {
					f, w.P = want.Table[string(row.Source)].F, want.Table[string(row.Source)].P
				}
				if row.Source == gauge.Pooled {
					w, ok = want.Table["pooled_error"]
				}
				if !ok || row.DF != w.DF {
					t.Errorf("%s %s: %d degrees of freedom, want %d", name, row.Source, row.DF, w.DF)
				}
				near(t, name+" SS "+string(row.Source), row.SS, w.SS)
				if row.Source != gauge.Total {
					near(t, name+" MS "+string(row.Source), value(t, "MS", row.MS), w.MS)
				}
				if f == 0 {
					if row.F != nil || row.P != nil {
						t.Errorf("%s: %s has an F", name, row.Source)
					}
					continue
				}
				near(t, name+" F "+string(row.Source), value(t, "F", row.F), f)
				// The smallest p values here are 1e-62: ten digits of F leave nine of p.
				if p := value(t, "P", row.P); !within(p, w.P, 2e-9) {
					t.Errorf("%s: p of %s %.12g, want %.12g", name, row.Source, p, w.P)
				}
			}
		}
		byDefault, err := gauge.Cross(s.m, gauge.Options{})
		if err != nil || byDefault.Pooled != s.study.ANOVA.Decision["at_0.25"] {
			t.Errorf("%s: pooled %v, %v", s.name, byDefault.Pooled, err)
		}
		if byDefault.OfTolerance != nil {
			t.Error("shares of a tolerance that was not given")
		}
		at5, err := gauge.Cross(s.m, gauge.Options{PoolAbove: at(0.05)})
		if err != nil || at5.Pooled != s.study.ANOVA.Decision["at_0.05"] {
			t.Errorf("%s at 0.05: pooled %v, %v", s.name, at5.Pooled, err)
		}
	}
}

// The figures as printed: AIAG's manual divides all by repeatability; Montgomery
// rounds to two decimals (both from memory).
func TestCrossedStudiesAsPrinted(t *testing.T) {
	t.Parallel()
	aiag, thermal := studies(t)
	got, err := gauge.Cross(crossed(aiag.Data, "A", "B", "C"), gauge.Options{})
	if err != nil {
		t.Fatal(err)
	}
	repeatability := *got.Table[3].MS
	for _, r := range got.Table {
		if w, ok := aiag.Published.ANOVA[string(r.Source)]; ok {
			if r.DF != w.DF || math.Abs(r.SS-w.SS) > 6e-5 || r.MS != nil && math.Abs(*r.MS-w.MS) > 6e-6 {
				t.Errorf("%s: %+v, printed %+v", r.Source, r, w)
			}
		}
		if f, ok := aiag.Published.F[string(r.Source)]; ok && math.Abs(*r.MS/repeatability-f) > 6e-3 {
			t.Errorf("%s: F against repeatability %g, printed %g", r.Source, *r.MS/repeatability, f)
		}
	}
	for name, v := range map[string]float64{"repeatability": got.Variance.Repeatability, "appraiser": got.Variance.Appraiser, "grr": got.Variance.Gauge, "part": got.Variance.Part} {
		// The printed 0.302373 comes from rounded variances.
		if w := aiag.Published.PooledSD[name]; w == 0 || math.Abs(math.Sqrt(v)-w) > 1.6e-6 {
			t.Errorf("pooled s.d. of %s %g, printed %g", name, math.Sqrt(v), w)
		}
	}
	got, err = gauge.Cross(crossed(thermal.Data, "1", "2", "3"), gauge.Options{})
	if err != nil {
		t.Fatal(err)
	}
	seen := 0
	for _, r := range got.Table {
		w, ok := thermal.Published.Table[string(r.Source)]
		if !ok {
			continue
		}
		seen++
		if r.DF != w.DF || math.Abs(r.SS-w.SS) > 6e-3 || math.Abs(*r.MS-w.MS) > 6e-3 || w.F != 0 && math.Abs(*r.F-w.F) > 6e-3 {
			t.Errorf("%s: %+v, printed %+v", r.Source, r, w)
		}
	}
	if seen != 4 {
		t.Errorf("%d rows compared", seen)
	}
	for name, v := range map[string]float64{"part": got.Variance.Part, "interaction": got.Variance.Interaction, "repeatability": got.Variance.Repeatability} {
		if w := thermal.Published.Var[name]; math.Abs(v-w) > 6e-3 {
			t.Errorf("component of %s %g, printed %g", name, v, w)
		}
	}
}

// Source: AIAG, Measurement Systems Analysis (from memory); the printed figures come
// from rounded factors and intermediates.
func TestAverageAndRange(t *testing.T) {
	t.Parallel()
	s, _ := studies(t)
	got, err := gauge.CrossByRange(crossed(s.Data, "A", "B", "C"), nil)
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range []string{"A", "B", "C"} {
		near(t, "mean of "+a, got.Mean[i], s.Average.Means[a])
		near(t, "mean range of "+a, got.MeanRanges[i], s.Average.MeanRanges[a])
	}
	w := s.Average.Exact
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"mean range", got.MeanRange, s.Average.MeanRange},
		{"appraiser span", got.AppraiserSpan, s.Average.XbarDiff},
		{"part span", got.PartSpan, s.Average.PartRange},
		{"K1", got.K1, w.K1}, {"K2", got.K2, w.K2}, {"K3", got.K3, w.K3},
		{"equipment", got.Equipment, w.EV}, {"appraiser", got.AppraiserSD, w.AV},
		{"gauge", got.Gauge, w.GRR}, {"part", got.PartSD, w.PV}, {"total", got.TotalSD, w.TV},
		{"% equipment", got.OfTotal.Repeatability, w.PercentEV}, {"% appraiser", got.OfTotal.Appraiser, w.PercentAV},
		{"% gauge", got.OfTotal.Gauge, w.PercentGRR}, {"% part", got.OfTotal.Part, w.PercentPV},
		{"categories", got.CategoriesUncut, w.NDCUncut},
	} {
		near(t, c.name, c.got, c.want)
	}
	if got.Categories != w.NDC {
		t.Errorf("%d categories, want %d", got.Categories, w.NDC)
	}
	// The manual's factors have four digits.
	m := s.Average.Manual
	for _, c := range [][2]float64{{got.K1, m.K1}, {got.K2, m.K2}, {got.K3, m.K3}} {
		if math.Abs(c[0]-c[1]) > 5e-5 {
			t.Errorf("factor %g, manual %g", c[0], c[1])
		}
	}
	for _, c := range [][2]float64{
		{got.Equipment, m.EV}, {got.AppraiserSD, m.AV}, {got.Gauge, m.GRR}, {got.PartSD, m.PV}, {got.TotalSD, m.TV},
		{got.OfTotal.Repeatability, m.PercentEV}, {got.OfTotal.Appraiser, m.PercentAV}, {got.OfTotal.Gauge, m.PercentGRR},
		{got.OfTotal.Part, m.PercentPV}, {got.CategoriesUncut, m.NDCUncut},
	} {
		if !within(c[0], c[1], 2e-4) {
			t.Errorf("%g, with the manual's factors %g", c[0], c[1])
		}
	}
	p := s.Published.Average
	for name, v := range map[string]float64{"ev": got.Equipment, "av": got.AppraiserSD, "grr": got.Gauge, "pv": got.PartSD, "tv": got.TotalSD} {
		if math.Abs(v-p[name]) > 1.6e-4 {
			t.Errorf("%s %g, printed %g", name, v, p[name])
		}
	}
	for name, v := range map[string]float64{"percent_ev": got.OfTotal.Repeatability, "percent_av": got.OfTotal.Appraiser, "percent_grr": got.OfTotal.Gauge, "percent_pv": got.OfTotal.Part} {
		if math.Abs(v-p[name]) > 0.02 {
			t.Errorf("%s %g, printed %g", name, v, p[name])
		}
	}
}

// Sources: Montgomery (20 parts twice) and AIAG (5 parts, two appraisers), both from
// memory; d2* computed independently.
func TestRangeStudies(t *testing.T) {
	t.Parallel()
	var file struct {
		Single struct {
			Data     [][]float64
			LSL, USL float64
			Computed struct {
				GrandMean float64 `json:"grand_mean"`
				MeanRange float64 `json:"mean_range"`
				Sigma     float64 `json:"sigma_gauge"`
				PT        float64 `json:"p_to_t_6sigma"`
				VarTotal  float64 `json:"var_total"`
				VarPart   float64 `json:"var_part"`
			}
		} `json:"one_gauge_20_parts_2_readings"`
		Quick struct {
			Data      map[string][]float64
			ProcessSD float64 `json:"process_sd"`
			Computed  struct {
				MeanRange  float64 `json:"mean_range"`
				D2Star     float64 `json:"d2_star"`
				GRR        float64
				PercentGRR float64 `json:"percent_grr"`
			}
			Published struct {
				D2Star float64 `json:"d2_star"`
				GRR    float64
			}
		} `json:"range_method_5x2"`
		D2Star struct {
			Cases []struct {
				N, Subgroups int
				D2Star       float64 `json:"d2_star"`
			}
		} `json:"d2_star"`
	}
	load(t, "gauge_rr.json", &file)
	r, err := gauge.RangeOverD2(file.Single.Data)
	if err != nil {
		t.Fatal(err)
	}
	w := file.Single.Computed
	near(t, "mean range", r.MeanRange, w.MeanRange)
	near(t, "sigma", r.Gauge, w.Sigma)
	near(t, "share of tolerance", 6*r.Gauge/(file.Single.USL-file.Single.LSL), w.PT)
	one, err := gauge.Levels(file.Single.Data)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "total variance", one.Total.SS/float64(one.Total.DF), w.VarTotal)
	near(t, "part variance", one.Total.SS/float64(one.Total.DF)-r.Gauge*r.Gauge, w.VarPart)

	var parts [][]float64
	for i := range file.Quick.Data["A"] {
		parts = append(parts, []float64{file.Quick.Data["A"][i], file.Quick.Data["B"][i]})
	}
	q, err := gauge.QuickRange(parts)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "quick mean range", q.MeanRange, file.Quick.Computed.MeanRange)
	near(t, "quick d2*", q.Factor, file.Quick.Computed.D2Star)
	near(t, "quick gauge", q.Gauge, file.Quick.Computed.GRR)
	near(t, "quick share", 100*q.Gauge/file.Quick.ProcessSD, file.Quick.Computed.PercentGRR)
	if math.Abs(q.Factor-file.Quick.Published.D2Star) > 5e-3 || math.Abs(q.Gauge-file.Quick.Published.GRR) > 5e-5 {
		t.Errorf("quick study %+v, printed %+v", q, file.Quick.Published)
	}
	if len(file.D2Star.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.D2Star.Cases {
		got, err := gauge.D2Star(c.N, c.Subgroups)
		if err != nil {
			t.Fatal(err)
		}
		near(t, fmt.Sprintf("d2*(%d, %d)", c.N, c.Subgroups), got, c.D2Star)
	}
}

// Source: NIST Statistical Reference Datasets, certified to 15 digits. AtmWtAg has
// eight constant leading digits, so its readings as numbers keep nine.
func TestCertifiedOneWayAnalyses(t *testing.T) {
	t.Parallel()
	var file struct {
		Cases []struct {
			Dataset   string
			Level     []int
			Y         []string `json:"y_text"`
			Certified map[string]string
			Exact     struct {
				DFBetween int    `json:"df_between"`
				DFWithin  int    `json:"df_within"`
				Component string `json:"between_variance_component"`
			}
		}
	}
	load(t, "nist_strd_anova.json", &file)
	if len(file.Cases) != 2 {
		t.Fatal("no cases")
	}
	number := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	for _, c := range file.Cases {
		var levels [][]float64
		for i, l := range c.Level {
			if l > len(levels) {
				levels = append(levels, nil)
			}
			levels[l-1] = append(levels[l-1], number(c.Y[i]))
		}
		got, err := gauge.Levels(levels)
		if err != nil {
			t.Fatal(err)
		}
		digits := 1e-12
		if c.Dataset == "AtmWtAg" {
			digits = 1e-9
		}
		if got.Between.DF != c.Exact.DFBetween || got.Within.DF != c.Exact.DFWithin {
			t.Errorf("%s: degrees of freedom %d and %d", c.Dataset, got.Between.DF, got.Within.DF)
		}
		for name, v := range map[string]float64{
			"ss_between": got.Between.SS, "ss_within": got.Within.SS, "ms_between": *got.Between.MS,
			"ms_within": *got.Within.MS, "f": *got.Between.F, "r_squared": got.RSquared, "residual_sd": got.WithinSD,
		} {
			if want := number(c.Certified[name]); !within(v, want, digits) {
				t.Errorf("%s %s = %.15g, certified %.15g", c.Dataset, name, v, want)
			}
		}
		if want := number(c.Exact.Component); !within(got.BetweenVariance, want, 10*digits) {
			t.Errorf("%s component %.15g, want %.15g", c.Dataset, got.BetweenVariance, want)
		}
	}
}
