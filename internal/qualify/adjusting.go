package qualify

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// series is the length of the simulated processes.
const series = 1500

// adjustCases are the known behaviour of adjusted processes and worked set-ups.
func adjustCases() ([]Case, error) {
	f := open("adjust.json")
	all := &sheet{}
	grubbs := all.from(Published, f.key("grubbs", "source").text())
	addSetup(grubbs, "harmonic set-up", f.key("grubbs", "worked_harmonic"), 0)
	worked := f.key("grubbs", "worked_extended")
	addSetup(grubbs, "extended set-up", worked, worked.key("sigma2_over_setup_variance").float())
	for _, c := range f.key("grubbs", "extended").list() {
		n := c.key("adjustments").int()
		tries := make([]float64, n)
		tries[n-1] = 1
		a := ask("setup", input{"y": tries, "target": 0, "ratio": c.key("sigma2_over_setup_variance").raw()})
		grubbs.digits(fmt.Sprintf("coefficient of try %d, variance ratio %s", n, c.key("sigma2_over_setup_variance").text()), c.key("coefficient"), 9,
			a.through(func(x float64) (float64, error) { return -x, nil }, "adjust", n-1))
	}
	for _, c := range f.key("grubbs", "offset_variance").list() {
		// The offset left after n tries is minus their mean error: each try's error weighs 1/n.
		n := c.key("adjustments").int()
		grubbs.digits(fmt.Sprintf("variance of the offset after %d tries", n), c.key("offset_variance_over_sigma2"), 9, harmonicVariance(n))
	}
	funnel := all.from(Published, f.key("funnel", "source").text())
	a := controlled(1, series)
	ratio := 2.0
	for _, c := range f.key("funnel", "cases").list() {
		if c.key("rule").int() == 2 && c.key("t").int() > 1 {
			ratio = c.key("variance_ratio").float()
		}
	}
	funnel.add("full compensation, ratio of mean squares", ratio, 0, 0, "four standard errors", a.ratio())
	funnel.add("full compensation, lag-1 correlation", f.key("funnel", "rule_2_lag1_autocorrelation", "exact").float(), 0, 1/math.Sqrt(series), "four standard errors", a.at("lag1"))
	integral := all.from(Published, f.key("integral_white_noise", "source").text())
	for _, c := range f.key("integral_white_noise", "cases").list() {
		g := c.key("G").float()
		if g >= 1.75 {
			continue // so near 2 the series swings for thousands of subgroups before it settles
		}
		integral.add(fmt.Sprintf("integral action of gain %v, ratio of mean squares", g), c.key("variance_ratio").float(), 0, 0, "four standard errors", controlled(g, series).ratio())
	}
	return all.join(grubbs, funnel, integral), f.err()
}

func addSetup(s *sheet, name string, c node, ratio float64) {
	var y []float64
	for _, row := range c.key("rows").list() {
		y = append(y, row.key("measured").float())
	}
	a := ask("setup", input{"y": y, "target": 0, "ratio": ratio})
	for i, row := range c.key("rows").list() {
		s.digits(fmt.Sprintf("%s, adjustment after try %d", name, i+1), row.key("adjustment"), 9, a.at("adjust", i))
	}
}

// harmonicVariance finds the variance of what is left after n tries from the topic's own
// adjustments: with unit errors, one try at a time, the offsets add in squares.
func harmonicVariance(n int) figure {
	return value(func() (float64, error) {
		total := 0.0
		for j := range n {
			offset := 0.0
			var y []float64
			for i := range n {
				e := 0.0
				if i == j {
					e = 1
				}
				y = append(y, offset+e)
				a := ask("setup", input{"y": y, "target": 0})
				step, err := a.number("adjust", i)
				if err != nil {
					return 0, err
				}
				offset += step
			}
			total += offset * offset
		}
		return total, nil
	})
}

// controlled is the audit of a stable process that integral action of the given gain
// adjusts after every subgroup; a gain of 1 compensates the last deviation in full.
func controlled(gain float64, n int) *answer {
	rng := rand.New(rand.NewPCG(11, 4))
	y := make([]float64, n)
	made := []map[string]any{}
	setting := 0.0
	for i := range y {
		y[i] = rng.NormFloat64() + setting
		step := -gain * y[i]
		if i+1 < n {
			made = append(made, map[string]any{"before": i + 1, "size": step, "prompted": false})
		}
		setting += step
	}
	return ask("adjustments", input{"y": y, "target": 0, "adjustments": made, "seed": 3})
}

// ratio is the audit's ratio with the standard error that its interval implies.
func (a *answer) ratio() figure {
	return func() (float64, float64, error) {
		var v [3]float64
		for i, path := range [][]any{{"ratio"}, {"interval", 0}, {"interval", 1}} {
			x, err := a.number(path...)
			if err != nil {
				return 0, 0, err
			}
			v[i] = x
		}
		return v[0], (v[2] - v[1]) / (2 * 1.959964), nil
	}
}
