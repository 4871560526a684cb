package qualify

import (
	"fmt"

	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// rule is a run rule as an input has it.
type rule = map[string]any

// flagged names the rules of run_rule_flags.json that the program has: the others count
// points that are not themselves in the zone, or want both sides, which its rules do not.
var flagged = []struct {
	name string
	rule rule
}{
	{"beyond_3", rule{"kind": "beyond", "z": 3}},
	{"run_7_one_side", rule{"kind": "one-side", "m": 7}},
	{"run_8_one_side", rule{"kind": "one-side", "m": 8}},
	{"run_9_one_side", rule{"kind": "one-side", "m": 9}},
	{"2of3_beyond_2_current_point_in_zone", rule{"kind": "k-of-m", "k": 2, "m": 3, "z": 2}},
	{"4of5_beyond_1_current_point_in_zone", rule{"kind": "k-of-m", "k": 4, "m": 5, "z": 1}},
	{"trend_6_points", rule{"kind": "rising-or-falling", "m": 6}},
	{"trend_7_points", rule{"kind": "rising-or-falling", "m": 7}},
	{"alternating_14_points", rule{"kind": "alternating", "m": 14}},
	{"15_within_1", rule{"kind": "within", "m": 15, "z": 1}},
	{"8_beyond_1_any_side", rule{"kind": "outside", "m": 8, "z": 1}},
}

func ruleCases() ([]Case, error) {
	f := open("run_rule_flags.json")
	s := &sheet{source: f.key("source").text() + " (cases/run_rule_flags.json); rules of Western Electric (1956) and Nelson (1984)", status: Computed}
	var rules []rule
	for _, r := range flagged {
		rules = append(rules, r.rule)
	}
	for _, c := range f.key("cases").list() {
		a := ask("rules", input{"z": c.key("z").raw(), "rules": rules})
		for i, r := range flagged {
			want := indices(c.key("points", r.name))
			s.whole(fmt.Sprintf("series %s, %s: points that differ (of %d)", c.key("name").text(), r.name, len(want)), 0,
				differing(want, func() ([]int, error) { return a.fired(i) }))
		}
	}
	return s.cases, f.err()
}

// fired lists the points at which one rule of an answer holds.
func (a *answer) fired(rule int) ([]int, error) {
	v, err := a.value("fired")
	if err != nil {
		return nil, err
	}
	out := []int{}
	for i := range v.([]any) {
		r, err := a.number("fired", i, "rule")
		if err != nil {
			return nil, err
		}
		if index, err := a.number("fired", i, "index"); err != nil {
			return nil, err
		} else if int(r) == rule {
			out = append(out, int(index))
		}
	}
	return out, nil
}

// zoneRules are the names of the run length tables that the program has as rules.
var zoneRules = map[string]rule{
	"1":            {"kind": "beyond", "z": 3},
	"2of3":         {"kind": "k-of-m", "k": 2, "m": 3, "z": 2},
	"4of5":         {"kind": "k-of-m", "k": 4, "m": 5, "z": 1},
	"run7":         {"kind": "one-side", "m": 7},
	"run8":         {"kind": "one-side", "m": 8},
	"run9":         {"kind": "one-side", "m": 9},
	"15within1":    {"kind": "within", "m": 15, "z": 1},
	"8beyond1_any": {"kind": "outside", "m": 8, "z": 1},
}

// lengthCases are run lengths that are computed without simulation.
func lengthCases() ([]Case, error) {
	f := open("arl.json")
	all := &sheet{}
	zones := zoneLengths(all, f)
	power := all.from(Computed, f.key("xbar_power", "source").text())
	for _, c := range f.key("xbar_power", "cases").list() {
		n, d := c.key("n").float(), c.key("shift_in_process_sigma").float()
		a := ask("runlength-pair", input{"chart": "xbar-s", "n": n, "location": []rule{zoneRules["1"]}, "shift": d})
		name := fmt.Sprintf("X-bar chart, n = %v, shift of %v sigma", n, d)
		power.digits(name+", run length", c.key("arl"), 9, a.at("arl", 0))
		power.digits(name+", chance of a signal", c.key("prob_signal_per_subgroup"), 9, inverse(a.at("arl", 0)))
	}
	return all.join(zones, closedForms(all, f), averageLengths(all, f), sumLengths(all, f), power), f.err()
}

// closedForms are run lengths of success runs, (1-p^r)/((1-p)p^r).
func closedForms(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("closed_forms", "source").text())
	for _, c := range [][2]string{
		{"run8_alone_in_control", "run8"}, {"run9_alone_in_control", "run9"},
		{"15within1_alone_in_control", "15within1"}, {"8beyond1_any_alone_in_control", "8beyond1_any"},
	} {
		a := ask("runlength", input{"rules": []rule{zoneRules[c[1]]}, "shifts": []float64{0}})
		s.digits("success run, "+c[0], f.key("closed_forms", "values", c[0]), 9, a.at("arl", 0))
	}
	return s
}

func zoneLengths(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("run_rules", "source").text())
	printed := all.from(FromMemory, "Champ and Woodall (1987), Technometrics 29")
	for _, c := range f.key("run_rules", "cases").list() {
		name := ""
		var rules []rule
		for _, r := range c.key("rules").list() {
			rule, has := zoneRules[r.text()]
			if !has { // a contrast case that is no rule of the program
				rules = nil
				break
			}
			name += " " + r.text()
			rules = append(rules, rule)
		}
		if rules == nil {
			continue
		}
		a := ask("runlength", input{"rules": rules, "shifts": c.key("shift").raw()})
		for i, want := range c.key("arl").list() {
			label := fmt.Sprintf("rules%s, shift %s", name, c.key("shift").list()[i].text())
			s.digits(label, want, 9, a.at("arl", i))
			if c.has("published") {
				printed.printed(label+", printed", c.key("published", "arl").list()[i], a.at("arl", i))
			}
		}
		for _, at := range []int{0, 1} {
			addDistribution(s, fmt.Sprintf("rules%s, shift %d", name, at), c.key(fmt.Sprintf("run_length_at_shift_%d", at)), rules, float64(at))
		}
	}
	s.cases = append(s.cases, printed.cases...)
	return s
}

// addDistribution compares the distribution of the run length, not only its mean.
func addDistribution(s *sheet, name string, want node, rules []rule, shift float64) {
	var length *runlength.RunLength
	get := func() (runlength.RunLength, error) {
		if length != nil {
			return *length, nil
		}
		compiled := make([]watch.Rule, len(rules))
		for i, r := range rules {
			compiled[i] = watch.Rule{Kind: watch.Kind(r["kind"].(string)), K: whole(r["k"]), M: whole(r["m"]), Z: float64(whole(r["z"]))}
		}
		l, err := runlength.Rules(compiled, []float64{shift}, runlength.Options{})
		if err != nil {
			return runlength.RunLength{}, err
		}
		length = &l[0]
		return l[0], nil
	}
	for _, p := range []string{"0.05", "0.1", "0.25", "0.5", "0.75", "0.9", "0.95"} {
		if !want.key("percentiles").has(p) {
			continue // beyond the points to which the file was computed
		}
		q := jsonNumber(p)
		s.whole(fmt.Sprintf("%s, quantile %s", name, p), want.key("percentiles", p).float(), value(func() (float64, error) {
			l, err := get()
			if err != nil {
				return 0, err
			}
			at, err := q.Float64()
			if err != nil {
				return 0, err
			}
			return l.Quantile(at)
		}))
	}
	for _, n := range []int{1, 5, 10, 20, 25, 50, 100, 200} {
		chance := want.key("prob_signal_by_point", fmt.Sprint(n))
		// The source took its chances from 1 - survival, which holds to some 1e-14.
		s.within(fmt.Sprintf("%s, signalled by point %d", name, n), chance.float(), significant(chance.float(), 9)+1e-14, "9 significant digits, at least 1e-14",
			value(func() (float64, error) {
				l, err := get()
				return 1 - l.Survival(n), err
			}))
	}
}

// whole reads a number of a rule, 0 where it has none.
func whole(v any) int {
	n, _ := v.(int)
	return n
}

func averageLengths(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("ewma", "source").text())
	printed := all.from(FromMemory, "Lucas and Saccucci (1990), Technometrics 32, as tabulated in Montgomery, Introduction to Statistical Quality Control")
	for _, c := range f.key("ewma", "cases").list() {
		for _, kind := range [][2]string{{"constant", "arl_zero_state"}, {"exact", "arl_zero_state_exact_time_varying_limits"}} {
			a := ask("runlength", input{"ewma": rule{"lambda": c.key("lambda").raw(), "L": c.key("L").raw(), "limits": kind[0]}, "shifts": c.key("shift").raw()})
			for i, want := range c.key(kind[1]).list() {
				label := fmt.Sprintf("EWMA lambda %s, L %s, %s limits, shift %s", c.key("lambda").text(), c.key("L").text(), kind[0], c.key("shift").list()[i].text())
				s.digits(label, want, 8, a.at("arl", i))
				if kind[0] == "constant" && c.has("published") {
					printed.printed(label+", printed", c.key("published", "arl").list()[i], a.at("arl", i))
				}
			}
		}
	}
	for _, c := range f.key("ewma", "design_constant_limits").list() {
		a := ask("runlength", input{"ewma": rule{"lambda": c.key("lambda").raw(), "L": c.key("L").raw(), "limits": "constant"}, "shifts": []float64{0}})
		// L is printed to ten digits; the run length feels its last one some tenfold.
		s.digits(fmt.Sprintf("EWMA lambda %s, L %s, designed for", c.key("lambda").text(), c.key("L").text()), c.key("arl_in_control"), 8, a.at("arl", 0))
	}
	s.cases = append(s.cases, printed.cases...)
	return s
}

func sumLengths(all *sheet, f node) *sheet {
	s := all.from(Computed, f.key("cusum", "source").text())
	printed := all.from(FromMemory, "Lucas (1976), Lucas and Crosier (1982), as tabulated in Montgomery, Introduction to Statistical Quality Control")
	for _, c := range f.key("cusum", "cases").list() {
		for _, kind := range []struct {
			name, table, book string
			head              float64
		}{
			{"from zero", "two_sided_zero_state_arl", "two_sided_zero_state", 0},
			{"with head start h/2", "two_sided_headstart_h_over_2_arl", "two_sided_headstart", 0.5},
		} {
			a := ask("runlength", input{"cusum": rule{"k": c.key("k").raw(), "h": c.key("h").raw(), "head_start": kind.head}, "shifts": c.key("shift").raw()})
			for i, want := range c.key(kind.table).list() {
				label := fmt.Sprintf("CUSUM k %s, h %s %s, shift %s", c.key("k").text(), c.key("h").text(), kind.name, c.key("shift").list()[i].text())
				s.digits(label, want, 8, a.at("arl", i))
				printed.printed(label+", printed", c.key("published", kind.book).list()[i], a.at("arl", i))
			}
		}
	}
	design := all.from(Computed, f.key("cusum", "source").text()+"; h as printed in Hawkins (1993), Journal of Quality Technology 25, agrees to its two decimals")
	for _, c := range f.key("cusum", "design_h").list() {
		a := ask("runlength", input{"cusum": rule{"k": c.key("k").raw(), "h": c.key("h").raw()}, "shifts": []float64{0}})
		design.digits(fmt.Sprintf("CUSUM k %s, h %s, designed for", c.key("k").text(), c.key("h").text()), c.key("two_sided_in_control_arl"), 8, a.at("arl", 0))
	}
	s.cases = append(append(s.cases, printed.cases...), design.cases...)
	return s
}
