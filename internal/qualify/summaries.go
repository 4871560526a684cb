package qualify

import (
	"math"

	"holdfast/internal/spc/dist"
)

// summaryCases are the certified data sets of univariate statistics and of the one-way
// analysis of variance.
func summaryCases() ([]Case, error) {
	all := &sheet{}
	certified := all.from(Published, "NIST Statistical Reference Datasets, univariate summary statistics; certified values")
	t := openTable("nist_strd_univariate/certified.csv")
	for _, row := range t.list() {
		name := row.key("dataset").text()
		digits := 9
		if name == "NumAcc3" || name == "NumAcc4" {
			digits = 8 // their readings have no exact binary form, which alone costs this much
		}
		a := ask("summary", input{"x": column("nist_strd_univariate/" + name + ".csv")})
		certified.whole(name+", number of readings", row.key("n").float(), a.at("n"))
		certified.digits(name+", mean", row.key("certified_mean"), digits, a.at("mean"))
		certified.digits(name+", standard deviation", row.key("certified_sd"), digits, a.at("sd"))
		certified.digits(name+", lag-1 correlation", row.key("certified_lag1_autocorrelation"), digits, a.at("lag1"))
		exact := all.from(Computed, "exact rational arithmetic over the data of the NIST Statistical Reference Datasets")
		exact.digits(name+", mean, 20 digits", row.key("exact_mean_20_digits"), digits, a.at("mean"))
		exact.digits(name+", standard deviation, 20 digits", row.key("exact_sd_20_digits"), digits, a.at("sd"))
		exact.digits(name+", lag-1 correlation, 20 digits", row.key("exact_lag1_20_digits"), digits, a.at("lag1"))
		exact.digits(name+", mean moving range", row.key("mean_moving_range_of_2"), digits, a.at("mean_moving_range"))
		certified.cases = append(certified.cases, exact.cases...)
	}
	anova := all.from(Published, "NIST Statistical Reference Datasets, one-way analysis of variance; certified values")
	f := open("nist_strd_anova.json")
	for _, c := range f.key("cases").list() {
		addAnova(anova, c)
	}
	return all.join(certified, anova), firstError(t, f)
}

func addAnova(s *sheet, c node) {
	name := c.key("dataset").text()
	var levels [][]float64
	last := -1
	for i, y := range c.key("y_text").list() {
		if l := c.key("level").list()[i].int(); l != last {
			levels, last = append(levels, nil), l
		}
		levels[len(levels)-1] = append(levels[len(levels)-1], y.float())
	}
	a := ask("anova", input{"levels": levels})
	// The leading digits that the readings share are lost to the spread between levels.
	digits := 9
	if name == "AtmWtAg" {
		digits = 7
	}
	k := c.key("certified")
	for i, row := range []string{"between", "within"} {
		s.whole(name+", degrees of freedom "+row, c.key("exact", "df_"+row).float(), a.at("anova", i, "df"))
		s.digits(name+", sum of squares "+row, k.key("ss_"+row), digits, a.at("anova", i, "ss"))
		s.digits(name+", mean square "+row, k.key("ms_"+row), digits, a.at("anova", i, "ms"))
	}
	s.digits(name+", F", k.key("f"), digits, a.at("anova", 0, "f"))
	s.digits(name+", R squared", k.key("r_squared"), digits, a.at("r2"))
	s.digits(name+", residual standard deviation", k.key("residual_sd"), digits, a.at("within_sd"))
	s.digits(name+", variance component between", c.key("exact", "between_variance_component"), digits, a.at("between_variance"))
	// The same F on which a three-way chart is offered.
	s.digits(name+", F between batches", k.key("f"), digits, ask("three-way", input{"chart": "xbar-s", "batches": levels}).at("between", "f"))
}

func root(x float64) (float64, error) { return math.Sqrt(x), nil }

// distributionCases are tests whose critical values and probabilities come from the
// distributions alone.
func distributionCases() ([]Case, error) {
	all := &sheet{}
	book := open("nist_handbook.json")
	grubbs := example(book, "1.3.5.17.1")
	s := all.from(FromMemory, grubbs.key("source").text())
	n := float64(len(grubbs.key("data").list()))
	critical := func(alpha float64) figure {
		return value(func() (float64, error) {
			t, err := dist.TUpperQuantile(alpha/n, n-2)
			return (n - 1) / math.Sqrt(n) * math.Sqrt(t*t/(n-2+t*t)), err
		})
	}
	s.printed("Grubbs test, critical value of one side", grubbs.key("published", "critical_one_sided"), critical(0.05))
	s.digits("Grubbs test, critical value of one side, in full", grubbs.key("computed", "critical_one_sided"), 10, critical(0.05))
	s.digits("Grubbs test, critical value of two sides, in full", grubbs.key("computed", "critical_two_sided"), 10, critical(0.025))

	chi := example(book, "7.2.3")
	s2 := all.from(Published, chi.key("source").text())
	df := chi.key("parameters", "n").float() - 1
	x := df * math.Pow(chi.key("parameters", "s").float()/chi.key("parameters", "sigma0").float(), 2)
	quantile := value(func() (float64, error) { return dist.ChiSquareUpperQuantile(0.05, df) })
	s2.printed("chi-square test of a standard deviation, critical value", chi.key("published", "critical"), quantile)
	s2.digits("chi-square test of a standard deviation, critical value in full", chi.key("computed", "critical"), 10, quantile)
	s2.digits("chi-square test of a standard deviation, p", chi.key("computed", "p"), 10, value(func() (float64, error) { return dist.ChiSquareSurvival(x, df) }))

	wafers := example(book, "7.2.2")
	s3 := all.from(Published, wafers.key("source").text())
	s3.printed("t test, critical value", wafers.key("published", "t_critical"), value(func() (float64, error) { return dist.TUpperQuantile(0.025, 9) }))
	s3.digits("t test, critical value in full", wafers.key("computed", "t_critical"), 10, value(func() (float64, error) { return dist.TUpperQuantile(0.025, 9) }))
	return all.join(s, s2, s3), firstError(book)
}

// example finds a worked example of the handbook by its section.
func example(book node, section string) node {
	for _, e := range book.key("examples").list() {
		if e.key("section").text() == section {
			return e
		}
	}
	book.file.fail("there is no example of section %s", section)
	return node{file: book.file}
}
