package qualify

import "fmt"

// changeCases are estimates of the moment of change. The file counts samples from 1 and
// names the last one before the change, 0 when there is none.
func changeCases() ([]Case, error) {
	f := open("changepoint.json")
	s := &sheet{source: f.key("source").text(), status: Computed}
	for _, c := range f.key("cases").list() {
		name := c.key("name").text()
		for _, key := range []string{"known_mean", "known_mean_signal_at_45", "known_mean_signal_at_29"} {
			if c.has(key) {
				addLevel(s, name, c, c.key(key))
			}
		}
		switch {
		case c.has("counts"):
			k := c.key("known_rate")
			a := ask("changepoint", input{"counts": c.key("counts").raw(), "center": c.key("c0").raw(), "model": "poisson"})
			addCountChange(s, name, k, a, c.key("c0").float(), k.key("rate_after"))
		case c.has("d"):
			k := c.key("known_p")
			sizes := make([]int, len(c.key("d").list()))
			for i := range sizes {
				sizes[i] = c.key("n").int()
			}
			a := ask("changepoint", input{"counts": c.key("d").raw(), "sizes": sizes, "center": c.key("p0").raw(), "model": "binomial"})
			addCountChange(s, name, k, a, c.key("p0").float(), k.key("p_after"))
		}
	}
	return s.cases, f.err()
}

func addLevel(s *sheet, name string, c, k node) {
	n := k.key("T").int()
	mu0, sigma := c.key("mu0").float(), 1.0
	if c.has("sigma") {
		sigma = c.key("sigma").float()
	}
	x := c.key("x").floats()
	label := fmt.Sprintf("series %s, signal at %d", name, n)
	a := ask("changepoint", input{"means": x[:n], "center": mu0, "sigma": sigma})
	s.whole(label+", last before the change", k.key("tau_hat_last_in_control").float()-1, a.at("after"))
	s.digits(label+", mean after", k.key("mean_after"), 9, a.at("level"))
	// The file's profile is (T-t)(mean - mu0)² without sigma; its maximum is the statistic.
	best := k.key("profile").list()[k.key("tau_hat_last_in_control").int()]
	s.digits(label+", statistic times variance", best, 7, a.through(func(v float64) (float64, error) { return v * sigma * sigma, nil }, "statistic"))
	// Every other moment of the profile is checked through a series that begins there:
	// the likely set is where the profile lies at most 7.35 variances below its maximum.
	var likely []int
	for t, v := range k.key("profile").floats() {
		if best.float()-v <= 7.35*sigma*sigma {
			likely = append(likely, t-1)
		}
	}
	s.whole(label+", likely moments that differ", 0, differing(likely, func() ([]int, error) { return a.whole("likely") }))
}

func addCountChange(s *sheet, name string, k node, a *answer, center float64, after node) {
	s.whole("series "+name+", last before the change", k.key("tau_hat_last_in_control").float()-1, a.at("after"))
	// The statistic is twice the log likelihood ratio that the file gives.
	s.digits("series "+name+", log likelihood ratio", k.key("loglik_ratio"), 9, a.through(func(x float64) (float64, error) { return x / 2, nil }, "statistic"))
	s.digits("series "+name+", rate after", after, 9, a.through(func(x float64) (float64, error) { return x + center, nil }, "size"))
}
