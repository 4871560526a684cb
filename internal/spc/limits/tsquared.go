package limits

import (
	"math"

	"holdfast/internal/spc/special"
)

// MaxCharacteristics is the largest number of characteristics on one T-squared chart.
const MaxCharacteristics = 50

// DefaultAlpha is the false-alarm rate of a T-squared chart unless another is given:
// that of 3-sigma limits.
const DefaultAlpha = 0.0027

// TSquaredStandard is what a revision of a Hotelling T-squared chart freezes: mean and
// covariance of p characteristics measured on the same parts, from m observations.
type TSquaredStandard struct {
	Mean       []float64
	Covariance [][]float64 // p by p, divisor m-1
	M          int
	Alpha      float64 // 0: DefaultAlpha
	lower      [][]float64
}

// EstimateTSquared computes mean and covariance of m observations of p
// characteristics each, 2 ≤ p ≤ MaxCharacteristics, m ≥ p+2. Characteristics that
// determine one another (a singular covariance) are an error.
//
// Source: NIST/SEMATECH e-Handbook 6.3.4; Tracy, Young and Mason, Journal of Quality
// Technology 24 (1992), 88-95.
func EstimateTSquared(x [][]float64) (TSquaredStandard, error) {
	if len(x) == 0 {
		return TSquaredStandard{}, invalid("there are no observations")
	}
	p := len(x[0])
	if p < 2 || p > MaxCharacteristics {
		return TSquaredStandard{}, invalid("a T-squared chart takes 2 to %d characteristics, got %d", MaxCharacteristics, p)
	}
	m := len(x)
	if m < p+2 {
		return TSquaredStandard{}, invalid("%d characteristics need at least %d observations, got %d", p, p+2, m)
	}
	s := TSquaredStandard{Mean: make([]float64, p), Covariance: square(p), M: m}
	for i, row := range x {
		if err := checkRow(row, p); err != nil {
			return TSquaredStandard{}, invalid("observation %d: %v", i+1, err)
		}
		for j, v := range row {
			s.Mean[j] += (v - s.Mean[j]) / float64(i+1)
		}
	}
	for _, row := range x {
		for j := range p {
			for k := range j + 1 {
				s.Covariance[j][k] += (row[j] - s.Mean[j]) * (row[k] - s.Mean[k]) / float64(m-1)
			}
		}
	}
	for j := range p {
		for k := range j {
			s.Covariance[k][j] = s.Covariance[j][k]
		}
	}
	return s.Prepare()
}

func square(p int) [][]float64 {
	rows := make([][]float64, p)
	for i := range rows {
		rows[i] = make([]float64, p)
	}
	return rows
}

func checkRow(row []float64, p int) error {
	if len(row) != p {
		return invalid("%d characteristics are needed, got %d", p, len(row))
	}
	for j, v := range row {
		if !finite(v) || math.Abs(v) > 1e150 {
			return invalid("characteristic %d is not a usable number: %g", j+1, v)
		}
	}
	return nil
}

// Prepare checks a standard that was stored or given and makes it ready for use.
func (s TSquaredStandard) Prepare() (TSquaredStandard, error) {
	p := len(s.Mean)
	switch {
	case p < 2 || p > MaxCharacteristics || len(s.Covariance) != p:
		return TSquaredStandard{}, invalid("a T-squared chart needs means and a square covariance of 2 to %d characteristics", MaxCharacteristics)
	case s.M < p+2:
		return TSquaredStandard{}, invalid("%d characteristics need at least %d observations, got %d", p, p+2, s.M)
	case !(s.Alpha >= 0 && s.Alpha < 0.5):
		return TSquaredStandard{}, invalid("the false-alarm rate must be between 0 and 0.5, got %g", s.Alpha)
	}
	if err := checkRow(s.Mean, p); err != nil {
		return TSquaredStandard{}, err
	}
	for j, row := range s.Covariance {
		if len(row) != p {
			return TSquaredStandard{}, invalid("row %d of the covariance must have %d entries, got %d", j+1, p, len(row))
		}
		for k, v := range row {
			if !finite(v) || v != s.Covariance[k][j] {
				return TSquaredStandard{}, invalid("the covariance must be symmetric and finite")
			}
		}
	}
	all := make([]int, p)
	for j := range all {
		all[j] = j
	}
	var ok bool
	if s.lower, ok = cholesky(s.Covariance, all); !ok {
		return TSquaredStandard{}, invalid("the characteristics determine one another: their covariance cannot be inverted")
	}
	return s, nil
}

// cholesky factors the rows and columns chosen. A pivot below 1e-12 of its variance
// counts as zero: the characteristic is then a sum of the ones before it.
func cholesky(a [][]float64, chosen []int) ([][]float64, bool) {
	l := square(len(chosen))
	for i, ci := range chosen {
		for j := range i + 1 {
			v := a[ci][chosen[j]]
			for k := range j {
				v -= l[i][k] * l[j][k]
			}
			if i != j {
				l[i][j] = v / l[j][j]
				continue
			}
			if !(v > 1e-12*a[ci][ci]) {
				return nil, false
			}
			l[i][i] = math.Sqrt(v)
		}
	}
	return l, true
}

// distance is d' S⁻¹ d over the rows chosen, by forward substitution.
func distance(l [][]float64, d []float64) float64 {
	var y [MaxCharacteristics]float64
	total := 0.0
	for i := range d {
		v := d[i]
		for k, y := range y[:i] {
			v -= l[i][k] * y
		}
		y[i] = v / l[i][i]
		total += y[i] * y[i]
	}
	return total
}

// deviation writes x - mean to d.
func (s TSquaredStandard) deviation(x []float64, d *[MaxCharacteristics]float64) error {
	if s.lower == nil {
		return invalid("the standard must be prepared first")
	}
	if err := checkRow(x, len(s.Mean)); err != nil {
		return err
	}
	for j := range x {
		d[j] = x[j] - s.Mean[j]
	}
	return nil
}

// Statistic returns T² = (x - mean)' S⁻¹ (x - mean). It allocates nothing.
func (s TSquaredStandard) Statistic(x []float64) (float64, error) {
	var d [MaxCharacteristics]float64
	if err := s.deviation(x, &d); err != nil {
		return math.NaN(), err
	}
	t := distance(s.lower, d[:len(x)])
	if !finite(t) {
		return math.NaN(), invalid("the observation is too far away to compute with")
	}
	return t, nil
}

// Limits returns the upper limits of T² for single observations:
//
//	phase 1  (m-1)²/m · Beta(1-α; p/2, (m-p-1)/2), for the m observations themselves
//	phase 2  p(m+1)(m-1)/(m(m-p)) · F(1-α; p, m-p), for later ones
//
// Source: Tracy, Young and Mason (1992); NIST/SEMATECH e-Handbook 6.3.4.
func (s TSquaredStandard) Limits() (phase1, phase2 float64, err error) {
	if s.lower == nil {
		return math.NaN(), math.NaN(), invalid("the standard must be prepared first")
	}
	p, m := float64(len(s.Mean)), float64(s.M)
	x, _ := special.BetaQuantile(p/2, (m-p-1)/2, s.alpha(), true)
	phase1 = (m - 1) * (m - 1) / m * x
	return phase1, s.phase2(s.alpha()), nil
}

// Band returns the limit for later observations (phase 2) as a band: its centre is
// the median of T² in control, and the one-sigma distance above it is a third of the
// way to the limit, so that a point on the limit has z = 3 whatever Alpha is. There is
// no lower limit; below the centre the distance is √(2p), the standard deviation of
// T² for large m.
func (s TSquaredStandard) Band() (Band, error) {
	_, upper, err := s.Limits()
	if err != nil {
		return absent, err
	}
	p, m := float64(len(s.Mean)), float64(s.M)
	b := Band{Center: s.phase2(0.5), Lower: math.Inf(-1), Upper: upper, Below: math.Sqrt(2 * p)}
	b.Above = (b.Upper - b.Center) / DefaultMultiple
	if !(b.Above > 0) || !finite(b.Upper) {
		return absent, invalid("%g observations of %g characteristics give no limit at a false-alarm rate of %g", m, p, s.alpha())
	}
	return b, nil
}

// phase2 is the T² of a later observation that is exceeded with probability q.
func (s TSquaredStandard) phase2(q float64) float64 {
	p, m := float64(len(s.Mean)), float64(s.M)
	return p * (m + 1) * (m - 1) / (m * (m - p)) * fUpper(q, p, m-p)
}

func (s TSquaredStandard) alpha() float64 {
	if s.Alpha == 0 {
		return DefaultAlpha
	}
	return s.Alpha
}

// fUpper is the F quantile with q above it.
func fUpper(q, d1, d2 float64) float64 {
	x, y := special.BetaQuantile(d1/2, d2/2, q, true)
	return d2 / d1 * (x / y)
}

// Share is one characteristic's part in a T² value.
type Share struct {
	// Unconditional is the characteristic's own squared distance in its own s.d.
	Unconditional, UnconditionalLimit float64
	// Conditional is what T² loses without the characteristic: how far it lies from
	// where the others say it should be. Large while Unconditional is small means a
	// broken relation.
	Conditional, ConditionalLimit float64
}

// Shares splits the T² of an observation into each characteristic's terms, with the
// limits for one later observation at the chart's false-alarm rate.
//
// Source: Mason, Young and Tracy, Journal of Quality Technology 27 (1995), 99-108.
func (s TSquaredStandard) Shares(x []float64) ([]Share, error) {
	var at [MaxCharacteristics]float64
	if err := s.deviation(x, &at); err != nil {
		return nil, err
	}
	d := at[:len(x)]
	whole := distance(s.lower, d)
	if !finite(whole) {
		return nil, invalid("the observation is too far away to compute with")
	}
	p, m := len(d), float64(s.M)
	k := float64(p - 1)
	own := (m + 1) / m * fUpper(s.alpha(), 1, m-1)
	given := (m + 1) * (m - 1) / (m * (m - k - 1)) * fUpper(s.alpha(), 1, m-k-1)
	out := make([]Share, p)
	for j := range out {
		var rest []int
		var left []float64
		for i := range d {
			if i != j {
				rest = append(rest, i)
				left = append(left, d[i])
			}
		}
		l, ok := cholesky(s.Covariance, rest)
		if !ok {
			return nil, invalid("the characteristics determine one another: their covariance cannot be inverted")
		}
		out[j] = Share{
			Unconditional: d[j] * d[j] / s.Covariance[j][j], UnconditionalLimit: own,
			Conditional: math.Max(0, whole-distance(l, left)), ConditionalLimit: given,
		}
	}
	return out, nil
}
