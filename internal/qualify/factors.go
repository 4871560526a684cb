package qualify

import (
	"fmt"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/limits"
)

// factorCases are bias factors, factors of limits and the law of the relative range.
func factorCases() ([]Case, error) {
	all := &sheet{}
	constants := all.from(Computed, "numerical integration at 30 digits, closed forms for n = 2, 3, 4; c4 by gamma functions (cases/constants.csv)")
	byN := map[int]*answer{}
	factors := func(n int) *answer {
		if byN[n] == nil {
			byN[n] = ask("factors", input{"n": n})
		}
		return byN[n]
	}
	t := openTable("constants.csv")
	for _, row := range t.list() {
		n := row.key("n").int()
		for _, c := range [][2]string{{"d2", "d2"}, {"d3", "d3"}, {"median_range_factor", "median_range"}, {"c4", "c4"}, {"c5", "c5"}} {
			constants.digits(fmt.Sprintf("%s for n = %d", c[1], n), row.key(c[0]), 11, factors(n).at(c[1]))
		}
	}
	derived := all.from(Computed, "formulas of limits from those constants (cases/control_chart_factors.csv)")
	t2 := openTable("control_chart_factors.csv")
	for _, row := range t2.list() {
		n := row.key("n").int()
		for _, name := range []string{"A", "A2", "A3", "B3", "B4", "B5", "B6", "D1", "D2", "D3", "D4", "E2", "E3"} {
			if want := row.key(name); want.float() == 0 {
				derived.absent(fmt.Sprintf("%s for n = %d", name, n), factors(n), name)
			} else {
				derived.printed(fmt.Sprintf("%s for n = %d", name, n), want, factors(n).at(name))
			}
		}
	}
	printed := all.from(FromMemory, "table of factors as printed in ASTM E2587, ISO 7870-2 and Montgomery, Introduction to Statistical Quality Control")
	t3 := openTable("constants_vs_published.csv")
	for _, row := range t3.list() {
		n, name := row.key("n").int(), row.key("factor").text()
		field := name
		if name == "median_range_factor" {
			field = "median_range"
		}
		if want := row.key("published"); want.float() == 0 {
			printed.absent(fmt.Sprintf("%s for n = %d, printed", name, n), factors(n), field)
		} else {
			printed.printed(fmt.Sprintf("%s for n = %d, printed", name, n), want, factors(n).at(field))
		}
	}
	quantiles := all.from(Computed, "integration of the law of the relative range; the studentized range with infinite degrees of freedom agrees (cases/range_probability_limits.csv)")
	t4 := openTable("range_probability_limits.csv")
	for _, row := range t4.list() {
		n := row.key("n").int()
		for _, p := range []string{"0.00135", "0.005", "0.025", "0.5", "0.975", "0.995", "0.99865"} {
			want := row.key("W_" + p)
			a := ask("range", input{"n": n, "probability": []any{jsonNumber(p)}})
			quantiles.printed(fmt.Sprintf("quantile %s of the relative range, n = %d", p, n), want, a.at("quantile", 0))
		}
	}
	alarms := all.from(Computed, "tail areas at 3 sigma limits with known sigma (cases/dispersion_chart_false_alarm.csv)")
	t5 := openTable("dispersion_chart_false_alarm.csv")
	for _, row := range t5.list() {
		n := row.key("n").int()
		for _, c := range []struct {
			name  string
			chart limits.Chart
			tails func(int, limits.Band) (float64, float64, error)
		}{{"R_chart", limits.XBarR, rangeTails}, {"s_chart", limits.XBarS, sdTails}} {
			below, above := tailFigures(c.chart, n, c.tails)
			alarms.digits(fmt.Sprintf("%s n = %d, chance below the lower limit", c.name, n), row.key(c.name+"_below"), 9, below)
			alarms.digits(fmt.Sprintf("%s n = %d, chance above the upper limit", c.name, n), row.key(c.name+"_above"), 9, above)
			alarms.digits(fmt.Sprintf("%s n = %d, false alarm of a point", c.name, n), row.key(c.name+"_total"), 9, sum(below, above))
		}
	}
	return all.join(constants, derived, printed, quantiles, alarms), firstError(t, t2, t3, t4, t5)
}

// tailFigures are the chances that a dispersion chart with known sigma signals falsely.
func tailFigures(chart limits.Chart, n int, tails func(int, limits.Band) (float64, float64, error)) (below, above figure) {
	both := func() (float64, float64, error) {
		_, band, err := limits.Standard{Chart: chart, Sigma: 1}.Bands(n)
		if err != nil {
			return 0, 0, err
		}
		return tails(n, band)
	}
	below = func() (float64, float64, error) { b, _, err := both(); return b, 0, err }
	above = func() (float64, float64, error) { _, a, err := both(); return a, 0, err }
	return below, above
}

func rangeTails(n int, b limits.Band) (below, above float64, err error) {
	if b.HasLower() {
		if below, err = factor.RangeCDF(n, b.Lower); err != nil {
			return 0, 0, err
		}
	}
	above, err = factor.RangeSurvival(n, b.Upper)
	return below, above, err
}

func sdTails(n int, b limits.Band) (below, above float64, err error) {
	if b.HasLower() {
		if below, err = factor.SDCDF(n, b.Lower); err != nil {
			return 0, 0, err
		}
	}
	above, err = factor.SDSurvival(n, b.Upper)
	return below, above, err
}
