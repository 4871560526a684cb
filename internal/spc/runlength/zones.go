package runlength

import (
	"math"
	"slices"

	"holdfast/internal/spc/special"
	"holdfast/internal/spc/watch"
)

// zoneChain is the chain of states that a set of zone rules can reach. Its shape
// depends on the rules alone; the probabilities of the cells come with the change.
type zoneChain struct {
	cells []cell  // from lowest to highest
	next  []int32 // next[state*len(cells)+cell]; signal when the rules fire
	start int32   // the state with no history
	count int     // states
}

// cell is an open interval of z in which all points look alike to the rules.
type cell struct{ low, high float64 }

// signal stands in zoneChain.next where a rule fires.
const signal int32 = -1

// comparesNeighbours tells whether a rule needs more than zones.
func comparesNeighbours(rules []watch.Rule) bool {
	return slices.ContainsFunc(rules, func(r watch.Rule) bool {
		return r.Kind == watch.RisingOrFalling || r.Kind == watch.Alternating
	})
}

// newZoneChain explores the states breadth first and merges the equivalent ones.
// ok is false when there are more than MaxStates.
func newZoneChain(rules []watch.Rule) (chain *zoneChain, ok bool, err error) {
	compiled, err := watch.Compile(rules)
	if err != nil {
		return nil, false, invalid("%w", err)
	}
	c := &zoneChain{cells: zoneCells(rules)}
	points := make([]watch.Point, len(c.cells))
	for i, cell := range c.cells {
		points[i].Z = cell.inside()
	}
	known := map[watch.State]int32{{}: 0}
	states := []watch.State{{}}
	for at := 0; at < len(states); at++ {
		for _, p := range points {
			s := states[at]
			if compiled.Step(&s, p).Any() {
				c.next = append(c.next, signal)
				continue
			}
			id, seen := known[s]
			if !seen {
				if len(states) == MaxStates {
					return nil, false, nil
				}
				id = int32(len(states))
				known[s] = id
				states = append(states, s)
			}
			c.next = append(c.next, id)
		}
	}
	c.count = len(states)
	c.merge()
	return c, true, nil
}

// zoneCells cuts the line of z-values where some rule's property begins or ends.
func zoneCells(rules []watch.Rule) []cell {
	var cuts []float64
	for _, r := range rules {
		if r.Kind == watch.OneSide {
			cuts = append(cuts, 0)
			continue
		}
		cuts = append(cuts, r.Z, -r.Z)
	}
	slices.Sort(cuts)
	cuts = slices.Compact(cuts)
	low := math.Inf(-1)
	var cells []cell
	for _, cut := range cuts {
		cells = append(cells, cell{low, cut})
		low = cut
	}
	return append(cells, cell{low, math.Inf(1)})
}

// inside is a point of the cell.
func (c cell) inside() float64 {
	switch below, above := math.IsInf(c.low, -1), math.IsInf(c.high, 1); {
	case below && above:
		return 0
	case below:
		return c.high - 1
	case above:
		return c.low + 1
	}
	return (c.low + c.high) / 2
}

// merge joins states whose futures are alike: those that go to like states from
// every cell. Labels are refined until their number no longer grows; a label is
// a hash of the whole future up to some depth, so two futures share one only by
// a collision of 64 bits.
func (c *zoneChain) merge() {
	width := len(c.cells)
	labels, fresh := make([]uint64, c.count), make([]uint64, c.count)
	classes := 1
	for {
		distinct := make(map[uint64]int32, classes)
		for s := range labels {
			h := labels[s]
			for _, n := range c.next[s*width : (s+1)*width] {
				l := uint64(0x9e3779b97f4a7c15)
				if n != signal {
					l = labels[n]
				}
				h = mix(h*31 + l)
			}
			fresh[s] = h
			distinct[h] = 0
		}
		labels, fresh = fresh, labels
		if len(distinct) == classes {
			break
		}
		classes = len(distinct)
	}
	ids := make(map[uint64]int32, classes)
	class := make([]int32, c.count)
	var members []int // one state of each class
	for s, l := range labels {
		id, seen := ids[l]
		if !seen {
			id = int32(len(members))
			ids[l] = id
			members = append(members, s)
		}
		class[s] = id
	}
	next := make([]int32, 0, len(members)*width)
	for _, s := range members {
		for _, n := range c.next[s*width : (s+1)*width] {
			if n != signal {
				n = class[n]
			}
			next = append(next, n)
		}
	}
	c.next, c.start, c.count = next, class[c.start], len(members)
}

// mix is the finaliser of SplitMix64 (Steele, Lea and Flood 2014): every bit of
// the input reaches every bit of the output.
func mix(h uint64) uint64 {
	h = (h ^ h>>30) * 0xbf58476d1ce4e5b9
	h = (h ^ h>>27) * 0x94d049bb133111eb
	return h ^ h>>31
}

// maxSteps and maxWork (multiplications) bound the iteration of solve; a chart
// whose run length has not settled by then is refused.
const (
	maxSteps = 200_000
	maxWork  = 2_000_000_000
)

// solve finds the run length for given probabilities of the cells.
//
// It follows the survival probability of every state, Δ_n = Q^n 1, and the
// probability of signalling at the next point, g_n = Q^n f. As Q has no negative
// entry, the ratio g_n/Δ_n of all states bounds what is left to sum:
//
//	Δ_n/max(g_n/Δ_n) ≤ Σ_{k≥n} Δ_k ≤ Δ_n/min(g_n/Δ_n)
//
// so (I-Q) a = 1 is solved to a known accuracy, and no subtraction loses digits
// however rare signals are. The registers forget within a few windows, so a few
// hundred steps suffice.
//
// Source: Champ and Woodall (1987), Technometrics 29, for the chain; Collatz
// (1942) and Wielandt (1950) for the bounds.
func (c *zoneChain) solve(p []float64) (RunLength, error) {
	width := len(c.cells)
	alive, later := make([]float64, c.count), make([]float64, c.count)
	fires, firesLater := make([]float64, c.count), make([]float64, c.count)
	for s := range alive {
		alive[s] = 1
		for cell, n := range c.next[s*width : (s+1)*width] {
			if n == signal {
				fires[s] += p[cell]
			}
		}
	}
	if slices.Max(fires) == 0 {
		return RunLength{}, errNever
	}
	var survival []float64
	var sum float64
	for range min(maxSteps, 16+maxWork/len(c.next)) {
		survival = append(survival, alive[c.start])
		least, most := math.Inf(1), 0.0
		for s, a := range alive {
			if a > 0 {
				least, most = math.Min(least, fires[s]/a), math.Max(most, fires[s]/a)
			}
		}
		left := alive[c.start]
		if left == 0 || (least > 0 && left*(1/least-1/most) <= 1e-11*(sum+left/most)) {
			// The middle of the bounds; they differ in the eleventh digit.
			return fromCurve(MarkovChain, survival, (least+most)/2)
		}
		sum += left
		for s := range alive {
			var a, f float64
			for cell, n := range c.next[s*width : (s+1)*width] {
				if n != signal {
					a += p[cell] * alive[n]
					f += p[cell] * fires[n]
				}
			}
			later[s], firesLater[s] = a, f
		}
		alive, later = later, alive
		fires, firesLater = firesLater, fires
	}
	return RunLength{}, invalid("the run length of these rules does not settle")
}

// normalCells gives the probabilities of the cells for a normal z with the given
// mean and standard deviation, each from the tail that loses no digits.
func normalCells(cells []cell, mean, sd float64) []float64 {
	p := make([]float64, len(cells))
	for i, c := range cells {
		low, high := (c.low-mean)/sd, (c.high-mean)/sd
		if low > 0 {
			p[i] = special.NormalSurvival(low) - special.NormalSurvival(high)
		} else {
			p[i] = special.NormalCDF(high) - special.NormalCDF(low)
		}
	}
	return p
}

// Rules gives the run length of one chart with the given run rules for each
// shift of its plotted statistic, in sigmas of that statistic. The statistic is
// normal with the sigma its limits assume.
//
// Rules that see zones only are computed, unless they reach more than MaxStates
// states; then, and with rules that compare neighbours, the answer is simulated
// with opt and stops at a standard error of 1 % or after about MaxPoints points.
//
// It fails for an empty or invalid set of rules, shifts beyond MaxShift, and rules
// that practically never fire.
//
// Source: Champ and Woodall (1987), Technometrics 29.
func Rules(rules []watch.Rule, shifts []float64, opt Options) ([]RunLength, error) {
	if len(rules) == 0 {
		return nil, invalid("rules are empty")
	}
	if err := checkShifts(shifts); err != nil {
		return nil, err
	}
	if !comparesNeighbours(rules) {
		chain, ok, err := newZoneChain(rules)
		if err != nil {
			return nil, err
		}
		if ok {
			out := make([]RunLength, len(shifts))
			for i, d := range shifts {
				if out[i], err = chain.solve(normalCells(chain.cells, d, 1)); err != nil {
					return nil, err
				}
			}
			return out, nil
		}
	}
	compiled, err := watch.Compile(rules)
	if err != nil {
		return nil, invalid("%w", err)
	}
	out := make([]RunLength, len(shifts))
	for i, d := range shifts {
		if out[i], err = simulate(opt, ruleProcess(compiled, d)); err != nil {
			return nil, err
		}
	}
	return out, nil
}
