package qualify

import (
	"fmt"
	"math"

	"holdfast/internal/spc/capability"
)

// capabilityCases are indices, their intervals, fits and tests of normality.
func capabilityCases() ([]Case, error) {
	f, rings, book := open("capability.json"), open("variables_charts.json"), open("nist_handbook.json")
	all := &sheet{}
	data := func(name string) []float64 {
		switch name {
		case "piston ring data of variables_charts.json", "piston ring data of variables_charts.json, all 125 values":
			var x []float64
			for _, sub := range rings.key("cases").list()[0].key("data").list() {
				x = append(x, sub.floats()...)
			}
			return x
		case "glass container strengths above":
			return f.key("indices", "cases").list()[1].key("data").floats()
		case "heat flow meter data of nist_handbook.json 1.3.5.2":
			return example(book, "1.3.5.2").key("data").floats()
		case "nist_strd_univariate/Michelso.csv", "nist_strd_univariate/Lottery.csv":
			return column(name)
		}
		return f.key("data_sets", name).floats()
	}
	sheets := []*sheet{
		indexBounds(all, f), normalPPM(all, f), indexSets(all, f, rings, data), percentiles(all, f),
		normalTests(all, f, data), fits(all, f, data), tolerances(all, f), handbookIndices(all, book),
	}
	return all.join(sheets...), firstError(f, rings, book)
}

func indexBounds(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("cp_bounds", "source").text())
	for _, c := range f.key("cp_bounds", "cases").list() {
		a := ask("interval", input{"index": "cp", "value": c.key("cp").raw(), "n": c.key("n").raw(), "confidence": c.key("confidence").raw()})
		name := fmt.Sprintf("Cp %s, n = %s, confidence %s", c.key("cp").text(), c.key("n").text(), c.key("confidence").text())
		addBounds(s, name, c, a)
	}
	example := f.key("cp_published_example")
	printed := all.from(FromMemory, example.key("source").text())
	a := ask("interval", input{"index": "cp", "value": 2.29, "n": example.key("n").raw()})
	for i, side := range []string{"low", "high"} {
		printed.printed("Cp 2.29 of 20 readings, "+side+", printed", example.key("published", "interval_95").list()[i], a.at("interval", i))
		printed.digits("Cp 2.29 of 20 readings, "+side, example.key("interval_95_from_cp_2.29").list()[i], 10, a.at("interval", i))
	}
	exact := all.from(Computed, f.key("cpk_bounds", "source").text())
	for _, c := range f.key("cpk_bounds", "cases").list() {
		a := ask("interval", input{"index": "cpk", "value": c.key("index").raw(), "n": c.key("n").raw(), "confidence": c.key("confidence").raw()})
		name := fmt.Sprintf("Cpk %s, n = %s, confidence %s", c.key("index").text(), c.key("n").text(), c.key("confidence").text())
		exact.digits(name+", standard error", c.key("bissell_cpk", "standard_error"), 10, a.at("standard_error"))
		addBounds(exact, name+", approximate", c.key("bissell_cpk"), a)
		addBounds(exact, name+", exact", c.key("exact_one_sided_index"), a, "exact")
	}
	s.cases = append(append(s.cases, printed.cases...), exact.cases...)
	return s
}

func addBounds(s *sheet, name string, want node, a *answer, in ...any) {
	at := func(path ...any) figure { return a.at(append(append([]any{}, in...), path...)...) }
	s.digits(name+", low", want.key("two_sided").list()[0], 10, at("interval", 0))
	s.digits(name+", high", want.key("two_sided").list()[1], 10, at("interval", 1))
	s.digits(name+", lower bound", want.key("lower"), 10, at("lower_bound"))
	s.digits(name+", upper bound", want.key("upper"), 10, at("upper_bound"))
}

// two are two readings with a given mean and standard deviation.
func two(mean, sd float64) []float64 { return []float64{mean - sd/math.Sqrt2, mean + sd/math.Sqrt2} }

func normalPPM(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("ppm_normal", "source").text())
	for _, c := range f.key("ppm_normal", "cases").list() {
		a := ask("capability", input{"values": two(c.key("mean").float(), c.key("sd").float()), "lower": c.key("lsl").raw(), "upper": c.key("usl").raw()})
		name := fmt.Sprintf("normal process, mean %s, s.d. %s", c.key("mean").text(), c.key("sd").text())
		if !c.key("lsl").null() {
			s.digits(fmt.Sprintf("%s, parts per million below %s", name, c.key("lsl").text()), c.key("below"), 10, a.at("expected_ppm", "below"))
		}
		if !c.key("usl").null() {
			s.digits(fmt.Sprintf("%s, parts per million above %s", name, c.key("usl").text()), c.key("above"), 10, a.at("expected_ppm", "above"))
		}
	}
	p := f.key("ppm_normal", "published_check")
	printed := all.from(FromMemory, "standard tables of the normal law")
	centred := ask("capability", input{"values": two(0, 1), "lower": -3, "upper": 3})
	printed.within("centred process at Cp 1, parts per million outside, printed", p.key("two_sided_centred_cp_1.00").float(), 0.5, "half a unit of the last place printed",
		sum(centred.at("expected_ppm", "below"), centred.at("expected_ppm", "above")))
	shifted := ask("capability", input{"values": two(1.5, 1), "lower": -6, "upper": 6})
	printed.printed("six sigma shifted by 1.5, parts per million outside, printed", p.key("six_sigma_shifted_1.5"), sum(shifted.at("expected_ppm", "below"), shifted.at("expected_ppm", "above")))
	s.cases = append(s.cases, printed.cases...)
	return s
}

func indexSets(all *sheet, f, rings node, data func(string) []float64) *sheet {
	s := all.from(Computed, "recomputed from the data by the usual formulas (cases/capability.json)")
	subgroups := rings.key("cases").list()[0].key("data").raw()
	for i, c := range f.key("indices", "cases").list() {
		in := input{"lower": c.key("lsl").raw(), "upper": c.key("usl").raw(), "target": c.key("target").raw()}
		var name string
		switch i {
		case 0:
			name, in["subgroups"] = "piston rings", subgroups
		case 1:
			name, in["values"] = "glass containers", data("glass container strengths above")
		default:
			name, in["values"] = "speed of light", data("nist_strd_univariate/Michelso.csv")
		}
		a := ask("capability", in)
		k := c.key("computed")
		s.whole(name+", readings", k.key("n").float(), a.at("n"))
		s.digits(name+", mean", k.key("mean"), 9, a.at("mean"))
		s.digits(name+", overall sigma", k.key("sd_overall"), 9, a.at("sigma_overall"))
		s.digits(name+", Pp", k.key("pp"), 9, a.at("pp"))
		s.digits(name+", Ppk", k.key("ppk"), 9, a.at("ppk"))
		s.digits(name+", Cpm", k.key("cpm_s2_n_minus_1"), 9, a.at("cpm"))
		s.digits(name+", parts per million below", k.key("ppm_overall_normal", "below"), 8, a.at("expected_ppm", "below"))
		s.digits(name+", parts per million above", k.key("ppm_overall_normal", "above"), 8, a.at("expected_ppm", "above"))
		s.within(name+", readings outside", k.key("observed_outside").float(), 1e-9, "a whole number", a.outsideCount(k.key("n").float()))
		for _, e := range [][2]string{{"within_range", "rbar"}, {"within_sd", "sbar"}} {
			if k.has(e[0]) {
				in := input{"subgroups": subgroups, "lower": c.key("lsl").raw(), "upper": c.key("usl").raw(), "estimator": e[1]}
				w := ask("capability", in)
				s.digits(name+", sigma within by "+e[1], k.key(e[0], "sigma"), 9, w.at("sigma_within"))
				s.digits(name+", Cp by "+e[1], k.key(e[0], "cp"), 9, w.at("cp"))
				s.digits(name+", Cpk by "+e[1], k.key(e[0], "cpk"), 9, w.at("cpk"))
			}
		}
	}
	return s
}

// outsideCount is how many readings lie outside, from the observed parts per million.
func (a *answer) outsideCount(n float64) figure {
	both := sum(a.at("observed_ppm", "below"), a.at("observed_ppm", "above"))
	return func() (float64, float64, error) {
		x, _, err := both()
		return x * n / 1e6, 0, err
	}
}

func percentiles(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("percentile_method", "source").text())
	for _, c := range f.key("percentile_method", "cases").list() {
		family := capability.Family(c.key("distribution").text())
		first, second := "log_mean", "log_sd"
		if family == capability.Weibull {
			first, second = "shape", "scale"
		}
		fit, err := capability.Known(family, c.key(first).float(), c.key(second).float())
		p, err2 := fit.Percentile(capability.Specification{Lower: optional(c.key("lsl")), Upper: optional(c.key("usl"))})
		if err == nil {
			err = err2
		}
		name := fmt.Sprintf("%s %s, %s", family, c.key(first).text(), c.key(second).text())
		is := func(x *float64) figure {
			return value(func() (float64, error) {
				if err == nil && x == nil {
					return 0, fmt.Errorf("%s has no such value", name)
				}
				if err != nil {
					return 0, err
				}
				return *x, nil
			})
		}
		s.digits(name+", 0.135 % point", c.key("x_0.135"), 9, is(&p.X0135))
		s.digits(name+", median", c.key("x_50"), 9, is(&p.X50))
		s.digits(name+", 99.865 % point", c.key("x_99.865"), 9, is(&p.X99865))
		s.digits(name+", Pp", c.key("pp"), 9, is(p.Pp))
		s.digits(name+", Ppk", c.key("ppk"), 9, is(p.Ppk))
		if c.has("usl") {
			s.digits(name+", parts per million above", c.key("ppm_above"), 9, is(p.Expected.Above))
		}
		if c.has("lsl") {
			s.digits(name+", parts per million below", c.key("ppm_below"), 9, is(p.Expected.Below))
		}
	}
	return s
}

func optional(n node) *float64 {
	if n.null() {
		return nil
	}
	x := n.float()
	return &x
}

func normalTests(all *sheet, f node, data func(string) []float64) *sheet {
	s := all.from(Computed, f.key("normality", "source").text())
	for _, c := range f.key("normality", "cases").list() {
		name := c.key("data").text()
		x := data(name)
		a := ask("normality", input{"x": x})
		k := c.key("anderson_darling")
		s.digits(name+", Anderson-Darling", k.key("a2"), 9, a.at("anderson_darling"))
		s.digits(name+", adjusted", k.key("a2_adjusted"), 9, a.at("adjusted"))
		s.digits(name+", p", k.key("p_value"), 8, a.at("p"))
		s.digits(name+", skewness", c.key("skewness_g1"), 8, ask("summary", input{"x": x}).at("skewness"))
	}
	powers := all.from(Computed, f.key("box_cox", "source").text())
	for _, c := range f.key("box_cox", "cases").list() {
		name := c.key("data").text()
		a := ask("normality", input{"x": data(name)})
		// The likelihood is flat at its top: the file's search stops some 5e-6 away.
		powers.within(name+", Box-Cox power", c.key("lambda_mle").float(), 1e-5, "0.00001, where the search of the source stops", a.at("boxcox_lambda"))
		for i, side := range []string{"low", "high"} {
			powers.within(name+", Box-Cox interval, "+side, c.key("interval_95").list()[i].float(), 1e-3, "0.001: the source cuts at 1.92, the exact half quantile is 1.92073", a.at("boxcox_interval", i))
		}
	}
	s.cases = append(s.cases, powers.cases...)
	return s
}

func fits(all *sheet, f node, data func(string) []float64) *sheet {
	s := all.from(Computed, f.key("fitted_distributions", "source").text())
	for _, c := range f.key("fitted_distributions", "cases").list() {
		family := c.key("fit").text()
		a := ask("fit", input{"x": data(c.key("data").text()), "family": family, "lower": c.key("lsl").raw(), "upper": c.key("usl").raw()})
		for _, p := range [][2]string{{"shape", "shape"}, {"scale", "scale"}, {"log_mean", "log_mean"}, {"log_sd_divisor_n", "log_sd"}} {
			if c.has(p[0]) {
				s.digits(family+" fit, "+p[1], c.key(p[0]), 7, a.at("parameters", p[1]))
			}
		}
		for _, q := range [][2]string{{"x_0.135", "0.00135"}, {"x_50", "0.5"}, {"x_99.865", "0.99865"}} {
			s.digits(family+" fit, quantile "+q[1], c.key(q[0]), 7, a.at("quantiles", q[1]))
		}
		s.digits(family+" fit, Pp", c.key("pp"), 7, a.at("pp"))
		s.digits(family+" fit, Ppk", c.key("ppk"), 7, a.at("ppk"))
		s.digits(family+" fit, parts per million above", c.key("ppm_above"), 6, a.at("expected_ppm", "above"))
		if c.has("lsl") {
			s.digits(family+" fit, parts per million below", c.key("ppm_below"), 6, a.at("expected_ppm", "below"))
		}
	}
	return s
}

func tolerances(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("normal_tolerance_factors", "source").text())
	for _, c := range f.key("normal_tolerance_factors", "cases").list() {
		a := ask("tolerance", input{"n": c.key("n").raw(), "coverage": c.key("coverage").raw(), "confidence": c.key("confidence").raw()})
		name := fmt.Sprintf("tolerance factor, n = %s, coverage %s, confidence %s", c.key("n").text(), c.key("coverage").text(), c.key("confidence").text())
		s.digits(name+", one side", c.key("k_one_sided_exact"), 9, a.at("one_sided"))
		s.digits(name+", two sides", c.key("k_two_sided_exact"), 8, a.at("two_sided"))
	}
	p := f.key("normal_tolerance_factors", "published")
	printed := all.from(Published, p.key("source").text())
	a := ask("tolerance", input{"n": p.key("n").raw(), "coverage": p.key("coverage").raw(), "confidence": p.key("confidence").raw()})
	printed.printed("tolerance factor of 43 readings, one side, printed", p.key("k_one_sided"), a.at("one_sided"))
	s.cases = append(s.cases, printed.cases...)
	return s
}

func handbookIndices(all *sheet, book node) *sheet {
	e := example(book, "6.1.6")
	s := all.from(FromMemory, e.key("source").text())
	par := e.key("parameters")
	a := ask("capability", input{"values": two(par.key("mean").float(), par.key("s").float()), "lower": par.key("lsl").raw(), "upper": par.key("usl").raw()})
	s.digits("mean 16, s 2 between 8 and 20, Cp of the overall sigma", e.key("computed", "cp"), 10, a.at("pp"))
	s.printed("mean 16, s 2 between 8 and 20, Cpk of the overall sigma, printed", e.key("published", "cpk"), a.at("ppk"))
	heat := example(book, "1.4.2.8")
	t := all.from(Computed, heat.key("source").text())
	n := ask("normality", input{"x": example(book, "1.3.5.2").key("data").raw()})
	t.digits("heat flow meter, Anderson-Darling", heat.key("computed", "a2"), 9, n.at("anderson_darling"))
	t.digits("heat flow meter, Anderson-Darling adjusted", heat.key("computed", "a2_adjusted"), 9, n.at("adjusted"))
	s.cases = append(s.cases, t.cases...)
	return s
}
