package runlength

import (
	"math"
	"slices"
	"sync"

	"holdfast/internal/spc/special"
)

// denseChain is an integral equation of run lengths after quadrature: state i
// moves to state j with weight q[i*n+j] and signals with probability fires[i].
// Rows sum to one up to the error of the quadrature.
type denseChain struct {
	n     int
	q     []float64
	fires []float64
}

func newDenseChain(n int) *denseChain {
	return &denseChain{n: n, q: make([]float64, n*n), fires: make([]float64, n)}
}

// means solves (I-Q) a = 1 by eliminating one state after another. What a state
// keeps is summed from where else it goes, so nothing is ever subtracted and rare
// signals lose no digits.
//
// Source: Grassmann, Taksar and Heyman (1985), Operations Research 33.
func (c *denseChain) means() []float64 {
	n := c.n
	q := slices.Clone(c.q)
	fires := slices.Clone(c.fires)
	steps := make([]float64, n)
	for i := range steps {
		steps[i] = 1
	}
	leaves := make([]float64, n)
	for s := n - 1; s >= 0; s-- {
		row := q[s*n : s*n+s]
		out := fires[s]
		for _, v := range row {
			out += v
		}
		leaves[s] = out
		for i := range s {
			share := q[i*n+s] / out
			if share == 0 {
				continue
			}
			target := q[i*n : i*n+s]
			for j, v := range row {
				target[j] += share * v
			}
			fires[i] += share * fires[s]
			steps[i] += share * steps[s]
		}
	}
	a := make([]float64, n)
	for s := range n {
		sum := steps[s]
		for j, v := range q[s*n : s*n+s] {
			sum += v * a[j]
		}
		a[s] = sum / leaves[s]
	}
	return a
}

// Bounds on following a survival function point by point.
const (
	followSteps  = 20_000
	followWork   = 400_000_000 // multiplications
	hazardSettle = 1e-9
)

// follow adds to survival the probabilities that the run goes on, from the
// weights of the states after the points already in it, until the hazard has
// settled or what is left is negligible.
func (c *denseChain) follow(survival, weights []float64) (out []float64, hazard float64) {
	survival = slices.Clone(survival)
	w, next := slices.Clone(weights), make([]float64, c.n)
	before := math.NaN()
	calm := 0
	steps := min(followSteps, 16+followWork/(c.n*c.n))
	for range steps {
		var alive, signals float64
		for i, v := range w {
			alive += v
			signals += v * c.fires[i]
		}
		survival = append(survival, alive)
		if alive < 1e-15 {
			return survival, 1
		}
		hazard = signals / alive
		if math.Abs(hazard-before) <= hazardSettle*hazard {
			if calm++; calm == 8 {
				break
			}
		} else {
			calm = 0
		}
		before = hazard
		clear(next)
		for i, v := range w {
			if v < 1e-300 {
				continue
			}
			for j, k := range c.q[i*c.n : (i+1)*c.n] {
				next[j] += v * k
			}
		}
		w, next = next, w
	}
	return survival, hazard
}

// finish makes a run length of the survival function before the chain is entered,
// the weights on entering, and the mean run lengths from its states. The curve is
// worked out only when it is asked for.
func (c *denseChain) finish(before, weights, means []float64, method Method) (RunLength, error) {
	r := RunLength{Method: method}
	for _, s := range before {
		r.Mean += s
	}
	for i, w := range weights {
		r.Mean += w * means[i]
	}
	if math.IsNaN(r.Mean) || math.IsInf(r.Mean, 0) || r.Mean < 1-1e-9 {
		return RunLength{}, errNever
	}
	r.curve = sync.OnceValues(func() ([]float64, float64) {
		survival, hazard := c.follow(before, weights)
		return calibrated(r.Mean, survival, hazard)
	})
	return r, nil
}

// quadrature is a Gauss-Legendre rule kept for use on several intervals.
type quadrature struct{ nodes, weights []float64 }

func newQuadrature(n int) quadrature {
	nodes, weights := special.GaussLegendre(n)
	return quadrature{nodes, weights}
}

// on gives the rule on [low, high].
func (r quadrature) on(low, high float64) (x, w []float64) {
	x, w = make([]float64, len(r.nodes)), make([]float64, len(r.nodes))
	half := (high - low) / 2
	for i := range x {
		x[i] = low + half*(r.nodes[i]+1)
		w[i] = half * r.weights[i]
	}
	return x, w
}
