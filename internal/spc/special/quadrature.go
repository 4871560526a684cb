package special

import (
	"math"
	"sync"
)

// GaussLegendre returns the nodes and weights of the rule with n points on
// [-1, 1]. The slices are shared: do not write to them. Only the sizes 16 and 32
// are kept ready; other sizes are computed at each call.
func GaussLegendre(n int) (nodes, weights []float64) {
	switch n {
	case 16:
		r := legendre16()
		return r.x, r.w
	case 32:
		r := legendre32()
		return r.x, r.w
	}
	r := legendre(n)
	return r.x, r.w
}

type rule struct{ x, w []float64 }

var (
	legendre16 = sync.OnceValue(func() rule { return legendre(16) })
	legendre32 = sync.OnceValue(func() rule { return legendre(32) })
)

// legendre finds the roots of the Legendre polynomial by Newton's method from
// Tricomi's starting points.
func legendre(n int) rule {
	r := rule{make([]float64, n), make([]float64, n)}
	for i := range n {
		x := math.Cos(math.Pi * (float64(i) + 0.75) / (float64(n) + 0.5))
		var slope float64
		for range 100 {
			p, below := 1.0, 0.0
			for k := range n {
				p, below = (float64(2*k+1)*x*p-float64(k)*below)/float64(k+1), p
			}
			slope = float64(n) * (x*p - below) / (x*x - 1)
			step := p / slope
			x -= step
			if math.Abs(step) < 1e-16 {
				break
			}
		}
		r.x[i] = x
		r.w[i] = 2 / ((1 - x*x) * slope * slope)
	}
	return r
}

// Panels integrates f over [a, b] in equal panels with 32 Gauss-Legendre points
// each. It is for smooth functions whose scale the caller knows.
func Panels(f func(float64) float64, a, b float64, panels int) float64 {
	x, w := GaussLegendre(32)
	half := (b - a) / float64(2*panels)
	sum := 0.0
	for p := range panels {
		mid := a + half*float64(2*p+1)
		for i := range x {
			sum += w[i] * f(mid+half*x[i])
		}
	}
	return sum * half
}
