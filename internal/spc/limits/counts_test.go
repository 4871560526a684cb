package limits_test

import (
	"errors"
	"math"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
)

// countCase is one set of counts with the limits computed for it.
type countCase struct {
	chart    limits.Chart
	counts   []int
	sizes    []float64
	center   float64
	between  float64
	lcl, ucl []float64 // one entry: the same for all
	outside  []int     // from 1
}

func countCases(t *testing.T) map[string]countCase {
	t.Helper()
	type computed struct {
		Center  float64 `json:"center"`
		SigmaZ  float64 `json:"sigma_z"`
		LCL     any     `json:"lcl"`
		UCL     any     `json:"ucl"`
		Outside []int   `json:"rows_outside"`
	}
	type set struct {
		Data     []int
		Units    []float64
		Counts   []int
		D        []int
		Computed computed
	}
	var file struct {
		C  set `json:"c_chart_printed_circuit"`
		P  set `json:"p_chart_variable_n"`
		U  set `json:"u_chart_variable_n"`
		NP set `json:"np_chart"`
		LP set `json:"laney_p_prime"`
		LU set `json:"laney_u_prime"`
		PO set `json:"laney_p_prime_purchase_orders"`
	}
	load(t, "attributes.json", &file)
	// Sizes of proportions stand under "n", beside the wholly different "N".
	var sizes struct {
		P  struct{ N []float64 } `json:"p_chart_variable_n"`
		LP struct{ N []float64 } `json:"laney_p_prime"`
	}
	load(t, "attributes.json", &sizes)
	edges := func(v any) []float64 {
		if x, ok := v.(float64); ok {
			return []float64{x}
		}
		return series(t, v)
	}
	make := func(chart limits.Chart, counts []int, sizes []float64, c computed) countCase {
		return countCase{chart, counts, sizes, c.Center, c.SigmaZ, edges(c.LCL), edges(c.UCL), c.Outside}
	}
	return map[string]countCase{
		"printed circuits, Montgomery": make(limits.C, file.C.Data, nil, file.C.Computed),
		"purchase orders, Montgomery":  make(limits.P, file.P.D, sizes.P.N, file.P.Computed),
		"dyed cloth, Montgomery":       make(limits.U, file.U.Counts, file.U.Units, file.U.Computed),
		"wafers, NIST 6.3.3.2":         make(limits.NP, file.NP.D, slices.Repeat([]float64{50}, 30), file.NP.Computed),
		"Laney p', constructed":        make(limits.LaneyP, file.LP.D, sizes.LP.N, file.LP.Computed),
		"Laney u', constructed":        make(limits.LaneyU, file.LU.Counts, file.LU.Units, file.LU.Computed),
		"Laney p', purchase orders":    make(limits.LaneyP, file.P.D, sizes.P.N, file.PO.Computed),
	}
}

func TestCountCharts(t *testing.T) {
	t.Parallel()
	for name, c := range countCases(t) {
		s, err := limits.EstimateCounts(c.chart, c.counts, c.sizes)
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if !agrees(s.Center, c.center, 0) || !agrees(s.Between, c.between, 0) {
			t.Errorf("%s: centre %.12g, between %.12g; want %.12g, %.12g", name, s.Center, s.Between, c.center, c.between)
		}
		var outside []int
		for i, k := range c.counts {
			size := 0.0
			if c.sizes != nil {
				size = c.sizes[i]
			}
			b, err1 := s.Band(size)
			x, err2 := s.Point(k, size)
			if err := errors.Join(err1, err2); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			// The file writes an absent lower limit as 0.
			lcl, ucl := c.lcl[min(i, len(c.lcl)-1)], c.ucl[min(i, len(c.ucl)-1)]
			if b.HasLower() != (lcl > 0) || b.HasLower() && !agrees(b.Lower, lcl, 1e-13) || !agrees(b.Upper, ucl, 0) {
				t.Errorf("%s, %d: %g to %g, want %g to %g", name, i+1, b.Lower, b.Upper, lcl, ucl)
			}
			if b.Outside(x) != 0 {
				outside = append(outside, i+1)
			}
		}
		if !slices.Equal(outside, c.outside) {
			t.Errorf("%s: outside %v, want %v", name, outside, c.outside)
		}
	}
}

// NIST/SEMATECH e-Handbook 6.3.3.1 and 6.3.3.2, printed limits.
func TestCountChartsOfTheHandbook(t *testing.T) {
	t.Parallel()
	for section, chart := range map[string]limits.Chart{"6.3.3.1": limits.C, "6.3.3.2": limits.P} {
		ex := handbook(t, section)
		counts := make([]int, len(ex.Data))
		for i, v := range ex.Data {
			counts[i] = int(v)
		}
		var sizes []float64
		if chart == limits.P {
			sizes = slices.Repeat([]float64{50}, len(counts))
		}
		s, err := limits.EstimateCounts(chart, counts, sizes)
		if err != nil {
			t.Fatal(err)
		}
		b, err := s.Band(50)
		if err != nil {
			t.Fatal(err)
		}
		for name, got := range map[string]float64{"center": s.Center, "lcl": b.Lower, "ucl": b.Upper} {
			if want := ex.Published[name].(float64); math.Abs(got-want) > 6e-5 {
				t.Errorf("%s: %s = %.6g, printed %.6g", section, name, got, want)
			}
			if want := ex.Computed[name].(float64); !agrees(got, want, 0) {
				t.Errorf("%s: %s = %.12g, want %.12g", section, name, got, want)
			}
		}
	}
}

// Exact limits by binomial and Poisson tails, computed independently with a
// general-purpose scientific library.
func TestExactLimitsOfCounts(t *testing.T) {
	t.Parallel()
	var file struct {
		Exact struct {
			Cases []struct {
				Dist                           string
				N, P, Mean, Tail, Lower, Upper float64
			}
		} `json:"exact_limits"`
	}
	load(t, "attributes.json", &file)
	if len(file.Exact.Cases) != 24 {
		t.Fatalf("%d cases", len(file.Exact.Cases))
	}
	for _, c := range file.Exact.Cases {
		type form struct {
			standard limits.CountStandard
			size     float64
			unit     float64
		}
		forms := []form{
			{limits.CountStandard{Chart: limits.P, Center: c.P}, c.N, 1 / c.N},
			{limits.CountStandard{Chart: limits.NP, Center: c.P * c.N}, c.N, 1},
		}
		if c.Dist == "poisson" {
			forms = []form{
				{limits.CountStandard{Chart: limits.C, Center: c.Mean}, 0, 1},
				{limits.CountStandard{Chart: limits.U, Center: c.Mean / 2.5}, 2.5, 1 / 2.5},
			}
		}
		for _, f := range forms {
			f.standard.Probability, f.standard.Tail = true, c.Tail
			b, err := f.standard.Band(f.size)
			if err != nil {
				t.Fatal(err)
			}
			if !agrees(b.Upper, c.Upper*f.unit, 0) || b.HasLower() != (c.Lower > 0) || b.HasLower() && !agrees(b.Lower, c.Lower*f.unit, 0) {
				t.Errorf("%s of %+v: %g to %g", f.standard.Chart, c, b.Lower, b.Upper)
			}
			if b.Outside(c.Upper*f.unit) != 0 || b.Outside((c.Upper+1)*f.unit) != 1 {
				t.Errorf("%s of %+v: a count must signal beyond, not on, its limit", f.standard.Chart, c)
			}
		}
	}
}

// Where the chance of any event is below the tail, one event is already beyond.
func TestExactLimitAtZero(t *testing.T) {
	t.Parallel()
	b, err := limits.CountStandard{Chart: limits.P, Center: 0.001, Probability: true}.Band(1)
	if err != nil || b.Upper != 0 || b.Outside(0) != 0 || b.Outside(1) != 1 || b.Z(1) < 3 || b.Z(0) > 0 || b.Z(0) < -1 {
		t.Errorf("%+v, %v", b, err)
	}
}

func TestCountsThatGiveNoLimits(t *testing.T) {
	t.Parallel()
	for name, f := range map[string]func() error{
		"no chart":       func() error { _, err := limits.EstimateCounts(limits.XBarR, []int{1}, []float64{1}); return err },
		"nothing":        func() error { _, err := limits.EstimateCounts(limits.C, nil, nil); return err },
		"no event":       func() error { _, err := limits.EstimateCounts(limits.C, []int{0, 0}, nil); return err },
		"all events":     func() error { _, err := limits.EstimateCounts(limits.P, []int{2, 3}, []float64{2, 3}); return err },
		"negative":       func() error { _, err := limits.EstimateCounts(limits.C, []int{-1}, nil); return err },
		"sizes for c":    func() error { _, err := limits.EstimateCounts(limits.C, []int{1}, []float64{1}); return err },
		"lengths":        func() error { _, err := limits.EstimateCounts(limits.U, []int{1, 2}, []float64{1}); return err },
		"size 0":         func() error { _, err := limits.EstimateCounts(limits.U, []int{1}, []float64{0}); return err },
		"size NaN":       func() error { _, err := limits.EstimateCounts(limits.U, []int{1}, []float64{math.NaN()}); return err },
		"part of a unit": func() error { _, err := limits.EstimateCounts(limits.P, []int{1}, []float64{2.5}); return err },
		"count above":    func() error { _, err := limits.EstimateCounts(limits.P, []int{3}, []float64{2}); return err },
		"another size": func() error {
			s, err := limits.EstimateCounts(limits.NP, []int{1, 2}, []float64{50, 50})
			if err != nil {
				return err
			}
			_, err = s.Band(60)
			return err
		},
		"np sizes":      func() error { _, err := limits.EstimateCounts(limits.NP, []int{1, 1}, []float64{5, 6}); return err },
		"one for Laney": func() error { _, err := limits.EstimateCounts(limits.LaneyU, []int{1}, []float64{5}); return err },
		"alike":         func() error { _, err := limits.EstimateCounts(limits.LaneyU, []int{1, 1}, []float64{5, 5}); return err },
		"Laney exact": func() error {
			_, err := limits.CountStandard{Chart: limits.LaneyP, Center: 0.1, Between: 1, Probability: true}.Band(10)
			return err
		},
		"tail": func() error {
			_, err := limits.CountStandard{Chart: limits.C, Center: 3, Probability: true, Tail: 0.6}.Band(0)
			return err
		},
		"point": func() error { _, err := limits.CountStandard{Chart: limits.P}.Point(3, 2); return err },
		"Laney of c": func() error {
			_, err := limits.CountStandard{Chart: limits.C}.Laney([]int{1}, nil)
			return err
		},
	} {
		if err := f(); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Counts and sizes of any kind give ordered, finite-or-absent limits or an error.
func FuzzCounts(f *testing.F) {
	f.Add(3, 5, 50.0, 60.0, 0.00135, uint8(0), true)
	f.Add(0, 1<<40, 1e9, 1e-9, 0.4, uint8(3), false)
	f.Fuzz(func(t *testing.T, a, b int, m, n, tail float64, kind uint8, exact bool) {
		chart := []limits.Chart{limits.P, limits.NP, limits.C, limits.U, limits.LaneyP, limits.LaneyU}[kind%6]
		sizes := []float64{m, n}
		if chart == limits.C {
			sizes = nil
		}
		s, err := limits.EstimateCounts(chart, []int{a, b}, sizes)
		if err != nil {
			return
		}
		s.Probability, s.Tail = exact, tail
		band, err := s.Band(m)
		if err != nil {
			return
		}
		if math.IsNaN(band.Lower) || math.IsNaN(band.Upper) || band.Lower > band.Upper || !(band.Below > 0) || !(band.Above > 0) {
			t.Errorf("%s %d/%g %d/%g: %+v", chart, a, m, b, n, band)
		}
	})
}
