package runlength

import (
	"math"

	"holdfast/internal/spc/dist"
	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/special"
)

// Estimator is the estimator of sigma that a basis used.
type Estimator string

// The estimators that Estimated knows.
const (
	MeanRange       Estimator = "rbar"   // mean range over d2
	MeanSD          Estimator = "sbar"   // mean standard deviation over c4
	PooledSD        Estimator = "pooled" // pooled standard deviation over c4
	MeanMovingRange Estimator = "mrbar"  // mean moving range over d2, individuals
)

// MaxBasis is the largest number of readings in a basis that is studied: with
// more, limits are as good as known.
const MaxBasis = 200_000

// Spread is what estimating the limits does to the false alarms of a mean chart.
// The conditional ARL is 1/p, with p the false alarm probability of a point given
// the estimated centre and sigma; it differs from basis to basis.
type Spread struct {
	P10, P50, P90 Figure // percentiles of the conditional ARL over all bases
	// Mean of the conditional ARL. HasMean is false where it is infinite or, when
	// simulated, has no finite variance, and for individuals.
	Mean    Figure
	HasMean bool
	// FalseAlarm is the mean false alarm probability of a point.
	FalseAlarm Figure
	Method     Method
}

// Figure is a value with its standard error, 0 where the value is computed.
type Figure struct{ Value, SE float64 }

// limitSigmas is the distance of the limits: this question is asked of 3 sigma
// limits only.
const limitSigmas = 3

// Estimated tells how far the false alarm rate of a mean chart with 3 sigma limits
// may be off when centre and sigma were estimated from m subgroups of n readings
// in control (n = 1: m individuals, MeanMovingRange).
//
// For PooledSD, whose distribution is known, all figures are integrals. For the
// others the estimate of sigma is simulated with opt while the centre, which is
// independent of it, is integrated; that stops at a standard error of 1 % of each
// figure or after about MaxPoints readings.
//
// It fails for m below 2, n below 1, more than MaxBasis readings, and an estimator
// that does not go with n.
//
// Source: Quesenberry (1993), Journal of Quality Technology 25; Goedhart, Schoonhoven
// and Does (2017), Journal of Quality Technology 49, for conditional run lengths.
func Estimated(m, n int, e Estimator, opt Options) (Spread, error) {
	switch {
	case m < 2:
		return Spread{}, invalid("m must be at least 2 subgroups, got %d", m)
	case n < 1:
		return Spread{}, invalid("n must be at least 1, got %d", n)
	case m > MaxBasis || n > factor.MaxSize || m*n > MaxBasis:
		return Spread{}, invalid("m·n must be at most %d readings, n at most %d, got %d·%d", MaxBasis, factor.MaxSize, m, n)
	case e != MeanRange && e != MeanSD && e != PooledSD && e != MeanMovingRange:
		return Spread{}, invalid("there is no estimator called %q", string(e))
	case (e == MeanMovingRange) != (n == 1):
		return Spread{}, invalid("the estimator %q does not go with subgroups of %d", string(e), n)
	}
	if e == PooledSD {
		return pooledSpread(m, n)
	}
	return simulatedSpread(m, n, e, opt)
}

// falseAlarm is the probability that a point in control lies outside limits at
// ±3w whose centre is off by delta, both in standard errors of the point.
func falseAlarm(delta, w float64) float64 {
	return special.NormalSurvival(limitSigmas*w-delta) + special.NormalCDF(-limitSigmas*w-delta)
}

// meanFalseAlarm is its mean over the estimated centre: the point less its centre
// has variance 1 + 1/m.
func meanFalseAlarm(m int, w float64) float64 {
	return 2 * special.NormalSurvival(limitSigmas*w/math.Sqrt(1+1/float64(m)))
}

// meanARL is the mean of 1/p over the estimated centre.
func meanARL(m int, w float64) float64 {
	root := math.Sqrt(float64(m))
	return 2 * special.Panels(func(t float64) float64 {
		return special.NormalPDF(t) / falseAlarm(t/root, w)
	}, 0, 9, 1)
}

// shareBelow is the probability, over the estimated centre, that the conditional
// ARL is at most arl.
func shareBelow(m int, w, arl float64) float64 {
	p := 1 / arl
	if falseAlarm(0, w) >= p {
		return 1
	}
	far := limitSigmas*w + 10
	delta, ok := special.Root(func(d float64) float64 { return math.Log(falseAlarm(d, w) / p) }, 0, far)
	if !ok {
		return 0 // an ARL of 1 is reached nowhere
	}
	return 2 * special.NormalSurvival(delta*math.Sqrt(float64(m)))
}

// percentile finds the ARL below which the share of bases is q.
func percentile(q float64, share func(arl float64) float64) (float64, error) {
	x, ok := special.Root(func(logARL float64) float64 { return share(math.Exp(logARL)) - q }, 1e-6, 600)
	if !ok {
		return 0, invalid("the basis is too small for a percentile of the run length")
	}
	return math.Exp(x), nil
}

// pooledSpread integrates over the distribution of the pooled estimate: with ν
// degrees of freedom, w·c4 is chi over √ν.
func pooledSpread(m, n int) (Spread, error) {
	nu := m * (n - 1)
	v := float64(nu)
	c4, err := factor.C4(nu + 1)
	if err != nil {
		return Spread{}, invalid("%w", err)
	}
	lg, _ := math.Lgamma(v / 2)
	density := func(w float64) float64 { // of w
		s := w * c4
		if s <= 0 {
			return 0
		}
		return 2 * c4 * math.Exp(v/2*math.Log(v/2)-lg+(v-1)*math.Log(s)-v*s*s/2)
	}
	sd := 1 / math.Sqrt(2*v)
	least, most := math.Max(0, 1-10*sd), (1+10*sd)/c4
	out := Spread{Method: IntegralEquation}
	out.FalseAlarm.Value = special.Panels(func(w float64) float64 {
		return density(w) * meanFalseAlarm(m, w)
	}, least, most, 4)

	// 1/p grows like exp(9w²/2), the density falls like exp(-ν(c4 w)²/2).
	if rest := v - limitSigmas*limitSigmas/(c4*c4); rest > 1 {
		out.HasMean = true
		peak := math.Sqrt(v / rest)
		far := (peak + 12/math.Sqrt(rest)) / c4
		out.Mean.Value = special.Panels(func(w float64) float64 {
			return density(w) * meanARL(m, w)
		}, least, far, 6)
	}

	share := func(arl float64) float64 {
		// Below the edge every centre gives a shorter run length; above it the
		// share starts with a square root, which w = edge + t² makes smooth.
		edge := special.NormalUpperQuantile(1/arl/2) / limitSigmas
		chi := edge * c4
		below := 0.0
		if chi > 0 {
			if below, err = dist.ChiSquareCDF(v*chi*chi, v); err != nil {
				return math.NaN()
			}
		}
		edge = math.Max(edge, 0)
		if edge >= most {
			return below
		}
		return below + special.Panels(func(t float64) float64 {
			w := edge + t*t
			return 2 * t * density(w) * shareBelow(m, w, arl)
		}, 0, math.Sqrt(most-edge), 3)
	}
	for q, f := range map[float64]*Figure{0.1: &out.P10, 0.5: &out.P50, 0.9: &out.P90} {
		if f.Value, err = percentile(q, share); err != nil {
			return Spread{}, err
		}
	}
	return out, nil
}
