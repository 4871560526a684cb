package capability_test

import (
	"fmt"
	"math"
	"testing"

	"holdfast/internal/spc/capability"
	"holdfast/internal/spc/limits"
)

// bounds as the file prints them.
type bounds struct {
	TwoSided     [2]float64 `json:"two_sided"`
	Lower, Upper float64
	SE           float64 `json:"standard_error"`
}

func (b bounds) compare(t *testing.T, what string, got capability.Bounds, relative float64) {
	t.Helper()
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"interval low", got.Interval.Low, b.TwoSided[0]},
		{"interval high", got.Interval.High, b.TwoSided[1]},
		{"lower bound", got.LowerBound, b.Lower},
		{"upper bound", got.UpperBound, b.Upper},
	} {
		if !within(c.got, c.want, relative) {
			t.Errorf("%s: %s %.13g, want %.13g", what, c.name, c.got, c.want)
		}
	}
}

// Source: chi-square quantiles of a general-purpose scientific library.
func TestCpBoundsAgainstChiSquare(t *testing.T) {
	t.Parallel()
	var file struct {
		CpBounds struct {
			Cases []struct {
				N              int
				Cp, Confidence float64
				bounds
			}
		} `json:"cp_bounds"`
	}
	load(t, "capability.json", &file)
	if len(file.CpBounds.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.CpBounds.Cases {
		got, err := capability.CpBounds(c.Cp, float64(c.N-1), c.Confidence)
		if err != nil {
			t.Fatal(err)
		}
		c.compare(t, fmt.Sprintf("n %d, %g", c.N, c.Confidence), got, 1e-11)
	}
}

// Source: Montgomery, Introduction to Statistical Quality Control (from memory): the
// interval is printed to two decimals from Cp rounded to 2.29.
func TestCpIntervalAsPrinted(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ cp, low, high, tolerance float64 }{
		{2.29, 1.57, 3.01, 0.005},
		{2.29, 1.56787927642, 3.01121489117, 1e-10},
		{24 / (6 * 1.75), 1.56494500454, 3.00557942974, 1e-10},
	} {
		got, err := capability.CpBounds(c.cp, 19, 0.95)
		if err != nil || math.Abs(got.Interval.Low-c.low) > c.tolerance || math.Abs(got.Interval.High-c.high) > c.tolerance {
			t.Errorf("Cp %g: %+v, %v; want %g to %g", c.cp, got.Interval, err, c.low, c.high)
		}
	}
}

// Source: normal quantiles; noncentral t by quadrature over the chi variable, checked
// with a general-purpose scientific library.
func TestCpkBoundsBothWays(t *testing.T) {
	t.Parallel()
	var file struct {
		CpkBounds struct {
			Cases []struct {
				N                 int
				Index, Confidence float64
				Bissell           bounds `json:"bissell_cpk"`
				Exact             bounds `json:"exact_one_sided_index"`
			}
		} `json:"cpk_bounds"`
	}
	load(t, "capability.json", &file)
	if len(file.CpkBounds.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.CpkBounds.Cases {
		name := fmt.Sprintf("n %d, %g, %g", c.N, c.Index, c.Confidence)
		got, se, err := capability.CpkBounds(c.Index, c.N, float64(c.N-1), c.Confidence)
		if err != nil || !agrees(se, c.Bissell.SE) {
			t.Errorf("%s: standard error %.13g, %v; want %.13g", name, se, err, c.Bissell.SE)
		}
		c.Bissell.compare(t, name, got, 1e-11)
		exact, err := capability.ExactBounds(c.Index, c.N, float64(c.N-1), c.Confidence)
		if err != nil {
			t.Fatal(err)
		}
		c.Exact.compare(t, name+" exact", exact, 1e-11)
	}
}

// Source: normal tail areas of a general-purpose scientific library; 2700 and 3.4 are
// the figures of the usual tables (common practice).
func TestExpectedPPM(t *testing.T) {
	t.Parallel()
	var file struct {
		PPM struct {
			Cases []struct {
				Mean, SD            float64
				LSL, USL            *float64
				Below, Above, Total float64
			}
		} `json:"ppm_normal"`
	}
	load(t, "capability.json", &file)
	if len(file.PPM.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.PPM.Cases {
		got, err := capability.NormalPPM(c.Mean, c.SD, capability.Specification{Lower: c.LSL, Upper: c.USL})
		if err != nil {
			t.Fatal(err)
		}
		total := 0.0
		for _, side := range []struct {
			name       string
			limit, got *float64
			want       float64
		}{{"below", c.LSL, got.Below, c.Below}, {"above", c.USL, got.Above, c.Above}} {
			if (side.got == nil) != (side.limit == nil) {
				t.Errorf("%s exists without its limit", side.name)
			}
			if side.got == nil {
				continue
			}
			total += *side.got
			if !within(*side.got, side.want, 3e-11) {
				t.Errorf("mean %g, s.d. %g: %s %.13g, want %.13g", c.Mean, c.SD, side.name, *side.got, side.want)
			}
		}
		if !within(total, c.Total, 3e-11) {
			t.Errorf("mean %g, s.d. %g: total %.13g, want %.13g", c.Mean, c.SD, total, c.Total)
		}
	}
	centred, _ := capability.NormalPPM(0, 1, capability.Specification{Lower: at(-3), Upper: at(3)})
	if math.Round((*centred.Below+*centred.Above)/100) != 27 {
		t.Errorf("Cp 1 centred: %g ppm, want 2700", *centred.Below+*centred.Above)
	}
	shifted, _ := capability.NormalPPM(1.5, 1, capability.Specification{Lower: at(-6), Upper: at(6)})
	if math.Abs(*shifted.Above-3.4) > 0.05 {
		t.Errorf("six sigma with a shift of 1.5: %g ppm, want 3.4", *shifted.Above)
	}
}

// indexCase is one data set of the file with its figures.
type indexCase struct {
	LSL, USL, Target float64
	Computed         struct {
		N               int
		Mean            float64
		SD              float64 `json:"sd_overall"`
		Pp, Ppk         float64
		Cpm             float64 `json:"cpm_s2_n_minus_1"`
		PPM             struct{ Below, Above, Total float64 }
		Expected        struct{ Below, Above, Total float64 } `json:"ppm_overall_normal"`
		ObservedOutside int                                   `json:"observed_outside"`
		Range           *within1                              `json:"within_range"`
		SDs             *within1                              `json:"within_sd"`
		Pooled          *within1                              `json:"within_pooled"`
	}
	Data any
}

type within1 struct {
	Sigma, Cp, Cpk float64
	PPM            struct{ Below, Above, Total float64 }
}

func indexCases(t *testing.T) []indexCase {
	var file struct {
		Indices struct{ Cases []indexCase }
	}
	load(t, "capability.json", &file)
	if len(file.Indices.Cases) != 3 {
		t.Fatalf("%d cases", len(file.Indices.Cases))
	}
	return file.Indices.Cases
}

func bursting(t testing.TB) []float64 {
	t.Helper()
	var file struct {
		Indices struct{ Cases []struct{ Data any } }
	}
	load(t, "capability.json", &file)
	var out []float64
	for _, v := range file.Indices.Cases[1].Data.([]any) {
		out = append(out, v.(float64))
	}
	return out
}

// Source: computed independently; data of Montgomery (from memory) and of NIST's
// Statistical Reference Datasets. The file's pooled sigma is the root mean variance
// without c4, so c4(101) is taken out again here.
func TestIndicesOfDataSets(t *testing.T) {
	t.Parallel()
	cases := indexCases(t)
	for i, data := range [][]capability.Subgroup{piston(t), capability.Singles(bursting(t)), capability.Singles(michelson(t))} {
		c := cases[i]
		spec := capability.Specification{Lower: &c.LSL, Upper: &c.USL, Target: &c.Target}
		s, err := capability.Assess(data, spec, capability.Options{})
		if err != nil {
			t.Fatal(err)
		}
		outside := math.Round((*s.Observed.Below + *s.Observed.Above) * float64(s.N) / 1e6)
		if s.N != c.Computed.N || int(outside) != c.Computed.ObservedOutside {
			t.Errorf("case %d: %d readings, %g outside; want %d, %d", i, s.N, outside, c.Computed.N, c.Computed.ObservedOutside)
		}
		for _, v := range []struct {
			name      string
			got, want float64
		}{
			{"mean", s.Mean, c.Computed.Mean},
			{"overall s.d.", s.SigmaOverall, c.Computed.SD},
			{"Pp", s.Pp.Value, c.Computed.Pp},
			{"Ppk", s.Ppk.Value, c.Computed.Ppk},
			{"Cpm", *s.Cpm, c.Computed.Cpm},
			{"ppm below", *s.Expected.Below, c.Computed.Expected.Below},
			{"ppm above", *s.Expected.Above, c.Computed.Expected.Above},
		} {
			// Means of data around 74 known to 1e-14 leave about ten digits of ppm.
			if !within(v.got, v.want, 2e-10) {
				t.Errorf("case %d: %s %.13g, want %.13g", i, v.name, v.got, v.want)
			}
		}
	}
	c := cases[0]
	spec := capability.Specification{Lower: &c.LSL, Upper: &c.USL}
	c4 := math.Sqrt(2.0/100) * gammaRatio(100)
	for estimator, want := range map[limits.Estimator]struct {
		*within1
		unbias float64
	}{
		limits.RBar:   {c.Computed.Range, 1},
		limits.SBar:   {c.Computed.SDs, 1},
		limits.Pooled: {c.Computed.Pooled, c4},
	} {
		s, err := capability.Assess(piston(t), spec, capability.Options{Estimator: estimator})
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range []struct {
			name      string
			got, want float64
		}{
			{"sigma", s.SigmaWithin * want.unbias, want.Sigma},
			{"Cp", s.Cp.Value / want.unbias, want.Cp},
			{"Cpk", s.Cpk.Value / want.unbias, want.Cpk},
		} {
			if !within(v.got, v.want, 2e-11) {
				t.Errorf("%s: %s %.13g, want %.13g", estimator, v.name, v.got, v.want)
			}
		}
		ppm, err := capability.NormalPPM(s.Mean, s.SigmaWithin*want.unbias, spec)
		if err != nil || !within(*ppm.Below, want.PPM.Below, 2e-9) || !within(*ppm.Above, want.PPM.Above, 2e-9) {
			t.Errorf("%s: ppm %.12g and %.12g, %v; want %+v", estimator, *ppm.Below, *ppm.Above, err, want.PPM)
		}
	}
}

// gammaRatio is Γ((ν+1)/2)/Γ(ν/2).
func gammaRatio(nu float64) float64 {
	a, _ := math.Lgamma((nu + 1) / 2)
	b, _ := math.Lgamma(nu / 2)
	return math.Exp(a - b)
}

// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 6.1.6 (from
// memory): limits 8 and 20, mean 16, s.d. 2.
func TestHandbookIndices(t *testing.T) {
	t.Parallel()
	var file struct {
		Examples []struct {
			Section    string
			Parameters struct{ USL, LSL, Mean, S float64 }
			Published  struct{ Cp, Cpk float64 }
		}
	}
	load(t, "nist_handbook.json", &file)
	e := file.Examples[0]
	if e.Section != "6.1.6" {
		t.Fatal("other example")
	}
	half := e.Parameters.S / math.Sqrt2
	s, err := capability.Assess(capability.Singles([]float64{e.Parameters.Mean - half, e.Parameters.Mean + half}),
		capability.Specification{Lower: &e.Parameters.LSL, Upper: &e.Parameters.USL}, capability.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.Pp.Value-e.Published.Cp) > 5e-5 || math.Abs(s.Ppk.Value-e.Published.Cpk) > 5e-5 {
		t.Errorf("Pp %g, Ppk %g; want %g, %g", s.Pp.Value, s.Ppk.Value, e.Published.Cp, e.Published.Cpk)
	}
}

// percentileWant is one printed result of the percentile method.
type percentileWant struct {
	Distribution, Fit, Data string
	Shape, Scale            float64
	LogMean                 float64 `json:"log_mean"`
	LogSD                   float64 `json:"log_sd"`
	LogSDN                  float64 `json:"log_sd_divisor_n"`
	LSL, USL                *float64
	X0135                   float64 `json:"x_0.135"`
	X50                     float64 `json:"x_50"`
	X99865                  float64 `json:"x_99.865"`
	Pp, Ppk                 *float64
	Above                   float64 `json:"ppm_above"`
	Below                   float64 `json:"ppm_below"`
}

func (w percentileWant) compare(t *testing.T, f capability.Fit, relative float64) {
	t.Helper()
	got, err := f.Percentile(capability.Specification{Lower: w.LSL, Upper: w.USL})
	if err != nil {
		t.Fatal(err)
	}
	same(t, "X0.135", &got.X0135, &w.X0135, relative)
	same(t, "X50", &got.X50, &w.X50, relative)
	same(t, "X99.865", &got.X99865, &w.X99865, relative)
	same(t, "Pp", got.Pp, w.Pp, relative)
	same(t, "Ppk", got.Ppk, w.Ppk, relative)
	if w.LSL != nil {
		same(t, "ppm below", got.Expected.Below, &w.Below, 10*relative)
	}
	if w.USL != nil {
		same(t, "ppm above", got.Expected.Above, &w.Above, 10*relative)
	}
}

// Source: exact quantiles of the named distributions, computed independently.
func TestPercentileMethod(t *testing.T) {
	t.Parallel()
	var file struct {
		Percentile struct{ Cases []percentileWant } `json:"percentile_method"`
	}
	load(t, "capability.json", &file)
	if len(file.Percentile.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.Percentile.Cases {
		family, a, b := capability.Weibull, c.Shape, c.Scale
		if c.Distribution == "lognormal" {
			family, a, b = capability.Lognormal, c.LogMean, c.LogSD
		}
		f, err := capability.Known(family, a, b)
		if err != nil {
			t.Fatal(err)
		}
		c.compare(t, f, 1e-11)
	}
}

// dataSets are the readings of the file by name.
func dataSets(t testing.TB) map[string][]float64 {
	t.Helper()
	var file struct {
		DataSets struct {
			Lognormal []float64 `json:"lognormal_points"`
			Weibull   []float64 `json:"weibull_points"`
		} `json:"data_sets"`
	}
	load(t, "capability.json", &file)
	return map[string][]float64{
		"lognormal_points":                file.DataSets.Lognormal,
		"weibull_points":                  file.DataSets.Weibull,
		"glass container strengths above": bursting(t),
	}
}

// Source: maximum likelihood by a general-purpose scientific library, which stops
// about 1e-9 from the maximum.
func TestFittedDistributions(t *testing.T) {
	t.Parallel()
	var file struct {
		Fitted struct{ Cases []percentileWant } `json:"fitted_distributions"`
	}
	load(t, "capability.json", &file)
	if len(file.Fitted.Cases) != 2 {
		t.Fatal("no cases")
	}
	for _, c := range file.Fitted.Cases {
		f, err := capability.FitFamily(capability.Family(c.Fit), dataSets(t)[c.Data])
		if err != nil {
			t.Fatal(err)
		}
		want := []float64{c.Shape, c.Scale}
		if c.Fit == "lognormal" {
			want = []float64{c.LogMean, c.LogSDN}
		}
		for i, p := range f.Parameters {
			if !within(p.Value, want[i], 1e-11) {
				t.Errorf("%s: %s %.13g, want %.13g", c.Fit, p.Name, p.Value, want[i])
			}
		}
		c.compare(t, f, 1e-11)
	}
}

// Source: bounded maximisation by a general-purpose scientific library; λ is printed
// to six decimals, its interval to five.
func TestBoxCoxAgainstReference(t *testing.T) {
	t.Parallel()
	var file struct {
		BoxCox struct {
			Cases []struct {
				Data     string
				Lambda   float64    `json:"lambda_mle"`
				Interval [2]float64 `json:"interval_95"`
				LogLik   float64    `json:"loglik_at_mle"`
			}
		} `json:"box_cox"`
	}
	load(t, "capability.json", &file)
	if len(file.BoxCox.Cases) != 3 {
		t.Fatal("no cases")
	}
	for _, c := range file.BoxCox.Cases {
		b, err := capability.FitBoxCox(dataSets(t)[c.Data])
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(b.Lambda-c.Lambda) > 1.1e-6 || !agrees(b.LogLikelihood, c.LogLik) {
			t.Errorf("%s: λ %.8f, log likelihood %.11f; want %.6f, %.10f", c.Data, b.Lambda, b.LogLikelihood, c.Lambda, c.LogLik)
		}
		if b.Low == nil || b.High == nil || math.Abs(*b.Low-c.Interval[0]) > 1.1e-5 || math.Abs(*b.High-c.Interval[1]) > 1.1e-5 {
			t.Errorf("%s: interval %v %v, want %v", c.Data, b.Low, b.High, c.Interval)
		}
	}
}

// Source: noncentral t and an exact double integral, computed independently; Howe's
// approximation as in the NIST/SEMATECH e-Handbook, section 7.2.6.3.
func TestToleranceFactors(t *testing.T) {
	t.Parallel()
	var file struct {
		Factors struct {
			Cases []struct {
				N                    int
				Coverage, Confidence float64
				One                  float64 `json:"k_one_sided_exact"`
				Two                  float64 `json:"k_two_sided_exact"`
				Howe                 float64 `json:"k_two_sided_howe"`
			}
			Published struct {
				N                    int
				Coverage, Confidence float64
				One                  float64 `json:"k_one_sided"`
			}
		} `json:"normal_tolerance_factors"`
	}
	load(t, "capability.json", &file)
	if len(file.Factors.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range file.Factors.Cases {
		one, err := capability.OneSidedToleranceFactor(c.N, c.Coverage, c.Confidence)
		if err != nil || !within(one, c.One, 1e-11) {
			t.Errorf("one-sided, n %d: %.13g, %v; want %.13g", c.N, one, err, c.One)
		}
		two, err := capability.TwoSidedToleranceFactor(c.N, c.Coverage, c.Confidence)
		if err != nil || !within(two, c.Two, 1e-11) {
			t.Errorf("two-sided, n %d: %.13g, %v; want %.13g", c.N, two, err, c.Two)
		}
		if !within(two, c.Howe, 4e-3) {
			t.Errorf("two-sided, n %d: %g is far from Howe's %g", c.N, two, c.Howe)
		}
	}
	p := file.Factors.Published
	if one, err := capability.OneSidedToleranceFactor(p.N, p.Coverage, p.Confidence); err != nil || math.Abs(one-p.One) > 5e-4 {
		t.Errorf("one-sided as printed: %g, %v; want %g", one, err, p.One)
	}
}
