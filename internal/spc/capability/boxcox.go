package capability

import (
	"math"

	"holdfast/internal/spc/sample"
	"holdfast/internal/spc/special"
)

// BoxCoxLimit bounds the powers that are searched: -BoxCoxLimit to BoxCoxLimit.
const BoxCoxLimit = 5.0

// BoxCox is the power transformation (x^λ - 1)/λ, ln x at λ = 0, that makes readings
// most nearly normal.
type BoxCox struct {
	Lambda        float64
	LogLikelihood float64 // profile, at Lambda
	// Low and High bound λ with 95 % confidence (likelihood ratio); nil where the
	// bound lies outside the powers that are searched.
	Low, High *float64
}

// FitBoxCox maximises the profile likelihood, variance with divisor N, over λ from -5
// to 5; readings must be above zero, at least four, and not all equal. A maximum at
// an end of that range is an error: no power makes such readings normal.
//
//	L(λ) = -N/2 ln var(y(λ)) + (λ-1) Σ ln x
//
// Source: Box and Cox, Journal of the Royal Statistical Society B 26 (1964), 211-252.
func FitBoxCox(x []float64) (BoxCox, error) {
	if err := readings(x, 4); err != nil {
		return BoxCox{}, err
	}
	logs := make([]float64, len(x))
	for i, v := range x {
		if v <= 0 {
			return BoxCox{}, invalid("a Box-Cox transformation needs readings above zero; reading %d is %g", i+1, v)
		}
		logs[i] = math.Log(v)
	}
	mean, err := sample.Mean(logs)
	if err != nil {
		return BoxCox{}, err
	}
	p := &profile{mean: mean, logs: logs, y: make([]float64, len(x)), dy: make([]float64, len(x))}
	for i := range logs {
		logs[i] -= mean
		p.reach = math.Max(p.reach, math.Abs(logs[i]))
	}
	if p.reach < 1e-13 {
		return BoxCox{}, invalid("the readings differ by too little to transform")
	}
	const step = 0.5
	best, highest := -BoxCoxLimit, math.Inf(-1)
	for l := -BoxCoxLimit; l <= BoxCoxLimit; l += step {
		if v := p.at(l); v > highest {
			best, highest = l, v
		}
	}
	slope := func(l float64) float64 { return -p.slope(l) }
	low, high := math.Max(-BoxCoxLimit, best-step), math.Min(BoxCoxLimit, best+step)
	if slope(low) >= 0 || slope(high) <= 0 {
		return BoxCox{}, invalid("no power from %g to %g makes these readings normal", -BoxCoxLimit, BoxCoxLimit)
	}
	lambda, ok := special.Root(slope, low, high)
	if !ok {
		return BoxCox{}, invalid("the power of the Box-Cox transformation cannot be computed")
	}
	b := BoxCox{Lambda: lambda}
	b.LogLikelihood = p.at(lambda)
	if !finite(b.LogLikelihood) {
		return BoxCox{}, invalid("the readings are too far apart to transform")
	}
	// Half the 0.95 quantile of chi-square with one degree of freedom.
	const cut = 1.9207294103470627
	excess := func(l float64) float64 { return p.at(l) - (b.LogLikelihood - cut) }
	if root, ok := special.Root(excess, -BoxCoxLimit, lambda); ok {
		b.Low = &root
	}
	if root, ok := special.Root(excess, lambda, BoxCoxLimit); ok {
		b.High = &root
	}
	return b, nil
}

// profile evaluates the profile likelihood on logarithms about their mean: in units
// of the geometric mean it loses its (λ-1) Σ ln x.
type profile struct {
	logs        []float64
	mean, reach float64
	y, dy       []float64 // scratch
}

// at returns L(λ).
func (p *profile) at(lambda float64) float64 {
	top := p.transform(lambda, false)
	_, square, _ := p.moments(false)
	n := float64(len(p.logs))
	return -n/2*(math.Log(square/n)+2*top) - n*p.mean
}

// slope returns the derivative of L at λ, -N cov(y, dy/dλ)/var(y).
func (p *profile) slope(lambda float64) float64 {
	p.transform(lambda, true)
	n, square, product := p.moments(true)
	return -n * product / square
}

// transform fills y with the transformed readings and dy with their derivatives in λ,
// both up to a constant and without the common factor exp(top).
func (p *profile) transform(lambda float64, derivative bool) (top float64) {
	large := math.Abs(lambda)*p.reach > 30
	if large {
		for _, l := range p.logs {
			top = math.Max(top, lambda*l)
		}
	}
	for i, l := range p.logs {
		u := lambda * l
		switch {
		case large:
			e := math.Exp(u - top)
			p.y[i] = e / lambda
			p.dy[i] = (u - 1) * e / (lambda * lambda)
		case math.Abs(u) < 0.02:
			p.y[i] = l * (1 + u*(1.0/2+u*(1.0/6+u*(1.0/24+u*(1.0/120+u*(1.0/720+u/5040))))))
			if derivative {
				p.dy[i] = l * l * (1.0/2 + u*(1.0/3+u*(1.0/8+u*(1.0/30+u*(1.0/144+u/840)))))
			}
		default:
			e := math.Expm1(u)
			p.y[i] = e / lambda
			p.dy[i] = (u*(e+1) - e) / (lambda * lambda)
		}
	}
	return top
}

// moments returns the sum of squares of y about its mean and its products with dy.
func (p *profile) moments(derivative bool) (n, square, product float64) {
	n = float64(len(p.logs))
	sum := 0.0
	for _, v := range p.y {
		sum += v
	}
	mean := sum / n
	if !derivative {
		for _, v := range p.y {
			square += (v - mean) * (v - mean)
		}
		return n, square, 0
	}
	for i, v := range p.y {
		// About the mean of y alone: the products with a constant add up to nothing.
		square += (v - mean) * (v - mean)
		product += (v - mean) * p.dy[i]
	}
	return n, square, product
}

// Transform applies the power to a value above zero.
func (b BoxCox) Transform(x float64) (float64, error) {
	if !(x > 0) || math.IsInf(x, 1) {
		return math.NaN(), invalid("only values above zero can be transformed, got %g", x)
	}
	y := math.Log(x)
	if b.Lambda != 0 {
		y = math.Expm1(b.Lambda*y) / b.Lambda
	}
	if !finite(y) {
		return math.NaN(), invalid("%g is too large to be transformed with a power of %g", x, b.Lambda)
	}
	return y, nil
}

// Indices returns Pp and Ppk of the transformed readings against the transformed
// specification. A lower limit at or below zero can never be passed by such readings
// and counts as absent.
func (b BoxCox) Indices(x []float64, spec Specification) (pp, ppk *float64, err error) {
	if err := spec.check(); err != nil {
		return nil, nil, err
	}
	y := make([]float64, len(x))
	for i, v := range x {
		if y[i], err = b.Transform(v); err != nil {
			return nil, nil, err
		}
	}
	if err := readings(y, 2); err != nil {
		return nil, nil, err
	}
	mean, err := sample.Mean(y)
	if err != nil {
		return nil, nil, err
	}
	sd, err := sample.SD(y)
	if err != nil {
		return nil, nil, err
	}
	var lower, upper *float64
	var low, high float64
	if spec.Lower != nil && *spec.Lower > 0 {
		if low, err = b.Transform(*spec.Lower); err != nil {
			return nil, nil, err
		}
		lower = some((mean - low) / sd / 3)
	}
	if spec.Upper != nil {
		if high, err = b.Transform(*spec.Upper); err != nil {
			return nil, nil, err
		}
		upper = some((high - mean) / sd / 3)
	}
	if lower == nil && upper == nil {
		return nil, nil, invalid("the lower specification limit %g cannot be passed by readings above zero", *spec.Lower)
	}
	ppk = nearest(lower, upper)
	if lower != nil && upper != nil {
		pp = some((high - low) / sd / 6)
	}
	for _, v := range []*float64{pp, ppk} {
		if v != nil && !finite(*v) {
			return nil, nil, invalid("the transformed readings differ by too little to compute with")
		}
	}
	return pp, ppk, nil
}
