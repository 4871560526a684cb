package qualify

import (
	"fmt"
	"math"

	"holdfast/internal/spc/dist"
)

// countCases are charts of counts and proportions, Laney's charts, exact limits and
// their run lengths.
func countCases() ([]Case, error) {
	all := &sheet{}
	f, book := open("attributes.json"), open("nist_handbook.json")
	var sheets []*sheet
	boards := f.key("c_chart_printed_circuit")
	s := all.from(FromMemory, boards.key("source").text())
	addCounts(s, "circuit boards", boards.key("computed"), ask("counts", input{"chart": "c", "counts": boards.key("data").raw()}), len(boards.key("data").list()))
	var kept []float64
	for i, x := range boards.key("data").floats() {
		if i != 5 && i != 19 {
			kept = append(kept, x)
		}
	}
	addCounts(s, "circuit boards without 6 and 20", boards.key("computed_without_rows_6_and_20"), ask("counts", input{"chart": "c", "counts": kept}), len(kept))
	sheets = append(sheets, s)

	orders := f.key("p_chart_variable_n")
	n := len(orders.key("n").list())
	s = all.from(FromMemory, orders.key("source").text())
	addCounts(s, "purchase orders", orders.key("computed"), ask("counts", input{"chart": "p", "counts": orders.key("d").raw(), "sizes": orders.key("n").raw()}), n)
	sheets = append(sheets, s)
	s = all.from(Computed, f.key("laney_p_prime_purchase_orders", "source").text())
	addCounts(s, "purchase orders, Laney", f.key("laney_p_prime_purchase_orders", "computed"), ask("counts", input{"chart": "laney-p", "counts": orders.key("d").raw(), "sizes": orders.key("n").raw()}), n)
	sheets = append(sheets, s)

	for _, c := range []struct{ name, key, chart, counts, sizes string }{
		{"dyed cloth", "u_chart_variable_n", "u", "counts", "units"},
		{"constructed proportions, Laney", "laney_p_prime", "laney-p", "d", "n"},
		{"constructed rates, Laney", "laney_u_prime", "laney-u", "counts", "units"},
	} {
		e := f.key(c.key)
		status := Computed
		if c.chart == "u" {
			status = FromMemory
		}
		s = all.from(status, e.key("source").text())
		addCounts(s, c.name, e.key("computed"), ask("counts", input{"chart": c.chart, "counts": e.key(c.counts).raw(), "sizes": e.key(c.sizes).raw()}), len(e.key(c.counts).list()))
		if c.chart == "u" {
			sheets = append(sheets, s)
			continue
		}
		plain := ask("counts", input{"chart": c.chart[len("laney-"):], "counts": e.key(c.counts).raw(), "sizes": e.key(c.sizes).raw()})
		name := "plain_p_rows_outside"
		if c.chart == "laney-u" {
			name = "plain_u_rows_outside"
		}
		s.whole(c.name+", points outside the plain limits that differ", 0, differing(indices(e.key(name)), plain.outside))
		sheets = append(sheets, s)
	}
	np := f.key("np_chart")
	s = all.from(Computed, np.key("source").text())
	sizes := make([]int, len(np.key("d").list()))
	for i := range sizes {
		sizes[i] = np.key("n").int()
	}
	addCounts(s, "wafers, np", np.key("computed"), ask("counts", input{"chart": "np", "counts": np.key("d").raw(), "sizes": sizes}), len(sizes))
	sheets = append(sheets, s, handbookCounts(all, book, sizes), exactLimits(all, f), countLengths(all, f))
	return all.join(sheets...), firstError(f, book)
}

// addCounts compares centre, limits and points outside. The files write an absent lower
// limit as 0.
func addCounts(s *sheet, name string, want node, a *answer, n int) {
	s.digits(name+", centre", want.key("center"), 10, a.at("center"))
	if want.has("sigma_z") {
		s.digits(name+", spread between subgroups", want.key("sigma_z"), 10, a.at("between"))
	}
	for _, side := range [][2]string{{"lcl", "lower"}, {"ucl", "upper"}} {
		limits := want.key(side[0])
		for i := range n {
			w := limits
			if _, one := limits.v.([]any); one {
				w = limits.list()[i]
			} else if i > 0 {
				break
			}
			label := fmt.Sprintf("%s, %s limit of sample %d", name, side[1], i+1)
			if w.float() == 0 {
				s.absent(label, a, side[1], i)
			} else {
				s.digits(label, w, 10, a.at(side[1], i))
			}
		}
	}
	s.whole(name+", points outside that differ", 0, differing(indices(want.key("rows_outside")), a.outside))
}

// outside lists the points beyond the limits of an answer to counts.
func (a *answer) outside() ([]int, error) {
	points, err := a.value("points")
	if err != nil {
		return nil, err
	}
	var out []int
	for i := range points.([]any) {
		x, err := a.number("points", i)
		if err != nil {
			return nil, err
		}
		lower, errL := a.value("lower", i)
		upper, errU := a.value("upper", i)
		if errL != nil || errU != nil {
			return nil, fmt.Errorf("calc counts answers without limits for point %d", i)
		}
		l, hasL := lower.(float64)
		u, hasU := upper.(float64)
		if hasL && x < l || hasU && x > u {
			out = append(out, i)
		}
	}
	return out, nil
}

func handbookCounts(all *sheet, book node, sizes []int) *sheet {
	wafers := example(book, "6.3.3.1")
	s := all.from(FromMemory, wafers.key("source").text())
	a := ask("counts", input{"chart": "c", "counts": wafers.key("data").raw()})
	for _, k := range [][]any{{"center", "center"}, {"ucl", "upper", 0}, {"lcl", "lower", 0}} {
		s.digits("defects on wafers, "+k[0].(string), wafers.key("computed", k[0].(string)), 10, a.at(k[1:]...))
	}
	s.whole("defects on wafers, points outside that differ", 0, differing(indices(wafers.key("computed", "rows_outside")), a.outside))
	chips := example(book, "6.3.3.2")
	p := all.from(FromMemory, chips.key("source").text())
	a = ask("counts", input{"chart": "p", "counts": chips.key("data").raw(), "sizes": sizes})
	for _, k := range [][]any{{"center", "center"}, {"ucl", "upper", 0}, {"lcl", "lower", 0}} {
		p.printed("misregistered chips, "+k[0].(string)+", printed", chips.key("published", k[0].(string)), a.at(k[1:]...))
		p.digits("misregistered chips, "+k[0].(string), chips.key("computed", k[0].(string)), 10, a.at(k[1:]...))
	}
	p.whole("misregistered chips, points outside that differ", 0, differing(indices(chips.key("computed", "rows_outside")), a.outside))
	s.cases = append(s.cases, p.cases...)
	return s
}

func exactLimits(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("exact_limits", "source").text())
	for _, c := range f.key("exact_limits", "cases").list() {
		var a *answer
		var name string
		var above, below func(k int) (float64, error)
		if c.key("dist").text() == "binomial" {
			n, p := c.key("n").int(), c.key("p").float()
			name = fmt.Sprintf("exact limits, binomial n = %d, p = %v, tail %v", n, p, c.key("tail").text())
			a = ask("counts", input{"chart": "np", "counts": []int{0}, "sizes": []int{n}, "center": float64(n) * p, "limits": "probability", "tail": c.key("tail").raw()})
			above = func(k int) (float64, error) { return dist.BinomialSurvival(k, n, p) }
			below = func(k int) (float64, error) { return dist.BinomialCDF(k-1, n, p) }
		} else {
			mean := c.key("mean").float()
			name = fmt.Sprintf("exact limits, Poisson mean %v, tail %v", mean, c.key("tail").text())
			a = ask("counts", input{"chart": "c", "counts": []int{0}, "center": mean, "limits": "probability", "tail": c.key("tail").raw()})
			above = func(k int) (float64, error) { return dist.PoissonSurvival(k, mean) }
			below = func(k int) (float64, error) { return dist.PoissonCDF(k-1, mean) }
		}
		upper, lower := c.key("upper").int(), c.key("lower").int()
		s.whole(name+", upper", float64(upper), a.at("upper", 0))
		s.digits(name+", chance above", c.key("prob_above"), 10, value(func() (float64, error) { return above(upper) }))
		if lower == 0 {
			s.absent(name+", lower", a, "lower", 0)
			continue
		}
		s.whole(name+", lower", float64(lower), a.at("lower", 0))
		s.digits(name+", chance below", c.key("prob_below"), 10, value(func() (float64, error) { return below(lower) }))
	}
	return s
}

// countLengths are the chances of a signal at the program's own 3 sigma limits.
func countLengths(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("run_length", "source").text())
	for _, c := range f.key("run_length", "c").list() {
		a := ask("counts", input{"chart": "c", "counts": []int{0}, "center": c.key("c0").raw()})
		for _, e := range c.key("cases").list() {
			mean := e.key("mean").float()
			name := fmt.Sprintf("c chart at %v, mean %v", c.key("c0").text(), mean)
			chance := a.chance(func(k int) (float64, error) { return dist.PoissonCDF(k, mean) }, func(k int) (float64, error) { return dist.PoissonSurvival(k, mean) })
			s.digits(name+", chance of a signal", e.key("prob_signal"), 10, chance)
			s.digits(name+", run length", e.key("arl"), 9, inverse(chance))
		}
	}
	for _, c := range f.key("run_length", "p").list() {
		n := c.key("n").int()
		a := ask("counts", input{"chart": "np", "counts": []int{0}, "sizes": []int{n}, "center": float64(n) * c.key("p0").float()})
		for _, e := range c.key("cases").list() {
			p := e.key("p").float()
			name := fmt.Sprintf("np chart at n = %d, p = %v, true p %v", n, c.key("p0").text(), p)
			chance := a.chance(func(k int) (float64, error) { return dist.BinomialCDF(k, n, p) }, func(k int) (float64, error) { return dist.BinomialSurvival(k, n, p) })
			s.digits(name+", chance of a signal", e.key("prob_signal"), 10, chance)
			s.digits(name+", run length", e.key("arl"), 9, inverse(chance))
		}
	}
	return s
}

// chance is the probability that a count lies beyond the limits of an answer.
func (a *answer) chance(cdf, survival func(int) (float64, error)) figure {
	return value(func() (float64, error) {
		upper, err := a.number("upper", 0)
		if err != nil {
			return 0, err
		}
		total, err := survival(int(math.Floor(upper + 1e-9)))
		if err != nil {
			return 0, err
		}
		lower, err := a.value("lower", 0)
		if l, has := lower.(float64); err == nil && has {
			below, err := cdf(int(math.Ceil(l-1e-9)) - 1)
			return total + below, err
		}
		return total, err
	})
}

func inverse(f figure) figure {
	return func() (float64, float64, error) {
		x, se, err := f()
		return 1 / x, se, err
	}
}
