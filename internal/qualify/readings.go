package qualify

import (
	"fmt"

	"holdfast/internal/spc/factor"
)

// readingCases are charts of means, individuals, EWMA and CUSUM.
func readingCases() ([]Case, error) {
	all := &sheet{}
	charts := open("variables_charts.json")
	rings := all.from(FromMemory, charts.key("cases").list()[0].key("source").text())
	addRings(rings, charts.key("cases").list()[0])
	book := open("nist_handbook.json")
	individuals := all.from(FromMemory, example(book, "6.3.2.2").key("source").text())
	addFlow(individuals, example(book, "6.3.2.2"))
	sums := all.from(FromMemory, example(book, "6.3.2.3").key("source").text())
	addSums(sums, example(book, "6.3.2.3"))
	average := all.from(Published, example(book, "6.3.2.4").key("source").text())
	addAverage(average, example(book, "6.3.2.4"))
	points := open("changepoint.json")
	text := all.from(FromMemory, points.key("textbook_cusum", "published", "source").text()+" (Montgomery, chapter on CUSUM and EWMA); rows computed by hand formula")
	addTextbook(text, points)
	return all.join(rings, individuals, sums, average, text), firstError(charts, book, points)
}

func addRings(s *sheet, c node) {
	data := c.key("data").raw()
	r := ask("limits", input{"chart": "xbar-r", "subgroups": data})
	sd := ask("limits", input{"chart": "xbar-s", "subgroups": data})
	pooled := ask("limits", input{"chart": "xbar-s", "subgroups": data, "estimator": "pooled"})
	overall := ask("capability", input{"subgroups": data, "lower": 73.95, "upper": 74.05})
	p, k := c.key("published"), c.key("computed")
	s.printed("piston rings, grand mean, printed", p.key("grand_mean"), r.at("center"))
	s.printed("piston rings, mean range, printed", p.key("mean_range"), r.at("dispersion", "center"))
	s.printed("piston rings, mean s.d., printed", p.key("mean_sd"), sd.at("dispersion", "center"))
	s.printed("piston rings, lower limit of means, printed", p.key("xbar_lower_limit"), r.at("location", "lower", 0))
	s.printed("piston rings, upper limit of ranges, printed", p.key("range_limits").list()[1], r.at("dispersion", "upper", 0))
	s.printed("piston rings, upper limit of s.d., printed", p.key("sd_limits").list()[1], sd.at("dispersion", "upper", 0))
	s.absent("piston rings, lower limit of ranges", r, "dispersion", "lower", 0)
	s.absent("piston rings, lower limit of s.d.", sd, "dispersion", "lower", 0)
	full := s.from(Computed, "recomputed from the printed data by the formulas of the charts (cases/variables_charts.json)")
	full.digits("piston rings, grand mean", k.key("grand_mean"), 8, r.at("center"))
	full.digits("piston rings, mean range", k.key("mean_range"), 9, r.at("dispersion", "center"))
	full.digits("piston rings, mean s.d.", k.key("mean_sd"), 9, sd.at("dispersion", "center"))
	full.digits("piston rings, sigma from ranges", k.key("sigma_from_range"), 9, r.at("sigma"))
	full.digits("piston rings, sigma from s.d.", k.key("sigma_from_sd"), 9, sd.at("sigma"))
	full.digits("piston rings, overall sigma", k.key("sigma_overall"), 9, overall.at("sigma_overall"))
	// The file's pooled sigma leaves c4 out; the program divides by it.
	df := k.key("subgroups").int() * (k.key("n").int() - 1)
	full.digits("piston rings, pooled sigma times c4", k.key("sigma_pooled"), 9, pooled.through(func(x float64) (float64, error) {
		c4, err := factor.C4(df + 1)
		return x * c4, err
	}, "sigma"))
	for i, side := range []string{"lower", "upper"} {
		full.digits("piston rings, "+side+" limit of means from ranges", k.key("xbar_limits_from_range").list()[i], 11, r.at("location", side, 0))
		full.digits("piston rings, "+side+" limit of means from s.d.", k.key("xbar_limits_from_sd").list()[i], 11, sd.at("location", side, 0))
	}
	full.digits("piston rings, upper limit of ranges", k.key("range_limits").list()[1], 9, r.at("dispersion", "upper", 0))
	full.digits("piston rings, upper limit of s.d.", k.key("sd_limits").list()[1], 9, sd.at("dispersion", "upper", 0))
	for i, mean := range k.key("subgroup_means").list() {
		full.digits(fmt.Sprintf("piston rings, mean of subgroup %d", i+1), mean, 9, r.at("location", "points", i))
		// Differences of readings near 74 carry the rounding of the readings.
		full.digits(fmt.Sprintf("piston rings, range of subgroup %d", i+1), k.key("subgroup_ranges").list()[i], 9, r.at("dispersion", "points", i))
		full.digits(fmt.Sprintf("piston rings, s.d. of subgroup %d", i+1), k.key("subgroup_sds").list()[i], 9, sd.at("dispersion", "points", i))
	}
	s.cases = append(s.cases, full.cases...)
}

func addFlow(s *sheet, e node) {
	data := e.key("data").raw()
	a := ask("limits", input{"chart": "individuals", "values": data})
	robust := ask("limits", input{"chart": "individuals", "values": data, "estimator": "median-mr"})
	plain := ask("summary", input{"x": data})
	p, c := e.key("published"), e.key("computed")
	s.printed("flow rates, centre, printed", p.key("center"), a.at("center"))
	s.printed("flow rates, mean moving range, printed", p.key("mean_moving_range"), plain.at("mean_moving_range"))
	const rounded = "0.002: the printed limits divide by 1.128, rounded from 1.128379"
	s.within("flow rates, upper limit, printed", p.key("ucl").float(), 0.002, rounded, a.at("location", "upper", 0))
	s.within("flow rates, lower limit, printed", p.key("lcl").float(), 0.002, rounded, a.at("location", "lower", 0))
	full := s.from(Computed, "recomputed from the printed data with the exact factors (cases/nist_handbook.json)")
	full.digits("flow rates, sigma", c.key("sigma"), 10, a.at("sigma"))
	full.digits("flow rates, upper limit", c.key("ucl"), 10, a.at("location", "upper", 0))
	full.digits("flow rates, lower limit", c.key("lcl"), 10, a.at("location", "lower", 0))
	full.digits("flow rates, upper limit of moving ranges", c.key("mr_ucl"), 10, a.at("dispersion", "upper", 1))
	full.absent("flow rates, lower limit of moving ranges", a, "dispersion", "lower", 1)
	full.digits("flow rates, median moving range", c.key("median_moving_range"), 10, plain.at("median_moving_range"))
	full.digits("flow rates, sigma from the median moving range", c.key("sigma_from_median_mr"), 10, robust.at("sigma"))
	for i, mr := range c.key("moving_ranges").list() {
		full.digits(fmt.Sprintf("flow rates, moving range %d", i+1), mr, 10, a.at("dispersion", "points", i+1))
	}
	s.cases = append(s.cases, full.cases...)
}

func addSums(s *sheet, e node) {
	par := e.key("parameters")
	a := ask("cusum", input{"x": e.key("data").raw(), "center": par.key("target").raw(), "sigma": 1, "k": par.key("k").raw(), "h": par.key("h").raw()})
	s.whole("CUSUM of 20 groups, first signal (from 0)", e.key("published", "first_upper_signal").float()-1, a.at("fired", 0))
	full := s.from(Computed, "recomputed from the printed data (cases/nist_handbook.json)")
	for i, want := range e.key("published", "upper").list() {
		s.within(fmt.Sprintf("CUSUM of 20 groups, upper sum %d, printed", i+1), want.float(), 0.005+1e-9, "half a unit of the second decimal", a.at("high", i))
		full.within(fmt.Sprintf("CUSUM of 20 groups, upper sum %d", i+1), e.key("computed", "upper").list()[i].float(), 1e-9, "nine decimals", a.at("high", i))
		full.within(fmt.Sprintf("CUSUM of 20 groups, lower sum %d", i+1), e.key("computed", "lower").list()[i].float(), 1e-9, "nine decimals", a.at("low", i))
	}
	s.cases = append(s.cases, full.cases...)
}

func addAverage(s *sheet, e node) {
	par := e.key("parameters")
	a := ask("ewma", input{
		"x": e.key("data").raw(), "center": par.key("target").raw(), "sigma": par.key("s").raw(),
		"lambda": par.key("lambda").raw(), "L": par.key("k").raw(),
	})
	full := s.from(Computed, "recomputed from the printed data (cases/nist_handbook.json)")
	target := par.key("target").float()
	printed, computed := e.key("published", "z_from_0").list(), e.key("computed", "z_from_0").list()
	for i, half := range e.key("computed", "half_width_time_varying").list() {
		s.within(fmt.Sprintf("EWMA, average %d, printed", i+1), printed[i+1].float(), 0.005+1e-9, "half a unit of the second decimal", a.at("z", i))
		full.digits(fmt.Sprintf("EWMA, average %d", i+1), computed[i+1], 11, a.at("z", i))
		full.digits(fmt.Sprintf("EWMA, half-width of the limits at point %d", i+1), half, 10, a.through(func(x float64) (float64, error) { return x - target, nil }, "upper", i))
	}
	last := len(printed) - 2
	const rounded = "0.0003: printed with a root rounded to 0.4201, and not yet constant at point 20"
	s.within("EWMA, upper limit at the last point, printed", e.key("published", "ucl").float(), 0.0003, rounded, a.at("upper", last))
	s.within("EWMA, lower limit at the last point, printed", e.key("published", "lcl").float(), 0.0003, rounded, a.at("lower", last))
	s.cases = append(s.cases, full.cases...)
}

// addTextbook takes the series of 30 with its CUSUM and EWMA rows.
func addTextbook(s *sheet, f node) {
	var series node
	for _, c := range f.key("cases").list() {
		if c.key("name").text()[0] == 'D' {
			series = c.key("x")
		}
	}
	c := f.key("textbook_cusum")
	a := ask("cusum", input{"x": series.raw(), "center": 10, "sigma": 1, "k": c.key("parameters", "k").raw(), "h": c.key("parameters", "h").raw()})
	for i, row := range c.key("rows").list() {
		s.within(fmt.Sprintf("series of 30, C+ at %d", i+1), row.key("c_plus").float(), 1e-9, "nine decimals", a.at("high", i))
		s.within(fmt.Sprintf("series of 30, C- at %d", i+1), row.key("c_minus").float(), 1e-9, "nine decimals", a.at("low", i))
	}
	signal := c.key("signal_at").int() - 1
	s.whole("series of 30, CUSUM signals first at (from 0)", float64(signal), a.at("fired", 0))
	s.printed("series of 30, C+ at the signal, printed", c.key("published", "c_plus_at_signal"), a.at("high", signal))
	e := f.key("textbook_ewma")
	w := ask("ewma", input{"x": series.raw(), "center": 10, "sigma": 1, "lambda": e.key("parameters", "lambda").raw(), "L": e.key("parameters", "L").raw()})
	for i, row := range e.key("rows").list() {
		s.digits(fmt.Sprintf("series of 30, EWMA at %d", i+1), row.key("z"), 9, w.at("z", i))
		s.digits(fmt.Sprintf("series of 30, EWMA lower limit at %d", i+1), row.key("lcl"), 9, w.at("lower", i))
		s.digits(fmt.Sprintf("series of 30, EWMA upper limit at %d", i+1), row.key("ucl"), 9, w.at("upper", i))
	}
	s.whole("series of 30, EWMA signals first at (from 0)", e.key("first_signal").float()-1, w.at("fired", 0))
	s.printed("series of 30, first EWMA, printed", e.key("published", "z_1"), w.at("z", 0))
	last := len(e.key("rows").list()) - 1
	s.printed("series of 30, upper EWMA limit, printed", e.key("published", "asymptotic_ucl"), w.at("upper", last))
	s.printed("series of 30, lower EWMA limit, printed", e.key("published", "asymptotic_lcl"), w.at("lower", last))
}
