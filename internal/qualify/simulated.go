package qualify

import "fmt"

// nelson builds the rules of arl_combined_tests.json by their number in Nelson's paper.
func nelson(test string, run, trend int) rule {
	switch test {
	case "1":
		return zoneRules["1"]
	case "2":
		return rule{"kind": "one-side", "m": run}
	case "3":
		return rule{"kind": "rising-or-falling", "m": trend}
	case "4":
		return rule{"kind": "alternating", "m": 14}
	case "5":
		return zoneRules["2of3"]
	case "6":
		return zoneRules["4of5"]
	case "7":
		return zoneRules["15within1"]
	case "8":
		return zoneRules["8beyond1_any"]
	}
	return nil
}

// simulatedCases are run lengths of rules that compare neighbours.
func simulatedCases() ([]Case, error) {
	f, single := open("arl_combined_tests.json"), open("arl.json")
	all := &sheet{}
	s := all.from(Computed, f.key("source").text()+" (cases/arl_combined_tests.json)")
	for _, c := range f.key("cases").list() {
		run, trend := 9, 6
		if c.has("run_pts") {
			run = c.key("run_pts").int()
		}
		if c.has("trend_pts") {
			trend = c.key("trend_pts").int()
		}
		name := "tests"
		var rules []rule
		for _, test := range c.key("tests").list() {
			name += " " + test.text()
			r := nelson(test.text(), run, trend)
			if r == nil { // a contrast case that is no rule of the program
				rules = nil
				break
			}
			rules = append(rules, r)
		}
		if rules == nil {
			continue
		}
		a := ask("runlength", input{"rules": rules, "shifts": []any{c.key("shift").raw()}})
		s.simulated(fmt.Sprintf("%s, run of %d, trend of %d, shift %s", name, run, trend, c.key("shift").text()), c.key("arl"), c.key("standard_error").float(),
			a.with([]any{"standard_error", 0}, "arl", 0))
	}
	neighbours := all.from(Computed, single.key("trend", "source").text())
	for _, kind := range []string{"trend", "alternating"} {
		for _, c := range single.key(kind, "cases").list() {
			name := map[string]string{"trend": "rising-or-falling", "alternating": "alternating"}[kind]
			a := ask("runlength", input{"rules": []rule{{"kind": name, "m": c.key("points").int()}}, "shifts": []float64{0}})
			neighbours.simulated(fmt.Sprintf("%d points %s alone", c.key("points").int(), name), c.key("arl"), 0, a.with([]any{"standard_error", 0}, "arl", 0))
		}
	}
	return all.join(s, neighbours), firstError(f, single)
}

// estimatedCases are run lengths of charts whose limits come from few subgroups.
func estimatedCases() ([]Case, error) {
	f := open("phase1.json")
	all := &sheet{}
	exact := all.from(Computed, f.key("exact_pooled_sd", "source").text())
	asked := map[string]*answer{}
	study := func(m, n int, estimator string) *answer {
		key := fmt.Sprint(m, n, estimator)
		if asked[key] == nil {
			asked[key] = ask("estimated", input{"m": m, "n": n, "estimator": estimator})
		}
		return asked[key]
	}
	for _, c := range f.key("exact_pooled_sd", "cases").list() {
		if c.key("shift_in_process_sigma").float() != 0 {
			continue // the topic answers for a process that has not changed
		}
		m, n := c.key("m").int(), c.key("n").int()
		a := study(m, n, "pooled")
		name := fmt.Sprintf("%d subgroups of %d, pooled", m, n)
		exact.digits(name+", mean false alarm rate", c.key("expected_false_alarm_rate"), 6, a.at("false_alarm"))
		exact.digits(name+", mean run length", c.key("average_arl"), 6, a.at("arl_mean"))
	}
	s := all.from(Computed, f.key("monte_carlo", "source").text())
	names := map[string]string{"pooled_sd_over_c4": "pooled", "mean_sd_over_c4": "sbar", "mean_range_over_d2": "rbar"}
	for _, c := range f.key("monte_carlo", "cases").list() {
		estimator := names[c.key("estimator").text()]
		a := study(c.key("m").int(), c.key("n").int(), estimator)
		name := fmt.Sprintf("%d subgroups of %d, %s", c.key("m").int(), c.key("n").int(), estimator)
		s.simulated(name+", mean run length", c.key("average_arl"), c.key("average_arl_se").float(), a.with([]any{"standard_error", "arl_mean"}, "arl_mean"))
		addConditional(s, name, c, a)
	}
	single := all.from(Computed, f.key("individuals_mean_moving_range", "source").text())
	for _, c := range f.key("individuals_mean_moving_range", "cases").list() {
		a := study(c.key("m").int(), 1, "mrbar")
		addConditional(single, fmt.Sprintf("%d individuals", c.key("m").int()), c, a)
	}
	return all.join(exact, s, single), f.err()
}

func addConditional(s *sheet, name string, c node, a *answer) {
	s.simulated(name+", mean false alarm rate", c.key("expected_false_alarm_rate"), c.key("expected_false_alarm_rate_se").float(), a.with([]any{"standard_error", "false_alarm"}, "false_alarm"))
	for _, q := range [][2]string{{"0.1", "arl_p10"}, {"0.5", "arl_p50"}, {"0.9", "arl_p90"}} {
		p, field := q[0], q[1]
		s.simulated(fmt.Sprintf("%s, quantile %s of the run length", name, p), c.key("percentiles_of_conditional_arl", p), c.key("percentiles_se", p).float(),
			a.with([]any{"standard_error", field}, field))
	}
}
