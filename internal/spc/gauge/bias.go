package gauge

import (
	"math"

	"holdfast/internal/spc/dist"
	"holdfast/internal/spc/sample"
)

// Bias is the result of measuring one master again and again.
type Bias struct {
	N         int
	Mean      float64
	Bias      float64 // mean minus reference
	SD        float64 // divisor N-1
	T, P      float64 // two-sided t test of no bias
	Low, High float64 // 95 % interval of the bias
	// Cg = 0.2 tolerance/(6 s) and Cgk = (0.1 tolerance - |bias|)/(3 s); nil without
	// a tolerance.
	Cg, Cgk *float64
}

// MeasureBias compares at least two readings of one master with its reference value.
// It fails when all readings are equal: such a gauge is too coarse to be judged so.
//
// Source: t test: NIST/SEMATECH e-Handbook of Statistical Methods, section 7.2.2; Cg
// and Cgk: common practice, with the shares 0.2 and 6 s most plants use (others use 0.15
// or 4 s).
func MeasureBias(x []float64, reference float64, tolerance *float64) (Bias, error) {
	if err := toleranceOK(tolerance); err != nil {
		return Bias{}, err
	}
	if err := readingOK(reference, "the reference value"); err != nil {
		return Bias{}, err
	}
	if len(x) > MaxReadings {
		return Bias{}, invalid("a study has at most %d readings, got %d", MaxReadings, len(x))
	}
	if err := sample.Check(x, 2); err != nil {
		return Bias{}, err
	}
	for i, v := range x {
		if err := readingOK(v, "reading %d", i+1); err != nil {
			return Bias{}, err
		}
	}
	b := Bias{N: len(x)}
	var err error
	if b.Mean, err = sample.Mean(x); err != nil {
		return Bias{}, err
	}
	if b.SD, err = sample.SD(x); err != nil {
		return Bias{}, err
	}
	if b.SD == 0 {
		return Bias{}, invalid("all readings are equal: the gauge reads too coarsely to be judged by this study")
	}
	b.Bias = b.Mean - reference
	nu := float64(len(x) - 1)
	se := b.SD / math.Sqrt(float64(len(x)))
	b.T = b.Bias / se
	if err := allFinite(&b.T); err != nil {
		return Bias{}, err
	}
	tail, err := dist.TSurvival(math.Abs(b.T), nu)
	if err != nil {
		return Bias{}, err
	}
	b.P = math.Min(1, 2*tail)
	t, err := dist.TUpperQuantile(0.025, nu)
	if err != nil {
		return Bias{}, err
	}
	b.Low, b.High = b.Bias-t*se, b.Bias+t*se
	if tolerance != nil {
		b.Cg = some(0.2 * *tolerance / (6 * b.SD))
		b.Cgk = some((0.1**tolerance - math.Abs(b.Bias)) / (3 * b.SD))
	}
	return b, allFinite(b.Cg, b.Cgk, &b.Low, &b.High)
}

// Linearity is the regression of bias on the reference value.
type Linearity struct {
	N                int       // readings
	MeanBias         []float64 // at each reference value
	Slope, Intercept float64
	ResidualSD       float64
	RSquared         float64
	DF               int
	// t statistics and two-sided p values; T is nil where nothing is left beside the
	// line, and P then 0 or, for a coefficient of exactly 0, 1.
	TSlope, TIntercept *float64
	PSlope, PIntercept float64
}

// MeasureLinearity fits bias = intercept + slope × reference to every reading:
// measured[i] are the readings of the master with the value reference[i]. It needs two
// different reference values, at least three readings, and bias that varies.
//
// Source: simple linear regression; common practice to take every reading, not the
// means.
func MeasureLinearity(reference []float64, measured [][]float64) (Linearity, error) {
	x, y, l, err := biases(reference, measured)
	if err != nil {
		return Linearity{}, err
	}
	n := float64(len(x))
	var mx, my float64
	for i := range x {
		mx += (x[i] - x[0]) / n
		my += (y[i] - y[0]) / n
	}
	mx, my = mx+x[0], my+y[0]
	var sxx, sxy, syy float64
	for i := range x {
		dx, dy := x[i]-mx, y[i]-my
		sxx += dx * dx
		sxy += dx * dy
		syy += dy * dy
	}
	if sxx == 0 {
		return Linearity{}, invalid("at least two different reference values are needed")
	}
	if syy == 0 {
		return Linearity{}, invalid("the bias is the same for every reading: the gauge reads too coarsely to be judged by this study")
	}
	l.Slope = sxy / sxx
	l.Intercept = my - l.Slope*mx
	residual := 0.0
	for i := range x {
		d := (y[i] - my) - l.Slope*(x[i]-mx)
		residual += d * d
	}
	l.RSquared = math.Max(0, 1-residual/syy)
	l.ResidualSD = math.Sqrt(residual / float64(l.DF))
	if err := allFinite(&l.Slope, &l.Intercept, &l.RSquared, &l.ResidualSD); err != nil {
		return Linearity{}, err
	}
	if l.TSlope, l.PSlope, err = tTest(l.Slope, l.ResidualSD/math.Sqrt(sxx), l.DF); err != nil {
		return Linearity{}, err
	}
	if l.TIntercept, l.PIntercept, err = tTest(l.Intercept, l.ResidualSD*math.Sqrt(1/n+mx*mx/sxx), l.DF); err != nil {
		return Linearity{}, err
	}
	return l, nil
}

// biases checks a linearity study and lays it out reading by reading.
func biases(reference []float64, measured [][]float64) (x, y []float64, l Linearity, err error) {
	if len(reference) != len(measured) {
		return nil, nil, l, invalid("there are %d reference values and %d sets of readings: one set each is needed", len(reference), len(measured))
	}
	total := 0
	for _, set := range measured {
		total += len(set)
	}
	if total > MaxReadings {
		return nil, nil, l, invalid("a study has at most %d readings, got %d", MaxReadings, total)
	}
	for i, set := range measured {
		if err := readingOK(reference[i], "reference value %d", i+1); err != nil {
			return nil, nil, l, err
		}
		if len(set) == 0 {
			return nil, nil, l, invalid("the master %g (number %d) has no readings", reference[i], i+1)
		}
		sum := 0.0
		for k, v := range set {
			if err := readingOK(v, "reading %d of master %d", k+1, i+1); err != nil {
				return nil, nil, l, err
			}
			x, y = append(x, reference[i]), append(y, v-reference[i])
			sum += v - reference[i]
		}
		l.MeanBias = append(l.MeanBias, sum/float64(len(set)))
	}
	l.N, l.DF = len(x), len(x)-2
	if l.DF < 1 {
		return nil, nil, l, invalid("at least three readings are needed, got %d", len(x))
	}
	return x, y, l, nil
}

// tTest is the two-sided test of a coefficient of zero.
func tTest(value, se float64, df int) (t *float64, p float64, err error) {
	v := value / se
	switch {
	case value == 0 && se == 0:
		return nil, 1, nil
	case math.IsInf(v, 0) || math.Abs(v) > 1e150:
		return nil, 0, nil
	case math.IsNaN(v):
		return nil, 0, allFinite(&v)
	}
	tail, err := dist.TSurvival(math.Abs(v), float64(df))
	if err != nil {
		return nil, 0, err
	}
	return &v, math.Min(1, 2*tail), nil
}
