package capability

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"holdfast/internal/spc/sample"
)

// Family names a distribution that readings may follow.
type Family string

const (
	Normal       Family = "normal"
	Lognormal    Family = "lognormal"
	Weibull      Family = "weibull"
	Gamma        Family = "gamma"
	FoldedNormal Family = "foldednormal" // of |X|, X normal
	Rayleigh     Family = "rayleigh"
)

// Families lists all families in a fixed order.
func Families() []Family {
	return []Family{Normal, Lognormal, Weibull, Gamma, FoldedNormal, Rayleigh}
}

// Parameter is one fitted parameter. The names are mean and sd (normal, and of the
// normal that is folded), log_mean and log_sd, shape and scale, scale.
type Parameter struct {
	Name  string
	Value float64
}

// Fit is a distribution fitted by maximum likelihood, without a threshold.
type Fit struct {
	Family        Family
	Parameters    []Parameter
	N             int
	LogLikelihood float64
	// AICc is 2k - 2 ln L + 2k(k+1)/(N-k-1), k parameters: the smaller the better.
	AICc float64
	// AndersonDarling is A² of the readings against the fitted distribution; it
	// describes the fit, its p value depends on the family.
	AndersonDarling float64

	law law
}

// law is a distribution with both tails in their own right.
type law interface {
	tails(x float64) (lower, upper float64)
	logTails(x float64) (lower, upper float64)
	// quantile answers for a lower tail of p, an upper one when upper is true.
	quantile(p float64, upper bool) float64
}

// fitted is what a family's fit hands back.
type fitted struct {
	law           law
	parameters    []Parameter
	logLikelihood float64
	err           error
}

// FitFamily fits one family to at least four readings that are not all equal. The
// lognormal, Weibull, gamma and Rayleigh need readings above zero, the folded normal
// readings that are not negative. Standard deviations are those of maximum
// likelihood, with divisor N.
//
// Source: Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 1
// (1994); folded normal: Leone, Nelson and Nottingham, Technometrics 3 (1961),
// 543-550; AICc: Hurvich and Tsai, Biometrika 76 (1989), 297-307.
func FitFamily(family Family, x []float64) (Fit, error) {
	if !slices.Contains(Families(), family) {
		return Fit{}, invalid("there is no family %q", family)
	}
	d, err := prepare(x)
	if err != nil {
		return Fit{}, err
	}
	return d.fit(family)
}

// sameAICc is a difference of AICc that says nothing.
const sameAICc = 0.01

// Refusal tells why a family could not be fitted.
type Refusal struct {
	Family Family
	Err    error
}

// FitAll fits every family that the readings admit, best (smallest AICc) first, and
// tells why the others were left out. Conditions are those of FitFamily.
func FitAll(x []float64) ([]Fit, []Refusal, error) {
	d, err := prepare(x)
	if err != nil {
		return nil, nil, err
	}
	var fits []Fit
	var refused []Refusal
	for _, family := range Families() {
		f, err := d.fit(family)
		if err != nil {
			refused = append(refused, Refusal{family, err})
			continue
		}
		fits = append(fits, f)
	}
	if len(fits) == 0 {
		return nil, refused, fmt.Errorf("no family could be fitted: %w", refused[0].Err)
	}
	slices.SortStableFunc(fits, func(a, b Fit) int { return cmp.Compare(a.AICc, b.AICc) })
	// A folded normal far from zero is the normal: of such equals the family named
	// first is the plainer.
	for _, family := range Families() {
		i := slices.IndexFunc(fits, func(f Fit) bool { return f.Family == family })
		if i >= 0 && fits[i].AICc-fits[0].AICc < sameAICc {
			best := fits[i]
			fits = slices.Insert(slices.Delete(fits, i, i+1), 0, best)
			break
		}
	}
	return fits, refused, nil
}

// prepared holds what the families share.
type prepared struct {
	sorted []float64
	scale  float64 // largest size of a reading
	// For readings that are all above zero, else nil: their logarithms, sorted, with
	// mean, sum and s.d. (divisor N).
	logs                   []float64
	logMean, logSum, logSD float64
	mean, sd               float64 // divisor N
	negative, zero         int     // positions of such readings, counted from 1
	negativeValue          float64
}

func prepare(x []float64) (*prepared, error) {
	if err := readings(x, 4); err != nil {
		return nil, err
	}
	d := &prepared{sorted: slices.Clone(x)}
	slices.Sort(d.sorted)
	n := float64(len(x))
	divisor := math.Sqrt((n - 1) / n)
	var err error
	if d.mean, err = sample.Mean(d.sorted); err != nil {
		return nil, err
	}
	if d.sd, err = sample.SD(d.sorted); err != nil {
		return nil, err
	}
	d.sd *= divisor
	d.scale = math.Max(math.Abs(d.sorted[0]), math.Abs(d.sorted[len(x)-1]))
	if d.sd < 1e-13*d.scale || d.sd == 0 {
		return nil, invalid("the readings differ by too little to fit a distribution")
	}
	if d.sorted[0] <= 0 {
		for i, v := range x {
			if v < 0 && d.negative == 0 {
				d.negative, d.negativeValue = i+1, v
			}
			if v == 0 && d.zero == 0 {
				d.zero = i + 1
			}
		}
		return d, nil
	}
	d.logs = make([]float64, len(x))
	for i, v := range d.sorted {
		d.logs[i] = math.Log(v)
	}
	if d.logMean, err = sample.Mean(d.logs); err != nil {
		return nil, err
	}
	d.logSum = n * d.logMean
	if d.logSD, err = sample.SD(d.logs); err != nil {
		return nil, err
	}
	d.logSD *= divisor
	return d, nil
}

// needs returns an error when readings are not of the sign the family is made for.
func (d *prepared) needs(family Family, zeroAllowed bool) error {
	switch {
	case d.negative > 0 && zeroAllowed:
		return invalid("the %s distribution has no readings below zero; reading %d is %g", family, d.negative, d.negativeValue)
	case d.negative > 0:
		return invalid("the %s distribution has only readings above zero; reading %d is %g", family, d.negative, d.negativeValue)
	case d.zero > 0 && !zeroAllowed:
		return invalid("the %s distribution has only readings above zero; reading %d is 0", family, d.zero)
	}
	return nil
}

func (d *prepared) fit(family Family) (Fit, error) {
	var r fitted
	switch family {
	case Normal:
		r = d.fitNormal()
	case Lognormal:
		r = d.fitLognormal()
	case Weibull:
		r = d.fitWeibull()
	case Gamma:
		r = d.fitGamma()
	case FoldedNormal:
		r = d.fitFolded()
	case Rayleigh:
		r = d.fitRayleigh()
	}
	if r.err != nil {
		return Fit{}, r.err
	}
	n, k := float64(len(d.sorted)), float64(len(r.parameters))
	f := Fit{
		Family: family, Parameters: r.parameters, N: len(d.sorted), law: r.law,
		LogLikelihood: r.logLikelihood,
		AICc:          2*k - 2*r.logLikelihood + 2*k*(k+1)/(n-k-1),
	}
	f.AndersonDarling = andersonDarling(d.sorted, r.law)
	check := []float64{f.LogLikelihood, f.AICc, f.AndersonDarling}
	for _, p := range f.Parameters {
		check = append(check, p.Value)
	}
	for _, v := range check {
		if !finite(v) {
			return Fit{}, invalid("the %s distribution cannot be fitted to readings so far apart", family)
		}
	}
	return f, nil
}
