package runlength

import (
	"math"
	"sync"

	"holdfast/internal/spc/special"
	"holdfast/internal/spc/watch"
)

// mostCUSUMH is the largest decision interval, and mostCUSUMK the largest slack,
// for which the quadrature has been tried.
const (
	mostCUSUMH = 50
	mostCUSUMK = 20
	mostHeadH  = 20 // with a head start that needs the lattice
)

// CUSUM gives the run length of a two-sided tabular CUSUM for each shift of the
// plotted statistic, in sigmas of that statistic. Both sums start at zero, or both
// at the head start.
//
// The mean of each side solves the integral equation with an atom at zero, by
// Gauss-Legendre quadrature; with A and B the mean run lengths of the upper and
// the lower side, from the head start (s) and from zero (0), both sides together
// have
//
//	(A_s B_0 + B_s A_0 - A_0 B_0) / (A_0 + B_0)
//
// which holds as long as one sum is at zero whenever the other signals: for head
// starts up to 1/2 + k/h. Larger ones are solved on a lattice of both sums,
// extrapolated to zero width. The error of the mean is below 0.1 %. The
// distribution comes from the lattice in either case and is good to about 1 %.
//
// h up to 50 (20 with a head start above 1/2 + k/h) and k up to 20 are taken; other values, shifts beyond MaxShift and
// charts that practically never signal are errors.
//
// Source: Brook and Evans (1972), Biometrika 59, for the lattice; Lucas and
// Crosier (1982), Technometrics 24, for both sides with a head start.
func CUSUM(c watch.CUSUM, shifts []float64) ([]RunLength, error) {
	if err := c.Validate(); err != nil {
		return nil, invalid("%w", err)
	}
	if c.H > mostCUSUMH || c.K > mostCUSUMK {
		return nil, invalid("a CUSUM needs h up to %d and k up to %d, got %v and %v", mostCUSUMH, mostCUSUMK, c.H, c.K)
	}
	if beyondHalf(c) && c.H > mostHeadH {
		return nil, invalid("a CUSUM with a head start above 1/2 + k/h needs h up to %d, got %v", mostHeadH, c.H)
	}
	if err := checkShifts(shifts); err != nil {
		return nil, err
	}
	out := make([]RunLength, len(shifts))
	for i, d := range shifts {
		var err error
		if out[i], err = cusumRunLength(c, d); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// beyondHalf tells whether both sums may be above zero when one signals.
func beyondHalf(c watch.CUSUM) bool { return c.HeadStart > 0.5+c.K/c.H }

func cusumRunLength(c watch.CUSUM, shift float64) (RunLength, error) {
	cells := latticeCells(c.H)
	if beyondHalf(c) {
		fine, err := newCUSUMLattice(c, shift, cells).runLength()
		if err != nil {
			return RunLength{}, err
		}
		// The lattice errs by the square of its width; two widths remove that.
		coarse, err := newCUSUMLattice(c, shift, cells/2).runLength()
		if err != nil {
			return RunLength{}, err
		}
		fine.Mean += (fine.Mean - coarse.Mean) / 3
		return fine, nil
	}
	upper, upperHead := oneSidedCUSUM(c, shift)
	lower, lowerHead := oneSidedCUSUM(c, -shift)
	// Divided by the larger of the two, so that a side that never signals does
	// not overflow.
	a, b, aHead, bHead := upper, lower, upperHead, lowerHead
	if a > b {
		a, b, aHead, bHead = b, a, bHead, aHead
	}
	r := RunLength{Method: IntegralEquation, Mean: (aHead + bHead/b*a - a) / (1 + a/b)}
	if math.IsNaN(r.Mean) || math.IsInf(r.Mean, 0) {
		return RunLength{}, errNever
	}
	r.curve = sync.OnceValues(func() ([]float64, float64) {
		survival, hazard := newCUSUMLattice(c, shift, cells).curve()
		return calibrated(r.Mean, survival, hazard)
	})
	return r, nil
}

// oneSidedCUSUM gives the mean run length of the upper sum from zero and from the
// head start.
func oneSidedCUSUM(c watch.CUSUM, shift float64) (zero, head float64) {
	// The kernel is a standard normal density; two nodes a sigma are plenty.
	nodes, weights := newQuadrature(28+int(math.Ceil(2*c.H))).on(0, c.H)
	n := len(nodes) + 1
	chain := newDenseChain(n)
	// leave gives the ways out of sum u: to zero, to the nodes, to a signal.
	leave := func(u float64, row []float64) (signals float64) {
		m := u + shift - c.K
		row[0] = special.NormalCDF(-m)
		for j, y := range nodes {
			row[j+1] = weights[j] * special.NormalPDF(y-m)
		}
		return special.NormalSurvival(c.H - m)
	}
	chain.fires[0] = leave(0, chain.q[:n])
	for i, u := range nodes {
		chain.fires[i+1] = leave(u, chain.q[(i+1)*n:(i+2)*n])
	}
	means := chain.means()
	zero, head = means[0], means[0]
	if c.HeadStart > 0 {
		row := make([]float64, n)
		leave(c.HeadStart*c.H, row)
		head = 1
		for j, v := range row {
			head += v * means[j]
		}
	}
	return zero, head
}
