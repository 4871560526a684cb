package factor_test

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"holdfast/internal/spc/factor"
)

// table reads a file of testdata into rows keyed by column name.
func table(t *testing.T, name string) []map[string]string {
	t.Helper()
	f, err := os.Open(filepath.Join("testdata", name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) < 2 {
		t.Fatalf("%s: %d rows, %v", name, len(rows), err)
	}
	var out []map[string]string
	for _, r := range rows[1:] {
		m := map[string]string{}
		for i, key := range rows[0] {
			m[key] = r[i]
		}
		out = append(out, m)
	}
	return out
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatalf("not a number: %q", s)
	}
	return x
}

func size(t *testing.T, row map[string]string) int {
	t.Helper()
	n, err := strconv.Atoi(row["n"])
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// must turns a computed value into a number or ends the test.
func must(t *testing.T) func(float64, error) float64 {
	return func(x float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return x
	}
}

// lastDigit is one unit in the last printed place of s, and a hair for rounding.
func lastDigit(s string, units float64) float64 {
	places := 0
	if _, after, ok := strings.Cut(s, "."); ok {
		places = len(after)
	}
	return units*math.Pow(10, -float64(places)) + 1e-15
}

func TestConstantsAgreeToTheLastDigit(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, row := range table(t, "constants.csv") {
		n := size(t, row)
		for _, c := range []struct {
			column string
			got    float64
		}{
			{"d2", v(factor.D2(n))},
			{"d3", v(factor.D3(n))},
			{"median_range_factor", v(factor.MedianRange(n))},
			{"c4", v(factor.C4(n))},
			{"c5", v(factor.C5(n))},
		} {
			want := number(t, row[c.column])
			// The file's own last digit is a little off at d3(95), which a
			// 25-digit quadrature gives as 0.60836742876756.
			if d := math.Abs(c.got - want); d > lastDigit(row[c.column], 0.7) {
				t.Errorf("%s(%d) = %.14f, want %s (constants.csv)", c.column, n, c.got, row[c.column])
			}
		}
	}
}

// chartFactors derives the usual factors of a control chart from the constants.
func chartFactors(t *testing.T, n int) map[string]float64 {
	t.Helper()
	v := must(t)
	d2, d3, c4, c5 := v(factor.D2(n)), v(factor.D3(n)), v(factor.C4(n)), v(factor.C5(n))
	root := math.Sqrt(float64(n))
	return map[string]float64{
		"A": 3 / root, "A2": 3 / (d2 * root), "A3": 3 / (c4 * root),
		"B3": math.Max(0, 1-3*c5/c4), "B4": 1 + 3*c5/c4,
		"B5": math.Max(0, c4-3*c5), "B6": c4 + 3*c5,
		"D1": math.Max(0, d2-3*d3), "D2": d2 + 3*d3,
		"D3": math.Max(0, 1-3*d3/d2), "D4": 1 + 3*d3/d2,
		"E2": 3 / d2, "E3": 3 / c4,
		"c4": c4, "d2": d2, "d3": d3,
		"median_range_factor": v(factor.MedianRange(n)),
	}
}

func TestChartFactors(t *testing.T) {
	t.Parallel()
	for _, row := range table(t, "control_chart_factors.csv") {
		n := size(t, row)
		f := chartFactors(t, n)
		for column, text := range row {
			if column == "n" {
				continue
			}
			if got := f[column]; math.Abs(got-number(t, text)) > lastDigit(text, 0.51) {
				t.Errorf("%s(%d) = %.12f, want %s (control_chart_factors.csv)", column, n, got, text)
			}
		}
	}
}

func TestPublishedFactorsRoundAlike(t *testing.T) {
	t.Parallel()
	rows := table(t, "constants_vs_published.csv")
	for _, row := range rows {
		n := size(t, row)
		got, ok := chartFactors(t, n)[row["factor"]]
		if !ok {
			t.Fatalf("unknown factor %q", row["factor"])
		}
		if math.Abs(got-number(t, row["published"])) > lastDigit(row["published"], 0.5) {
			t.Errorf("%s(%d) = %.8f, printed %s", row["factor"], n, got, row["published"])
		}
	}
	if len(rows) != 225 {
		t.Errorf("%d printed factors checked, want 225", len(rows))
	}
}

func TestRangeQuantiles(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, row := range table(t, "range_probability_limits.csv") {
		n := size(t, row)
		for column, text := range row {
			if column == "n" {
				continue
			}
			p := number(t, strings.TrimPrefix(column, "W_"))
			if got := v(factor.RangeQuantile(n, p)); math.Abs(got-number(t, text)) > lastDigit(text, 0.51) {
				t.Errorf("RangeQuantile(%d, %g) = %.12f, want %s", n, p, got, text)
			}
			if got := v(factor.RangeUpperQuantile(n, 1-p)); math.Abs(got-number(t, text)) > lastDigit(text, 0.51) {
				t.Errorf("RangeUpperQuantile(%d, %g) = %.12f, want %s", n, 1-p, got, text)
			}
		}
	}
}

func TestFalseAlarmsOfDispersionCharts(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, row := range table(t, "dispersion_chart_false_alarm.csv") {
		n := size(t, row)
		f := chartFactors(t, n)
		below, above := 0.0, v(factor.RangeSurvival(n, f["D2"]))
		if f["D1"] > 0 {
			below = v(factor.RangeCDF(n, f["D1"]))
		}
		sBelow, sAbove := 0.0, v(factor.SDSurvival(n, f["B6"]))
		if f["B5"] > 0 {
			sBelow = v(factor.SDCDF(n, f["B5"]))
		}
		for _, c := range []struct {
			column string
			got    float64
		}{
			{"R_chart_below", below}, {"R_chart_above", above}, {"R_chart_total", below + above},
			{"s_chart_below", sBelow}, {"s_chart_above", sAbove}, {"s_chart_total", sBelow + sAbove},
		} {
			want := number(t, row[c.column])
			if math.Abs(c.got-want) > 6e-10*math.Abs(want) {
				t.Errorf("n=%d %s = %.12g, want %s", n, c.column, c.got, row[c.column])
			}
		}
	}
}
