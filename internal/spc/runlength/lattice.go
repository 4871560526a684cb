package runlength

import (
	"math"
	"slices"

	"holdfast/internal/spc/special"
	"holdfast/internal/spc/watch"
)

// latticeCells is how many cells the decision interval is cut into: an eighth of a
// sigma each, within bounds. An even number, so that half of it is another lattice.
func latticeCells(h float64) int {
	return 2 * int(math.Ceil(math.Min(math.Max(4*h, 24), 48)))
}

// cusumLattice is a two-sided CUSUM with both sums rounded to the middle of
// cells of equal width; zero is a cell of its own. Only the pairs that can be
// reached are states: both sums are above zero together only in a corner.
//
// Source: Brook and Evans (1972), Biometrika 59, here for both sides at once.
type cusumLattice struct {
	watch.CUSUM
	shift float64
	width float64
	cells int

	known map[[2]int]int32
	pairs [][2]int
	// The ways from state i are ways[from[i]:from[i+1]].
	from  []int32
	ways  []way
	start []way // from the very first state, which need not lie on the lattice
}

// way is a move to a state and its probability.
type way struct {
	to int32
	p  float64
}

func newCUSUMLattice(c watch.CUSUM, shift float64, cells int) *cusumLattice {
	l := &cusumLattice{CUSUM: c, shift: shift, cells: cells, width: c.H / float64(cells), known: map[[2]int]int32{}}
	head := c.HeadStart * c.H
	l.start = l.leave(head, head)
	for at := 0; at < len(l.pairs); at++ {
		l.from = append(l.from, int32(len(l.ways)))
		l.ways = append(l.ways, l.leave(l.middle(l.pairs[at][0]), l.middle(l.pairs[at][1]))...)
	}
	l.from = append(l.from, int32(len(l.ways)))
	return l
}

func (l *cusumLattice) middle(cell int) float64 {
	if cell == 0 {
		return 0
	}
	return (float64(cell) - 0.5) * l.width
}

// leave lists where the sums high and low can go without a signal. The next
// value of the statistic decides both, so its line is cut wherever either sum
// would enter another cell.
func (l *cusumLattice) leave(high, low float64) []way {
	// Without a signal z stays between these.
	least, most := low-l.K-l.H, l.H+l.K-high
	if most <= least {
		return nil
	}
	cuts := []float64{least, most}
	for cell := range l.cells {
		edge := float64(cell) * l.width
		for _, cut := range []float64{edge + l.K - high, low - l.K - edge} {
			if cut > least && cut < most {
				cuts = append(cuts, cut)
			}
		}
	}
	slices.Sort(cuts)
	var out []way
	for i := range len(cuts) - 1 {
		z := (cuts[i] + cuts[i+1]) / 2
		p := normalCells([]cell{{cuts[i], cuts[i+1]}}, l.shift, 1)[0]
		if p < 1e-18 {
			continue
		}
		to := l.state(l.cellOf(high+z-l.K), l.cellOf(low-z-l.K))
		if n := len(out); n > 0 && out[n-1].to == to {
			out[n-1].p += p
			continue
		}
		out = append(out, way{to, p})
	}
	return out
}

func (l *cusumLattice) cellOf(sum float64) int {
	if sum <= 0 {
		return 0
	}
	return min(l.cells, int(sum/l.width)+1)
}

func (l *cusumLattice) state(high, low int) int32 {
	pair := [2]int{high, low}
	id, ok := l.known[pair]
	if !ok {
		id = int32(len(l.pairs))
		l.known[pair] = id
		l.pairs = append(l.pairs, pair)
	}
	return id
}

// curve follows the weights of the states until the hazard has settled.
func (l *cusumLattice) curve() (survival []float64, hazard float64) {
	survival = []float64{1}
	w, next := make([]float64, len(l.pairs)), make([]float64, len(l.pairs))
	for _, to := range l.start {
		w[to.to] += to.p
	}
	fires := make([]float64, len(l.pairs))
	for i, pair := range l.pairs {
		high, low := l.middle(pair[0]), l.middle(pair[1])
		fires[i] = special.NormalSurvival(l.H+l.K-high-l.shift) + special.NormalCDF(low-l.K-l.H-l.shift)
		if l.H+l.K-high <= low-l.K-l.H {
			fires[i] = 1
		}
	}
	before, calm := 0.0, 0
	for range min(followSteps, 16+followWork/(len(l.ways)+1)) {
		var alive, signals float64
		for i, v := range w {
			alive += v
			signals += v * fires[i]
		}
		survival = append(survival, alive)
		if alive < 1e-15 {
			return survival, 1
		}
		hazard = signals / alive
		if d := hazard - before; d <= hazardSettle*hazard && -d <= hazardSettle*hazard {
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
			for _, to := range l.ways[l.from[i]:l.from[i+1]] {
				next[to.to] += v * to.p
			}
		}
		w, next = next, w
	}
	return survival, hazard
}

func (l *cusumLattice) runLength() (RunLength, error) {
	survival, hazard := l.curve()
	return fromCurve(Lattice, survival, hazard)
}
