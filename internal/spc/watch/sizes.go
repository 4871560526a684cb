package watch

import (
	"fmt"
	"maps"
	"math"
	"sync"
	"sync/atomic"

	"holdfast/internal/spc/limits"
)

// scale is a band and the reciprocals of its one-sigma distances: below the centre
// at index 1, where the sign bit of the distance points.
type scale struct {
	band limits.Band
	per  [2]float64
}

func newScale(b limits.Band) scale {
	return scale{band: b, per: [2]float64{1 / b.Above, 1 / b.Below}}
}

// plot places a value on its chart and returns its z.
func (s *scale) plot(p *Plotted, value float64) float64 {
	d := value - s.band.Center
	z := float64(d * s.per[math.Float64bits(d)>>63])
	// The band goes over field by field: as a whole it goes in overlapping moves,
	// which stall (16 instead of 9 ns a subgroup without rules).
	p.Value, p.Z = value, z
	p.Band.Center, p.Band.Lower, p.Band.Upper = s.band.Center, s.band.Lower, s.band.Upper
	p.Band.Below, p.Band.Above = s.band.Below, s.band.Above
	return z
}

// z is the distance that plot would give.
func (s *scale) z(value float64) float64 {
	d := value - s.band.Center
	return float64(d * s.per[math.Float64bits(d)>>63])
}

// sized is everything that depends on the size of a subgroup of readings.
type sized struct {
	location, dispersion scale
	hasDispersion        bool
	variance             float64 // of the location statistic, in sigmas of a reading squared
}

// usual is the largest subgroup size that is looked up without a map.
const usual = 25

// sizes gives what depends on the size of a subgroup of readings. It is made when a
// size is first met: most characteristics know one or two, and probability limits
// take milliseconds.
type sizes struct {
	standard limits.Standard
	perSigma float64
	spread   spread
	small    [usual + 1]atomic.Pointer[sized]
	larger   kept[int, sized]
}

// set checks the standard and prepares the size one, which every chart takes.
func (t *sizes) set(s limits.Standard) error {
	if err := s.Check(); err != nil {
		return err
	}
	t.spread = spreads[s.Chart.DispersionStatistic()]
	if t.spread == 0 {
		return fmt.Errorf("chart: %q cannot be judged subgroup by subgroup", s.Chart)
	}
	if s.Sigma < 1e-150 || s.Sigma > 1e150 { // squares and reciprocals would overflow
		return fmt.Errorf("sigma: %v is too far from 1 to be judged by", s.Sigma)
	}
	t.standard, t.perSigma = s, 1/s.Sigma
	_, err := t.of(1)
	return err
}

// of gives what depends on n, and makes it if need be.
func (t *sizes) of(n int) (*sized, error) {
	small := n >= 0 && n <= usual
	var known *sized
	if small {
		known = t.small[n].Load()
	} else {
		known = t.larger.get(n)
	}
	if known != nil {
		return known, nil
	}
	location, dispersion, err := t.standard.Bands(n)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrSubgroup, err)
	}
	se := location.Above * t.perSigma
	made := &sized{
		location:      newScale(location),
		hasDispersion: dispersion.Exists(),
		variance:      float64(se * se),
	}
	if made.hasDispersion {
		made.dispersion = newScale(dispersion)
	}
	// Two folds that meet a size at once make the same, so the last may win.
	if small {
		t.small[n].Store(made)
	} else {
		t.larger.put(n, made)
	}
	return made, nil
}

// mostKept is how many sizes are kept; what is asked beyond them is computed anew.
// Subgroups of readings cannot have more.
const mostKept = 1024

// kept remembers what was computed for a size. Reading takes no lock and allocates
// nothing; adding copies, because it happens seldom.
type kept[K comparable, V any] struct {
	all atomic.Pointer[map[K]*V]
	add sync.Mutex
}

func (k *kept[K, V]) get(key K) *V {
	all := k.all.Load()
	if all == nil {
		return nil
	}
	return (*all)[key]
}

func (k *kept[K, V]) full() bool {
	all := k.all.Load()
	return all != nil && len(*all) >= mostKept
}

func (k *kept[K, V]) put(key K, v *V) {
	k.add.Lock()
	defer k.add.Unlock()
	if k.full() {
		return
	}
	next := map[K]*V{key: v}
	if all := k.all.Load(); all != nil {
		maps.Copy(next, *all)
	}
	next[key] = v
	k.all.Store(&next)
}
