package qualify

import (
	"fmt"
	"slices"
)

// lotCases are sampling plans and the tables of ISO 2859-1.
func lotCases() ([]Case, error) {
	f, book, iso := open("acceptance.json"), open("nist_handbook.json"), open("iso2859_entries.json")
	all := &sheet{}
	sheets := []*sheet{curves(all, f), smallest(all, f), rectifying(all, f), doubles(all, f), sequentials(all, f), handbookLots(all, book)}
	sheets = append(sheets, standardEntries(all, iso), switching(all, iso))
	return all.join(sheets...), firstError(f, book, iso)
}

func curves(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("oc", "source").text())
	for _, c := range f.key("oc", "cases").list() {
		for _, p := range c.key("oc").list() {
			for _, model := range []string{"binomial", "poisson", "hypergeometric"} {
				if !p.has(model) {
					continue
				}
				a := ask("lot", input{"n": c.key("n").raw(), "c": c.key("c").raw(), "lot": c.key("N").raw(), "fractions": []any{p.key("p").raw()}, "model": model})
				s.digits(fmt.Sprintf("plan n = %s, c = %s, lot %s, %s, p = %s", c.key("n").text(), c.key("c").text(), c.key("N").text(), model, p.key("p").text()),
					p.key(model), 10, a.at("accept", 0))
			}
		}
	}
	printed := all.from(FromMemory, "Montgomery, Introduction to Statistical Quality Control; binomial, n = 89, c = 2")
	book := f.key("oc_published_n89_c2")
	a := ask("lot", input{"n": 89, "c": 2, "fractions": book.key("p").raw(), "model": "binomial"})
	for i, want := range book.key("pa").list() {
		printed.within(fmt.Sprintf("plan n = 89, c = 2, p = %s, printed", book.key("p").list()[i].text()), want.float(), 5e-5*(1+1e-6), "half a unit of the fourth decimal", a.at("accept", i))
		s.digits(fmt.Sprintf("plan n = 89, c = 2, p = %s", book.key("p").list()[i].text()), book.key("computed").list()[i], 10, a.at("accept", i))
	}
	s.cases = append(s.cases, printed.cases...)
	return s
}

func smallest(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("smallest_plans_binomial", "source").text())
	for _, model := range []string{"binomial", "hypergeometric"} {
		for _, c := range f.key("smallest_plans_"+model, "cases").list() {
			in := input{"p1": c.key("aql").raw(), "alpha": c.key("alpha").raw(), "p2": c.key("ltpd").raw(), "beta": c.key("beta").raw(), "model": model}
			name := fmt.Sprintf("least plan for %s/%s and %s/%s, %s", c.key("aql").text(), c.key("alpha").text(), c.key("ltpd").text(), c.key("beta").text(), model)
			if model == "hypergeometric" {
				in["lot"] = c.key("N").raw()
				name += " lot " + c.key("N").text()
			}
			a := ask("lot-plan", in)
			s.whole(name+", n", c.key("n").float(), a.at("n"))
			s.whole(name+", c", c.key("c").float(), a.at("c"))
			s.within(name+", alpha", 1-c.key("pa_at_p1").float(), 1e-10, "ten decimals", a.at("alpha"))
			s.within(name+", beta", c.key("pa_at_p2").float(), 1e-10, "ten decimals", a.at("beta"))
		}
	}
	return s
}

func rectifying(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("rectifying", "source").text())
	for _, c := range f.key("rectifying", "cases").list() {
		name := fmt.Sprintf("plan n = %s, c = %s, lot %s", c.key("n").text(), c.key("c").text(), c.key("N").text())
		endless := ask("lot", input{"n": c.key("n").raw(), "c": c.key("c").raw(), "fractions": []float64{}, "model": "binomial"})
		s.digits(name+", largest outgoing fraction, endless lot", c.key("aoql_large_lot"), 9, endless.at("aoql"))
		var p []any
		for _, e := range c.key("cases").list() {
			p = append(p, e.key("p").raw())
		}
		a := ask("lot", input{"n": c.key("n").raw(), "c": c.key("c").raw(), "lot": c.key("N").raw(), "fractions": p, "model": "binomial"})
		s.digits(name+", largest outgoing fraction", c.key("aoql"), 9, a.at("aoql"))
		// The curve is flat at its top: the source gives the place to some 1e-6.
		s.within(name+", where it is reached", c.key("p_at_aoql").float(), 2e-6, "2e-6: the curve is flat at its top", a.at("aoql_at"))
		for i, e := range c.key("cases").list() {
			at := fmt.Sprintf("%s, p = %s", name, e.key("p").text())
			s.digits(at+", acceptance", e.key("pa"), 10, a.at("accept", i))
			s.digits(at+", outgoing fraction", e.key("aoq"), 10, a.at("aoq", i))
			s.digits(at+", total inspection", e.key("ati"), 10, a.at("ati", i))
		}
	}
	return s
}

func doubles(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("double", "source").text())
	for _, c := range f.key("double", "cases").list() {
		in := input{"model": "binomial"}
		for _, k := range []string{"n1", "c1", "r1", "n2", "c2"} {
			in[k] = c.key(k).raw()
		}
		var p []any
		for _, e := range c.key("cases").list() {
			p = append(p, e.key("p").raw())
		}
		in["fractions"] = p
		a := ask("lot-double", in)
		for i, e := range c.key("cases").list() {
			at := fmt.Sprintf("double plan %s/%s, %s/%s, p = %s", c.key("n1").text(), c.key("c1").text(), c.key("n2").text(), c.key("c2").text(), e.key("p").text())
			s.digits(at+", accepted on the first", e.key("accept_first"), 10, a.at("accept_first", i))
			s.digits(at+", rejected on the first", e.key("reject_first"), 9, a.at("reject_first", i))
			s.digits(at+", accepted", e.key("accept_total"), 10, a.at("accept", i))
			s.digits(at+", average sample", e.key("asn_complete"), 10, a.at("asn", i))
			s.digits(at+", average sample, second curtailed", e.key("asn_curtailed_second_sample_on_rejection"), 10, a.at("asn_curtailed", i))
		}
	}
	return s
}

func sequentials(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("sequential", "source").text())
	for _, c := range f.key("sequential", "cases").list() {
		var n []any
		for _, row := range c.key("table").list() {
			n = append(n, row.key("n").raw())
		}
		a := ask("lot-sequential", input{"p1": c.key("p1").raw(), "alpha": c.key("alpha").raw(), "p2": c.key("p2").raw(), "beta": c.key("beta").raw(), "n": n})
		name := fmt.Sprintf("sequential plan %s, %s", c.key("p1").text(), c.key("p2").text())
		for _, k := range []string{"h1", "h2", "slope"} {
			s.digits(name+", "+k, c.key(k), 9, a.at(k))
		}
		for i, row := range c.key("table").list() {
			for _, k := range [][2]string{{"accept_if_at_most", "accept_at_most"}, {"reject_if_at_least", "reject_at_least"}} {
				label := fmt.Sprintf("%s, %s after %s", name, k[1], row.key("n").text())
				if row.has(k[0]) {
					s.whole(label, row.key(k[0]).float(), a.at(k[1], i))
				} else {
					s.absent(label, a, k[1], i)
				}
			}
		}
	}
	return s
}

func handbookLots(all *sheet, book node) *sheet {
	e := example(book, "6.2.3.2")
	s := all.from(FromMemory, e.key("source").text())
	par, pub, k := e.key("parameters"), e.key("published"), e.key("computed")
	in := input{"n": par.key("n").raw(), "c": par.key("c").raw(), "fractions": e.key("p").raw(), "model": "binomial"}
	endless := ask("lot", in)
	for i, p := range e.key("p").list() {
		at := "single plan 52/3, p = " + p.text()
		if !pub.key("pa").list()[i].null() {
			s.within(at+", acceptance, printed", pub.key("pa").list()[i].float(), 0.0005*(1+1e-6), "half a unit of the third decimal", endless.at("accept", i))
		}
		if !pub.key("aoq").list()[i].null() {
			s.within(at+", outgoing fraction, printed", pub.key("aoq").list()[i].float(), 0.00005*(1+1e-6), "half a unit of the fourth decimal", endless.at("aoq", i))
		}
		s.digits(at+", acceptance", k.key("pa_binomial").list()[i], 10, endless.at("accept", i))
		s.digits(at+", outgoing fraction", k.key("aoq_large_lot_p_times_pa").list()[i], 10, endless.at("aoq", i))
	}
	whole := ask("lot", input{"n": par.key("n").raw(), "c": par.key("c").raw(), "lot": par.key("N").raw(), "fractions": pub.key("ati_p").raw(), "model": "binomial"})
	for i, want := range pub.key("ati").list() {
		at := fmt.Sprintf("single plan 52/3 of lots of 10000, p = %s, total inspection", pub.key("ati_p").list()[i].text())
		s.within(at+", printed", want.float(), 1, "one unit, as the source says", whole.at("ati", i))
		s.digits(at, k.key("ati").list()[i], 10, whole.at("ati", i))
	}
	d := example(book, "6.2.4")
	t := all.from(Published, d.key("source").text()+"; risks and sample numbers computed")
	for _, name := range [][2]string{{"plan_equal_samples", "plan_equal_samples"}, {"plan_double_second_sample", "plan_double_second_sample"}, {"asn_example_plan", "asn_example"}} {
		plan := d.key("published", name[0])
		for _, row := range d.key("computed", name[1]).list() {
			a := ask("lot-double", input{
				"n1": plan.key("n1").raw(), "c1": plan.key("c1").raw(), "r1": plan.key("c2").int() + 1, "n2": plan.key("n2").raw(), "c2": plan.key("c2").raw(),
				"fractions": []any{row.key("p").raw()}, "model": "binomial",
			})
			at := fmt.Sprintf("%s, p = %s", name[0], row.key("p").text())
			t.digits(at+", accepted on the first", row.key("accept_on_first"), 10, a.at("accept_first", 0))
			t.digits(at+", rejected on the first", row.key("reject_on_first"), 8, a.at("reject_first", 0))
			t.digits(at+", accepted", row.key("accept_total"), 10, a.at("accept", 0))
			t.digits(at+", average sample", row.key("asn"), 10, a.at("asn", 0))
		}
	}
	q := example(book, "6.2.6")
	u := all.from(FromMemory, q.key("source").text())
	in = input{}
	for _, name := range []string{"p1", "alpha", "p2", "beta"} {
		in[name] = q.key("parameters", name).raw()
	}
	a := ask("lot-sequential", in)
	for _, name := range []string{"h1", "h2", "slope"} {
		u.printed("item by item plan, "+name+", printed", q.key("published", name), a.at(name))
		u.digits("item by item plan, "+name, q.key("computed", name), 10, a.at(name))
	}
	s.cases = append(append(s.cases, t.cases...), u.cases...)
	return s
}

// standardEntries are the recalled tables of ISO 2859-1, and a check that does not rest on
// memory: acceptance at the AQL follows the pattern that the standard aims at.
func standardEntries(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text()+"; not seen in print, confirm against a copy of the standard before relying on it")
	for _, row := range f.key("code_letters").list() {
		for level, k := range []string{"level_I", "level_II", "level_III"} {
			sizes := []node{row.key("lot_from")}
			if row.has("lot_to") {
				sizes = append(sizes, row.key("lot_to"))
			}
			for _, size := range sizes {
				a := ask("lot-standard", input{"lot": size.raw(), "level": level + 1, "aql": 1.0})
				want := row.key(k).text()
				s.whole(fmt.Sprintf("lot of %s, level %d, letter %s (1 = yes)", size.text(), level+1, want), 1, func() (float64, float64, error) {
					v, err := a.value("letter")
					if err == nil && v == want {
						return 1, 0, nil
					}
					return 0, 0, err
				})
			}
		}
	}
	letters := f.key("sample_sizes").keys()
	slices.Sort(letters)
	for _, letter := range letters {
		reduced := ask("lot-standard", input{"letter": letter, "aql": 1.0})
		s.whole("letter "+letter+", sample of reduced inspection", f.key("reduced_sample_sizes", letter).float(), reduced.at("reduced_n"))
	}
	for _, severity := range []string{"normal", "tightened"} {
		for _, e := range f.key(severity + "_single").list() {
			letter := e.key("code_letter").text()
			a := ask("lot-standard", input{"letter": letter, "aql": e.key("aql_percent").raw(), "severity": severity})
			name := fmt.Sprintf("%s inspection, letter %s, AQL %s", severity, letter, e.key("aql_percent").text())
			s.whole(name+", sample", f.key("sample_sizes", letter).float(), a.at("n"))
			s.whole(name+", acceptance number", e.key("ac").float(), a.at("c"))
			if severity == "normal" {
				p := e.key("aql_percent").float() / 100
				oc := ask("lot", input{"n": e.key("n").raw(), "c": e.key("ac").raw(), "fractions": []float64{p}, "model": "binomial"})
				s.within(name+", acceptance at the AQL", 0.9325, 0.0625, "between 0.87 and 0.995, the pattern of the table", oc.at("accept", 0))
			}
		}
	}
	return s
}

// switching runs the rules that the file states in words through the machine.
func switching(all *sheet, f node) *sheet {
	s := all.from(FromMemory, f.key("source").text()+", switching rules; confirm against a copy of the standard before relying on it")
	lots := func(pattern string, number int) []map[string]any {
		var out []map[string]any
		for _, c := range pattern {
			ok := c == 'a'
			out = append(out, map[string]any{"accepted": ok, "acceptance_number": number, "accepted_tighter": ok, "reduced_allowed": true})
		}
		return out
	}
	rule := func(name string) string { return f.key("switching", name).text() }
	for _, c := range []struct {
		rule, pattern, start, after string
		number                      int
	}{
		{"normal_to_tightened", "raaar", "normal", "tightened", 1},
		{"normal_to_tightened", "raaaar", "normal", "normal", 1},
		{"tightened_to_normal", "aaaaa", "tightened", "normal", 1},
		{"tightened_to_normal", "aaaaraaaa", "tightened", "tightened", 1},
		{"discontinue", "rararaarr", "tightened", "discontinued", 1},
		{"discontinue", "rararaar", "tightened", "tightened", 1},
		{"switching_score_single", "aaaaaaaaaa", "normal", "reduced", 2},
		{"switching_score_single", "aaaaaaaaa", "normal", "normal", 2},
		{"switching_score_single", "aaaaaaaaaaaaaaa", "normal", "reduced", 1},
		{"switching_score_single", "aaaaaaaaaaaaaa", "normal", "normal", 1},
		{"normal_to_reduced", "aaaaaaaaaraaaaaaaaa", "normal", "normal", 2},
		{"reduced_to_normal", "r", "reduced", "normal", 1},
	} {
		a := ask("lot-switching", input{"start": c.start, "lots": lots(c.pattern, c.number)})
		s.whole(fmt.Sprintf("%s: from %s, lots %s (a accepted, r not, Ac %d) lead to %s (1 = yes)", rule(c.rule), c.start, c.pattern, c.number, c.after), 1,
			func() (float64, float64, error) {
				v, err := a.value("after", len(c.pattern)-1)
				if err == nil && v == c.after {
					return 1, 0, nil
				}
				return 0, 0, err
			})
	}
	return s
}
