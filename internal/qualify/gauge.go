package qualify

import (
	"fmt"

	"holdfast/internal/spc/gauge"
)

// gaugeCases are gauge studies, linearity and agreement.
func gaugeCases() ([]Case, error) {
	f, book := open("gauge_rr.json"), open("nist_handbook.json")
	all := &sheet{}
	sheets := []*sheet{
		crossed(all, "ten parts, three appraisers", f.key("crossed_10x3x3_aiag"), nil),
		crossed(all, "thermal impedance", f.key("crossed_10x3x3_thermal_impedance"), 80),
		byRange(all, f.key("crossed_10x3x3_aiag")),
		oneGauge(all, f.key("one_gauge_20_parts_2_readings")), quickRange(all, f.key("range_method_5x2")),
		linearity(all, f.key("linearity")), kappas(all, f.key("attribute_agreement_kappa")), starred(all, f.key("d2_star")),
		masters(all, book), oneWay(all, book),
	}
	return all.join(sheets...), firstError(f, book)
}

// measurements turns data[appraiser][trial][part] into [part][appraiser][trial].
func measurements(f node) [][][]float64 {
	var out [][][]float64
	appraisers := f.keys()
	// Their names are A, B, C or 1, 2, 3; the order does not matter to the study.
	for i := range appraisers {
		for j := range i {
			if appraisers[i] < appraisers[j] {
				appraisers[i], appraisers[j] = appraisers[j], appraisers[i]
			}
		}
	}
	for a, name := range appraisers {
		for _, trial := range f.key(name).list() {
			for p, x := range trial.floats() {
				if len(out) <= p {
					out = append(out, make([][]float64, len(appraisers)))
				}
				out[p][a] = append(out[p][a], x)
			}
		}
	}
	return out
}

func crossed(all *sheet, name string, f node, tolerance any) *sheet {
	s := all.from(Computed, "analysis of variance recomputed from the data of: "+f.key("source").text())
	in := input{"measurements": measurements(f.key("data")), "tolerance": tolerance, "pool_above": 1}
	apart := ask("gauge", in)
	pooled := ask("gauge", input{"measurements": in["measurements"], "tolerance": tolerance, "pool_above": 0})
	usual := ask("gauge", input{"measurements": in["measurements"]})
	t := f.key("anova", "table")
	for i, source := range []string{"part", "appraiser", "interaction", "repeatability"} {
		row := t.key(source)
		s.whole(name+", "+source+", degrees of freedom", row.key("df").float(), apart.at("anova", i, "df"))
		s.digits(name+", "+source+", sum of squares", row.key("ss"), 9, apart.at("anova", i, "ss"))
		s.digits(name+", "+source+", mean square", row.key("ms"), 9, apart.at("anova", i, "ms"))
		for _, k := range []string{"f_vs_interaction", "f_vs_repeatability"} {
			if row.has(k) {
				s.digits(name+", "+source+", F", row.key(k), 8, apart.at("anova", i, "f"))
				s.digits(name+", "+source+", p", row.key("p"), 8, apart.at("anova", i, "p"))
			}
		}
	}
	for _, kind := range []struct {
		name, key string
		a         *answer
	}{{"interaction apart", "with_interaction", apart}, {"interaction pooled", "interaction_pooled", pooled}} {
		k := f.key("anova", kind.key)
		for _, c := range []string{"repeatability", "appraiser", "interaction", "reproducibility", "grr", "part", "total"} {
			field := c
			if c == "grr" {
				field = "gauge"
			}
			label := fmt.Sprintf("%s, %s, %s", name, kind.name, field)
			s.digits(label+", variance", k.key("var", c), 8, kind.a.at("variance", field))
			if k.key("percent_study_variation").has(c) {
				s.digits(label+", share of the spread", k.key("percent_study_variation", c), 8, kind.a.at("percent_of_total", field))
			}
		}
		s.whole(fmt.Sprintf("%s, %s, categories", name, kind.name), k.key("ndc").float(), kind.a.at("categories"))
		if tolerance != nil {
			s.digits(fmt.Sprintf("%s, %s, gauge, share of tolerance", name, kind.name), k.key("percent_tolerance", "grr"), 8, kind.a.at("percent_tolerance", "gauge"))
		}
	}
	decided := 0.0
	if f.key("anova", "pool_decision", "at_0.25").v == true {
		decided = 1
	}
	s.whole(name+", pooled at 0.25 (1 = yes)", decided, usual.at("pooled"))
	printed := all.from(FromMemory, f.key("source").text())
	p := f.key("published")
	if p.has("table") {
		for i, source := range []string{"part", "appraiser", "interaction", "repeatability"} {
			row := p.key("table", source)
			printed.printed(name+", "+source+", sum of squares, printed", row.key("ss"), apart.at("anova", i, "ss"))
			printed.within(name+", "+source+", mean square, printed", row.key("ms").float(), 0.005, "half a unit of the second decimal", apart.at("anova", i, "ms"))
			if row.has("f") {
				printed.printed(name+", "+source+", F, printed", row.key("f"), apart.at("anova", i, "f"))
			}
		}
		for _, c := range []string{"part", "interaction", "repeatability"} {
			printed.printed(name+", variance of "+c+", printed", p.key("var", c), apart.at("variance", c))
		}
	} else {
		for i, source := range []string{"part", "appraiser", "interaction", "repeatability"} {
			row := p.key("anova", source)
			// The manual prints the mean square of the parts from its rounded sum.
			printed.within(name+", "+source+", sum of squares, printed", row.key("ss").float(), 1e-4, "one unit of the fourth decimal", apart.at("anova", i, "ss"))
			printed.within(name+", "+source+", mean square, printed", row.key("ms").float(), 1e-5, "one unit of the fifth decimal", apart.at("anova", i, "ms"))
		}
		for _, c := range [][2]string{{"repeatability", "repeatability"}, {"appraiser", "appraiser"}, {"grr", "gauge"}, {"part", "part"}} {
			printed.within(name+", pooled s.d. of "+c[1]+", printed", p.key("pooled_sd", c[0]).float(), 2e-6, "two units of the sixth decimal", pooled.through(root, "variance", c[1]))
		}
	}
	s.cases = append(s.cases, printed.cases...)
	return s
}

func byRange(all *sheet, f node) *sheet {
	s := all.from(Computed, "averages and ranges with exact factors, recomputed from the data of: "+f.key("source").text())
	a := ask("gauge-range", input{"measurements": measurements(f.key("data"))})
	k := f.key("average_and_range")
	x := k.key("exact_constants")
	s.digits("averages and ranges, mean range", k.key("mean_range"), 10, a.at("mean_range"))
	s.digits("averages and ranges, span of appraisers", k.key("xbar_diff"), 10, a.at("appraiser_span"))
	s.digits("averages and ranges, span of parts", k.key("part_range"), 10, a.at("part_span"))
	printed := all.from(FromMemory, f.key("source").text())
	p := f.key("published", "average_and_range")
	const rounded = "0.0002 and 0.02: the manual's factors and means are rounded"
	for _, c := range [][3]string{{"ev", "repeatability", "percent_ev"}, {"av", "appraiser", "percent_av"}, {"grr", "gauge", "percent_grr"}, {"pv", "part", "percent_pv"}, {"tv", "total", ""}} {
		s.digits("averages and ranges, s.d. of "+c[1], x.key(c[0]), 9, a.at("sd", c[1]))
		printed.within("averages and ranges, s.d. of "+c[1]+", printed", p.key(c[0]).float(), 2e-4, rounded, a.at("sd", c[1]))
		if c[2] != "" {
			s.digits("averages and ranges, share of "+c[1], x.key(c[2]), 9, a.at("percent_of_total", c[1]))
			printed.within("averages and ranges, share of "+c[1]+", printed", p.key(c[2]).float(), 0.02, rounded, a.at("percent_of_total", c[1]))
		}
	}
	s.whole("averages and ranges, categories", x.key("ndc").float(), a.at("categories"))
	s.digits("averages and ranges, categories uncut", x.key("ndc_unrounded"), 9, a.at("categories_uncut"))
	s.cases = append(s.cases, printed.cases...)
	return s
}

func oneGauge(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text())
	a := ask("gauge-quick", input{"readings": f.key("data").raw()})
	s.digits("one gauge, mean range", f.key("computed", "mean_range"), 10, a.at("mean_range"))
	s.digits("one gauge, s.d.", f.key("computed", "sigma_gauge"), 10, a.at("sd_many_parts"))
	width := f.key("usl").float() - f.key("lsl").float()
	s.digits("one gauge, share of tolerance", f.key("computed", "p_to_t_6sigma"), 10, a.through(func(x float64) (float64, error) { return 6 * x / width, nil }, "sd_many_parts"))
	return s
}

func quickRange(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text())
	var readings [][]float64
	first, second := f.key("data", "A").floats(), f.key("data", "B").floats()
	for i := range first {
		readings = append(readings, []float64{first[i], second[i]})
	}
	a := ask("gauge-quick", input{"readings": readings})
	s.digits("range method, mean range", f.key("computed", "mean_range"), 10, a.at("mean_range"))
	s.digits("range method, d2*", f.key("computed", "d2_star"), 10, a.at("d2_star"))
	s.digits("range method, s.d. of the gauge", f.key("computed", "grr"), 9, a.at("sd_few_parts"))
	s.printed("range method, d2*, printed", f.key("published", "d2_star"), a.at("d2_star"))
	s.printed("range method, s.d. of the gauge, printed", f.key("published", "grr"), a.at("sd_few_parts"))
	return s
}

func linearity(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text())
	a := ask("linearity", input{"reference": f.key("reference").raw(), "measured": f.key("data").raw()})
	k := f.key("computed")
	for _, c := range [][2]string{
		{"slope", "slope"}, {"intercept", "intercept"}, {"r_squared", "r2"}, {"p_slope", "p_slope"}, {"p_intercept", "p_intercept"},
		{"t_slope", "t_slope"}, {"t_intercept", "t_intercept"}, {"s", "residual_sd"},
	} {
		s.digits("linearity, "+c[1], k.key(c[0]), 8, a.at(c[1]))
	}
	s.whole("linearity, degrees of freedom", k.key("df").float(), a.at("df"))
	for i, want := range k.key("bias_averages").list() {
		s.digits(fmt.Sprintf("linearity, mean bias of master %d", i+1), want, 9, a.at("mean_bias", i))
	}
	return s
}

func kappas(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text())
	for _, pair := range []string{"A_vs_B", "B_vs_C", "A_vs_C", "A_vs_reference", "B_vs_reference", "C_vs_reference"} {
		k := f.key("computed", pair)
		var ratings [][]int
		for i, row := range k.key("table").list() {
			for j, count := range row.list() {
				for range count.int() {
					ratings = append(ratings, []int{i, j})
				}
			}
		}
		s.digits(pair+", kappa", k.key("kappa"), 10, ask("agreement", input{"ratings": ratings}).at("cohen_kappa", 0, 1))
	}
	return s
}

func starred(all *sheet, f node) *sheet {
	s := all.from(Computed, "square root of d2² + d3²/g; "+f.key("source").text())
	for _, c := range f.key("cases").list() {
		n, g := c.key("n").int(), c.key("subgroups").int()
		s.digits(fmt.Sprintf("d2* for %d ranges of %d", g, n), c.key("d2_star"), 10, value(func() (float64, error) { return gauge.D2Star(n, g) }))
	}
	return s
}

// masters are t tests of a mean against a value, as the bias of a gauge is tested.
func masters(all *sheet, book node) *sheet {
	e := example(book, "7.2.2")
	s := all.from(Published, e.key("source").text())
	a := ask("gauge-bias", input{"x": e.key("data").raw(), "reference": e.key("parameters", "mu0").raw()})
	s.printed("particle counts, s.d., printed", e.key("published", "sd"), a.at("sd"))
	s.printed("particle counts, t, printed", e.key("published", "t"), a.at("t"))
	s.digits("particle counts, t", e.key("computed", "t"), 10, a.at("t"))
	s.digits("particle counts, p", e.key("computed", "p_two_sided"), 10, a.at("p"))
	heat := example(book, "1.3.5.2")
	t := all.from(FromMemory, heat.key("source").text())
	b := ask("gauge-bias", input{"x": heat.key("data").raw(), "reference": heat.key("parameters", "mu0").raw()})
	t.printed("heat flow meter, s.d., printed", heat.key("published", "sd"), b.at("sd"))
	// The printed t comes from mean and s.d. as printed.
	t.within("heat flow meter, t against 5, printed", heat.key("published", "t").float(), 0.002, "0.002: printed from rounded figures", b.at("t"))
	t.digits("heat flow meter, t against 5", heat.key("computed", "t"), 9, b.at("t"))
	for i, side := range []string{"low", "high"} {
		bound := b.through(func(x float64) (float64, error) { return x + 5, nil }, "interval", i)
		t.printed("heat flow meter, mean, "+side+", printed", heat.key("published", "ci").list()[i], bound)
		t.digits("heat flow meter, mean, "+side, heat.key("computed", "ci").list()[i], 10, bound)
	}
	s.cases = append(s.cases, t.cases...)
	return s
}

func oneWay(all *sheet, book node) *sheet {
	e := example(book, "7.4.3.3")
	s := all.from(FromMemory, e.key("source").text())
	a := ask("anova", input{"levels": e.key("data").raw()})
	for i, k := range []string{"ss_treatment", "ss_error", "ss_total"} {
		s.printed("one-way analysis, "+k+", printed", e.key("published", k), a.at("anova", i, "ss"))
		s.digits("one-way analysis, "+k, e.key("computed", k), 9, a.at("anova", i, "ss"))
	}
	s.printed("one-way analysis, F, printed", e.key("published", "f"), a.at("anova", 0, "f"))
	s.digits("one-way analysis, F", e.key("computed", "f"), 9, a.at("anova", 0, "f"))
	s.digits("one-way analysis, p", e.key("computed", "p"), 9, a.at("anova", 0, "p"))
	return s
}
