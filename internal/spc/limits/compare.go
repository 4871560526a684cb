package limits

import (
	"math"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/special"
)

// Comparison tells whether newer subgroups disagree with the basis of a standard.
type Comparison struct {
	CenterShift float64 // newer centre minus old
	CenterP     float64 // two-sided p of the shift
	SigmaRatio  float64 // newer sigma over old
	SigmaP      float64 // two-sided p of the ratio
}

// Compare tests the centre (Welch's t) and the sigma (F) of newer subgroups against
// those of a standard's basis; both carry the uncertainty of both estimates, old
// and new. An old standard that was given and not estimated has CenterSE 0 and DF
// +Inf.
//
// Each sigma is turned back into the root of a variance, s = c4·sigma, before the F
// ratio is formed; for estimators from ranges the degrees of freedom are effective
// ones and the test is close, not exact.
//
// Source: Welch, Biometrika 34 (1947), 28-35; Patnaik, Biometrika 37 (1950), 78-87.
func Compare(old, newer Estimated) (Comparison, error) {
	for _, e := range []struct {
		name string
		Estimated
	}{{"old", old}, {"newer", newer}} {
		switch {
		case !finite(e.Center) || !(e.CenterSE >= 0) || math.IsInf(e.CenterSE, 1):
			return Comparison{}, invalid("the %s centre must be a finite number with a standard error, got %g ± %g", e.name, e.Center, e.CenterSE)
		case !(e.Sigma > 0) || math.IsInf(e.Sigma, 1):
			return Comparison{}, invalid("the %s sigma must be above zero, got %g", e.name, e.Sigma)
		case !(e.DF > 0):
			return Comparison{}, invalid("the %s degrees of freedom must be above zero, got %g", e.name, e.DF)
		}
	}
	v1, v2 := old.CenterSE*old.CenterSE, newer.CenterSE*newer.CenterSE
	if !(v1+v2 > 0) {
		return Comparison{}, invalid("at least one centre must have a standard error above zero")
	}
	c := Comparison{CenterShift: newer.Center - old.Center, SigmaRatio: newer.Sigma / old.Sigma}
	// Shares of the variance, so that no square overflows.
	w1, w2 := v1/(v1+v2), v2/(v1+v2)
	df := 1 / (w1*w1/old.DF + w2*w2/newer.DF)
	t := c.CenterShift / math.Sqrt(v1+v2)
	c.CenterP = studentP(t, df)

	c1, err := c4Of(old.DF)
	if err != nil {
		return Comparison{}, err
	}
	c2, err := c4Of(newer.DF)
	if err != nil {
		return Comparison{}, err
	}
	f := math.Pow(c.SigmaRatio*c2/c1, 2)
	// Endless degrees of freedom are taken as very many.
	d1, d2 := math.Min(newer.DF, 1e9), math.Min(old.DF, 1e9)
	lower, upper := special.Beta(d1/2, d2/2, d1*f/(d1*f+d2), d2/(d1*f+d2))
	c.SigmaP = math.Min(1, 2*math.Min(lower, upper))
	if math.IsNaN(c.SigmaP) || math.IsNaN(c.CenterP) || math.IsInf(c.SigmaRatio, 0) || math.IsInf(c.CenterShift, 0) {
		return Comparison{}, invalid("old and newer values are too far apart to compare")
	}
	return c, nil
}

func c4Of(df float64) (float64, error) {
	if math.IsInf(df, 1) {
		return 1, nil
	}
	return factor.C4Nu(df)
}

// studentP is the two-sided p value of Student's t.
func studentP(t, df float64) float64 {
	df = math.Min(df, 1e9)
	if math.IsInf(t*t, 1) {
		return 0
	}
	p, _ := special.Beta(df/2, 0.5, df/(df+t*t), t*t/(df+t*t))
	return p
}

// LookAt reports whether a standard is to be compared with the subgroups newer than
// its basis when there are so many of them: at 20, 40, 80, 160 and so on. Looking
// after every subgroup would find a difference in most stable processes sooner or
// later.
func LookAt(newer int) bool {
	if newer < EnoughSubgroups || newer%EnoughSubgroups != 0 {
		return false
	}
	k := newer / EnoughSubgroups
	return k&(k-1) == 0
}
