package limits_test

import (
	"errors"
	"math"
	"testing"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/sample"
)

func pistonRings(t *testing.T) (data [][]float64, computed map[string]any) {
	t.Helper()
	var file struct {
		Cases []struct {
			Data     [][]float64
			Computed map[string]any
		}
	}
	load(t, "variables_charts.json", &file)
	return file.Cases[0].Data, file.Cases[0].Computed
}

func reduce(t *testing.T, chart limits.Chart, data [][]float64) []limits.Subgroup {
	t.Helper()
	var out []limits.Subgroup
	for _, readings := range data {
		s, err := limits.NewSubgroup(chart, readings)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, s)
	}
	return out
}

func singles(t *testing.T, x []float64) []limits.Subgroup {
	t.Helper()
	var data [][]float64
	for _, v := range x {
		data = append(data, []float64{v})
	}
	return reduce(t, limits.Individuals, data)
}

// Montgomery, piston rings: printed figures from memory, full precision computed
// independently (testdata/variables_charts.json).
func TestMeanChartsOfPistonRings(t *testing.T) {
	t.Parallel()
	data, want := pistonRings(t)
	for _, c := range []struct {
		chart                       limits.Chart
		estimator                   limits.Estimator
		sigma, location, dispersion string
	}{
		{limits.XBarR, limits.RBar, "sigma_from_range", "xbar_limits_from_range", "range_limits"},
		{limits.XBarS, limits.SBar, "sigma_from_sd", "xbar_limits_from_sd", "sd_limits"},
	} {
		subgroups := reduce(t, c.chart, data)
		e, err := limits.Estimate(c.chart, c.estimator, subgroups)
		if err != nil {
			t.Fatal(err)
		}
		if !agrees(e.Center, want["grand_mean"].(float64), 0) || !agrees(e.Sigma, want[c.sigma].(float64), 0) {
			t.Errorf("%s: centre %.12g, sigma %.12g", c.chart, e.Center, e.Sigma)
		}
		location, dispersion, err := limits.Standard{Chart: c.chart, Center: e.Center, Sigma: e.Sigma}.Bands(5)
		if err != nil {
			t.Fatal(err)
		}
		edges := series(t, want[c.location])
		if !agrees(location.Lower, edges[0], 0) || !agrees(location.Upper, edges[1], 0) {
			t.Errorf("%s: location %.12g to %.12g, want %v", c.chart, location.Lower, location.Upper, edges)
		}
		edges = series(t, want[c.dispersion])
		if dispersion.HasLower() || !agrees(dispersion.Upper, edges[1], 0) {
			t.Errorf("%s: dispersion %.12g to %.12g, want none to %g", c.chart, dispersion.Lower, dispersion.Upper, edges[1])
		}
	}
	pooled, err := limits.Estimate(limits.XBarR, limits.Pooled, reduce(t, limits.XBarR, data))
	if err != nil {
		t.Fatal(err)
	}
	// The reference leaves c4 out of the pooled sigma; we do not.
	c4, err := factor.C4(101)
	if err != nil {
		t.Fatal(err)
	}
	if !agrees(pooled.Sigma*c4, want["sigma_pooled"].(float64), 0) || pooled.DF != 100 {
		t.Errorf("pooled sigma %.12g on %g degrees of freedom", pooled.Sigma, pooled.DF)
	}
}

// NIST/SEMATECH e-Handbook 6.3.2.2; the printed limits use d2 = 1.128.
func TestIndividualsOfFlowRate(t *testing.T) {
	t.Parallel()
	ex := handbook(t, "6.3.2.2")
	subgroups := singles(t, ex.Data)
	e, err := limits.Estimate(limits.Individuals, limits.MRBar, subgroups)
	if err != nil {
		t.Fatal(err)
	}
	location, dispersion, err := limits.Standard{Chart: limits.Individuals, Center: e.Center, Sigma: e.Sigma}.Bands(1)
	if err != nil {
		t.Fatal(err)
	}
	robust, err := limits.Estimate(limits.Individuals, limits.MedianMR, subgroups)
	if err != nil {
		t.Fatal(err)
	}
	for name, got := range map[string]float64{
		"center": e.Center, "sigma": e.Sigma, "ucl": location.Upper, "lcl": location.Lower,
		"mr_ucl": dispersion.Upper, "sigma_from_median_mr": robust.Sigma,
	} {
		if want := ex.Computed[name].(float64); !agrees(got, want, 0) {
			t.Errorf("%s = %.12g, want %.12g", name, got, want)
		}
	}
	for name, got := range map[string]float64{"ucl": location.Upper, "lcl": location.Lower} {
		if want := ex.Published[name].(float64); math.Abs(got-want) > 2e-3 {
			t.Errorf("%s = %.6g, printed %.6g with d2 rounded", name, got, want)
		}
	}
	if dispersion.HasLower() || e.Subgroups != 9 || e.Readings != 10 {
		t.Errorf("%+v, %+v", dispersion, e)
	}
}

func TestBandsOfEverySize(t *testing.T) {
	t.Parallel()
	for _, chart := range []limits.Chart{limits.XBarR, limits.XBarS, limits.MedianR} {
		s := limits.Standard{Chart: chart, Center: 12.5, Sigma: 0.004}
		location, dispersion, err := s.Bands(1)
		if err != nil || dispersion.Exists() || dispersion.HasUpper() || !agrees(location.Upper, 12.512, 0) {
			t.Errorf("%s, one reading: %+v, %+v, %v", chart, location, dispersion, err)
		}
		if z := dispersion.Z(1); !math.IsNaN(z) {
			t.Errorf("%s: z of a point that does not exist is %g", chart, z)
		}
		width := math.Inf(1)
		for n := 2; n <= 30; n++ {
			location, dispersion, err := s.Bands(n)
			if err != nil {
				t.Fatal(err)
			}
			if location.Upper-location.Lower >= width && (chart != limits.MedianR || n > 4) {
				t.Errorf("%s: limits do not narrow at n = %d", chart, n)
			}
			width = location.Upper - location.Lower
			if z := location.Z(location.Upper); math.Abs(z-3) > 1e-11 {
				t.Errorf("%s, n %d: z of the upper limit is %g", chart, n, z)
			}
			// Tables print a lower range limit from n = 7 on, an s limit from 6 on.
			first := 7
			if chart == limits.XBarS {
				first = 6
			}
			if dispersion.HasLower() != (n >= first) {
				t.Errorf("%s, n %d: lower limit %g", chart, n, dispersion.Lower)
			}
		}
	}
}

// Limits with equal tails: the probability beyond each is that of a normal
// statistic beyond the multiple, and z there is the multiple.
func TestProbabilityLimitsOfDispersion(t *testing.T) {
	t.Parallel()
	for _, chart := range []limits.Chart{limits.XBarR, limits.XBarS, limits.Individuals} {
		for _, n := range []int{2, 5, 12} {
			s := limits.Standard{Chart: chart, Sigma: 2, Multiple: 3, Probability: true}
			size := n
			if chart == limits.Individuals {
				size, n = 1, 2
			}
			_, d, err := s.Bands(size)
			if err != nil {
				t.Fatal(err)
			}
			cdf, survival := factor.RangeCDF, factor.RangeSurvival
			if chart == limits.XBarS {
				cdf, survival = factor.SDCDF, factor.SDSurvival
			}
			below, err1 := cdf(n, d.Lower/2)
			above, err2 := survival(n, d.Upper/2)
			const tail = 0.0013498980316301
			if err := errors.Join(err1, err2); err != nil || math.Abs(below-tail) > 1e-12 || math.Abs(above-tail) > 1e-12 {
				t.Errorf("%s n %d: tails %g and %g, %v", chart, n, below, above, err)
			}
			if math.Abs(d.Z(d.Upper)-3) > 1e-12 || math.Abs(d.Z(d.Lower)+3) > 1e-12 {
				t.Errorf("%s n %d: z at the limits %g, %g", chart, n, d.Z(d.Lower), d.Z(d.Upper))
			}
		}
	}
}

func TestTableIsTheStandard(t *testing.T) {
	t.Parallel()
	s := limits.Standard{Chart: limits.MedianR, Center: 1, Sigma: 0.1, Probability: true}
	table, err := s.Table()
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range []int{5, 3, 5, 1000, 4, 1, 1000} {
		l1, d1, err1 := s.Bands(n)
		l2, d2, err2 := table.Bands(n)
		if err1 != nil || err2 != nil || l1 != l2 || d1 != d2 {
			t.Errorf("n %d: %+v %+v %v; table %+v %+v %v", n, l1, d1, err1, l2, d2, err2)
		}
	}
	if _, _, err := table.Bands(1001); err == nil {
		t.Error("a subgroup of 1001 was accepted")
	}
}

func TestPointOnALimitIsInside(t *testing.T) {
	t.Parallel()
	location, _, err := limits.Standard{Chart: limits.Individuals, Center: 0.1, Sigma: 0.1}.Bands(1)
	if err != nil {
		t.Fatal(err)
	}
	for x, want := range map[float64]int{math.Nextafter(0.4, 1): 0, 0.4: 0, -0.2: 0, 0.400001: 1, -0.200001: -1} {
		if got := location.Outside(x); got != want {
			t.Errorf("Outside(%.17g) = %d, want %d", x, got, want)
		}
	}
}

func TestStandardsThatGiveNoLimits(t *testing.T) {
	t.Parallel()
	good := limits.Standard{Chart: limits.XBarR, Center: 1, Sigma: 1}
	for name, change := range map[string]func(*limits.Standard){
		"chart":    func(s *limits.Standard) { s.Chart = limits.P },
		"no chart": func(s *limits.Standard) { s.Chart = "" },
		"centre":   func(s *limits.Standard) { s.Center = math.NaN() },
		"sigma 0":  func(s *limits.Standard) { s.Sigma = 0 },
		"sigma":    func(s *limits.Standard) { s.Sigma = math.Inf(1) },
		"multiple": func(s *limits.Standard) { s.Multiple = -1 },
		"overflow": func(s *limits.Standard) { s.Sigma = 1e308 },
	} {
		s := good
		change(&s)
		if _, _, err := s.Bands(5); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, _, err := good.Bands(0); !errors.Is(err, limits.ErrInput) {
		t.Errorf("size 0: %v", err)
	}
	good.Chart = limits.Individuals
	if _, _, err := good.Bands(2); !errors.Is(err, limits.ErrInput) {
		t.Errorf("two individuals: %v", err)
	}
	if _, err := limits.NewSubgroup(limits.XBarR, []float64{1, math.NaN()}); !errors.Is(err, sample.ErrNotFinite) {
		t.Errorf("NaN reading: %v", err)
	}
	if _, err := limits.NewSubgroup(limits.Individuals, []float64{1, 2}); !errors.Is(err, limits.ErrInput) {
		t.Errorf("two readings in one individual: %v", err)
	}
}
