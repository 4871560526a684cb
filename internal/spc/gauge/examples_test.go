package gauge_test

import (
	"encoding/json"
	"math"
	"strconv"
	"testing"

	"holdfast/internal/spc/gauge"
)

// Source: NIST/SEMATECH e-Handbook, sections 7.4.3.3 (from memory), 7.2.2 and 1.3.5.2
// (seen on the page or quoted from it).
func TestHandbookExamples(t *testing.T) {
	t.Parallel()
	var file struct {
		Examples []struct {
			Section    string
			Data       json.RawMessage
			Parameters struct{ Mu0 float64 }
			Published  map[string]any
			Computed   map[string]any
		}
	}
	load(t, "nist_handbook.json", &file)
	figure := func(m map[string]any, key string) float64 { return m[key].(float64) }
	seen := 0
	for _, e := range file.Examples {
		seen++
		if e.Section == "7.4.3.3" {
			var levels [][]float64
			if err := json.Unmarshal(e.Data, &levels); err != nil {
				t.Fatal(err)
			}
			got, err := gauge.Levels(levels)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "treatment", got.Between.SS, figure(e.Computed, "ss_treatment"))
			near(t, "error", got.Within.SS, figure(e.Computed, "ss_error"))
			near(t, "total", got.Total.SS, figure(e.Computed, "ss_total"))
			near(t, "F", *got.Between.F, figure(e.Computed, "f"))
			near(t, "p", *got.Between.P, figure(e.Computed, "p"))
			continue
		}
		var x []float64
		if err := json.Unmarshal(e.Data, &x); err != nil {
			t.Fatal(err)
		}
		b, err := gauge.MeasureBias(x, e.Parameters.Mu0, nil)
		if err != nil {
			t.Fatal(err)
		}
		near(t, e.Section+" mean", b.Mean, figure(e.Computed, "mean"))
		near(t, e.Section+" s.d.", b.SD, figure(e.Computed, "sd"))
		near(t, e.Section+" t", b.T, figure(e.Computed, "t"))
		if e.Section == "7.2.2" {
			near(t, "p", b.P, figure(e.Computed, "p_two_sided"))
			if math.Abs(b.T-figure(e.Published, "t")) > 5e-4 {
				t.Errorf("t %g as printed", b.T)
			}
		} else {
			ci := e.Published["ci"].([]any)
			if math.Abs(b.Low+e.Parameters.Mu0-ci[0].(float64)) > 1e-6 || math.Abs(b.High+e.Parameters.Mu0-ci[1].(float64)) > 1e-6 {
				t.Errorf("interval %g to %g, printed %v", b.Low+5, b.High+5, ci)
			}
		}
		if b.Cg != nil || b.Cgk != nil {
			t.Error("Cg without a tolerance")
		}
	}
	if seen != 3 {
		t.Fatalf("%d examples", seen)
	}
}

// Source: AIAG, Measurement Systems Analysis (from memory); full digits computed
// independently.
func TestLinearityExample(t *testing.T) {
	t.Parallel()
	var file struct {
		Linearity struct {
			Reference []float64
			Data      [][]float64
			Computed  struct {
				Averages   []float64 `json:"bias_averages"`
				Slope      float64
				Intercept  float64
				S          float64
				RSquared   float64 `json:"r_squared"`
				TSlope     float64 `json:"t_slope"`
				TIntercept float64 `json:"t_intercept"`
				DF         int
				PSlope     float64 `json:"p_slope"`
				PIntercept float64 `json:"p_intercept"`
			}
		}
	}
	load(t, "gauge_rr.json", &file)
	l, err := gauge.MeasureLinearity(file.Linearity.Reference, file.Linearity.Data)
	if err != nil {
		t.Fatal(err)
	}
	w := file.Linearity.Computed
	for i, v := range w.Averages {
		near(t, "mean bias", l.MeanBias[i], v)
	}
	near(t, "slope", l.Slope, w.Slope)
	near(t, "intercept", l.Intercept, w.Intercept)
	near(t, "residual s.d.", l.ResidualSD, w.S)
	near(t, "R²", l.RSquared, w.RSquared)
	near(t, "t of slope", value(t, "t", l.TSlope), w.TSlope)
	near(t, "t of intercept", value(t, "t", l.TIntercept), w.TIntercept)
	if l.DF != w.DF || !within(l.PSlope, w.PSlope, 2e-9) || !within(l.PIntercept, w.PIntercept, 2e-9) {
		t.Errorf("df %d, p %g and %g; want %d, %g, %g", l.DF, l.PSlope, l.PIntercept, w.DF, w.PSlope, w.PIntercept)
	}
}

// Source: AIAG, Measurement Systems Analysis (from memory); kappa computed
// independently.
func TestKappaExamples(t *testing.T) {
	t.Parallel()
	var file struct {
		Kappa struct {
			Computed map[string]struct {
				Table [][]int
				Kappa float64
			}
		} `json:"attribute_agreement_kappa"`
	}
	load(t, "gauge_rr.json", &file)
	if len(file.Kappa.Computed) != 6 {
		t.Fatal("no cases")
	}
	for name, c := range file.Kappa.Computed {
		k, err := gauge.CohenTable(c.Table)
		if err != nil {
			t.Fatal(err)
		}
		near(t, name, k, c.Kappa)
		var ratings [][]string
		for i, row := range c.Table {
			for j, n := range row {
				for range n {
					ratings = append(ratings, []string{strconv.Itoa(i), strconv.Itoa(j)})
				}
			}
		}
		a, err := gauge.Agree(ratings)
		if err != nil {
			t.Fatal(err)
		}
		near(t, name+" item by item", value(t, "kappa", a.Cohen[0][1]), c.Kappa)
		if *a.Cohen[1][0] != *a.Cohen[0][1] || *a.Cohen[0][0] != 1 {
			t.Errorf("%s: %v", name, a.Cohen)
		}
	}
}
