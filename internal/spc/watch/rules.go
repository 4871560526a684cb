package watch

import (
	"fmt"
	"math"
	"math/bits"
	"slices"
	"sync"
)

// MaxRules is the largest number of rules one chart may carry.
const MaxRules = 16

// Point is one plotted point as the rules see it. Z is its distance from the
// centre in one-sigma distances of that side (zones). X is the plotted statistic
// in sigmas of a reading, from any fixed origin, and is only ever compared with
// that of the point before (rising, alternating): where subgroups differ in size
// the statistic may rise while its z falls. A NaN in either fires nothing and starts
// the rules afresh. Judge never makes one.
type Point struct{ Z, X float64 }

// Fired says which rules hold at a point, one bit a rule in the order compiled,
// and on which side. A bit in Rules that is in neither High nor Low belongs to a
// rule without a side (alternating, within, outside). For rising-or-falling, High
// is rising.
type Fired struct{ Rules, High, Low uint16 }

// Any reports whether a rule holds at the point.
func (f Fired) Any() bool { return f.Rules != 0 }

// Has reports whether rule i holds at the point.
func (f Fired) Has(i int) bool { return f.Rules>>uint(i)&1 != 0 }

// Side says on which side rule i fired; None when it did not, or has no side.
func (f Fired) Side(i int) Side {
	return Side(f.High>>uint(i)&1) | Side(f.Low>>uint(i)&1)<<1
}

// A lane is one rule on one side: rule i has bit i for the high side, bit 16+i for
// the low side, and bit 32+i when it has no side. A word of lanes says for all of
// them at once who has its property at the current point.
type lanes = uint64

const (
	lowLane  = MaxRules
	noneLane = 2 * MaxRules
)

// planes is how many bits a run length takes: a run is remembered up to one point
// short of the longest window.
const planes = 6

// Rules is a compiled set of run rules. It is immutable and safe for concurrent
// use; what it remembers lives in the State it is given.
type Rules struct {
	rules []Rule
	// edges are the distinct distances from the centre at which some property
	// begins or ends, ascending, with the tie allowance in them. The number of
	// edges at or below |z| is the zone of a point.
	edges []float64
	// zones says, above the centre and below it, who has what in each zone.
	zones [2][2 * MaxRules]zone
	// steps says who has what by the step to the point plus four times the step
	// before it: 1 up, 2 down, 0 neither.
	steps             [16]lanes
	neighbours, turns bool // some rule looks at the step, at the step before

	runs    lanes         // those that want every point of their window
	longest [planes]lanes // their window less one, bit by bit
	long    bool          // some of them are beyond 16 points
	windows []window      // those that want k of m
}

const stepUp, stepDown = 1, 2

// zone is what a point has by its distance from the centre alone.
type zone struct {
	has   lanes
	sides uint64 // of window i, at bit 2i: 1 the high side, 2 the low side, 0 neither
}

// window is a rule that wants k of the last m, k < m. Its two registers hold the
// last m-1 points, bit 0 the newest, on the high and the low side.
type window struct {
	rule uint8
	k, m uint8
	// next steps a window of up to shortWindow points in one look-up. Its index is
	// both registers, the low side above the high one, and below them the side of
	// the point. An entry is the registers that follow and, above them, the lanes
	// that fire as if this were rule 0.
	next *shortTable
}

// shortWindow is the longest window stepped by look-up, shortFires where the lanes
// begin in an entry.
const (
	shortWindow = 5
	shortFires  = 2 * (shortWindow - 1)
)

type shortTable [1 << (2 * shortWindow)]uint32

// shortTables are the same for everybody, by m and k, and made once.
var shortTables = sync.OnceValue(func() (tables [shortWindow + 1][shortWindow]*shortTable) {
	for m := 2; m <= shortWindow; m++ {
		for k := 1; k < m; k++ {
			tables[m][k] = newShortTable(k, m)
		}
	}
	return tables
})

func newShortTable(k, m int) *shortTable {
	w, t, bits := window{k: uint8(k), m: uint8(m)}, new(shortTable), m-1
	for at := range uint64(1) << (2*bits + 2) {
		high, firesHigh := w.count(at>>2&(1<<bits-1), at&1)
		low, firesLow := w.count(at>>(2+bits), at>>1&1)
		t[at] = uint32(high | low<<bits | (firesHigh|firesLow<<lowLane)<<shortFires)
	}
	return t
}

// State is what a set of rules remembers of the points so far. The zero State
// starts afresh. States are compared with ==: with the same rules, equal states
// have the same future, and states with the same future are equal as far as each
// rule by itself can tell. The exception is the last value, kept exactly where a
// rule compares neighbours. A State belongs to the Rules that made it.
type State struct {
	runs    [planes]lanes       // bit b of every lane's run length
	windows [MaxRules][2]uint64 // registers of each k-of-m, high and low; of a short one both in the first
	last    float64             // X of the last point
	step    uint8               // the last step as in Rules.steps, where a rule asks for turns
	seen    bool                // there is a last point
}

// Compile checks a set of up to MaxRules rules and makes it ready to run. The
// order is kept: rule i is bit i of Fired. An empty set is allowed and never fires.
func Compile(rules []Rule) (*Rules, error) {
	if len(rules) > MaxRules {
		return nil, fmt.Errorf("rules: a chart takes at most %d run rules, got %d", MaxRules, len(rules))
	}
	r := &Rules{rules: slices.Clone(rules)}
	for i, rule := range rules {
		if err := rule.Validate(); err != nil {
			return nil, fmt.Errorf("rule %d: %w", i+1, err)
		}
		if edge, ok := rule.edge(); ok {
			r.edges = append(r.edges, edge)
		}
	}
	slices.Sort(r.edges)
	r.edges = slices.Compact(r.edges)
	for i, rule := range rules {
		r.add(i, rule)
	}
	return r, nil
}

// edge is the least distance from the centre at which the rule's property holds,
// for within the least at which it no longer does.
func (rule Rule) edge() (float64, bool) {
	switch rule.Kind {
	case RisingOrFalling, Alternating:
		return 0, false
	case Within:
		return math.Nextafter(rule.Z-Tie, math.Inf(1)), true
	}
	return rule.Z + Tie, true
}

// add lays out one validated rule.
func (r *Rules) add(i int, rule Rule) {
	high, low, none := lanes(1)<<i, lanes(1)<<(lowLane+i), lanes(1)<<(noneLane+i)
	length := rule.M // points, steps or turns that make a firing
	switch rule.Kind {
	case RisingOrFalling:
		r.neighbours = true
		for before := 0; before < 16; before += 4 {
			r.steps[before|stepUp] |= high
			r.steps[before|stepDown] |= low
		}
		r.run(high|low, rule.M-1)
		return
	case Alternating:
		r.neighbours, r.turns = true, true
		r.steps[4*stepDown|stepUp] |= none
		r.steps[4*stepUp|stepDown] |= none
		r.run(none, rule.M-2)
		return
	case Within, Outside:
		high, low = none, none
	case Beyond:
		length = 1
	}
	edge, _ := rule.edge()
	for n := range len(r.edges) + 1 {
		if reached := n > 0 && r.edges[n-1] >= edge; reached != (rule.Kind == Within) {
			r.zones[0][n].has |= high
			r.zones[1][n].has |= low
		}
	}
	if rule.Kind != KOfM || rule.K == rule.M {
		r.run(high|low, length)
		return
	}
	w := window{rule: uint8(i), k: uint8(rule.K), m: uint8(rule.M)}
	for zone := range r.zones[0] {
		r.zones[0][zone].sides |= r.zones[0][zone].has >> i & 1 << (2 * len(r.windows))
		r.zones[1][zone].sides |= r.zones[1][zone].has >> (lowLane + i) & 1 << (2*len(r.windows) + 1)
	}
	if rule.M <= shortWindow {
		w.next = shortTables()[rule.M][rule.K]
	}
	r.windows = append(r.windows, w)
}

// run makes lanes fire at every point that completes length in a row.
func (r *Rules) run(who lanes, length int) {
	r.runs |= who
	r.long = r.long || length > 16
	for b := range planes {
		r.longest[b] |= who & -lanes((length-1)>>b&1)
	}
}

// Len is the number of rules.
func (r *Rules) Len() int { return len(r.rules) }

// Rule is rule i as it was compiled.
func (r *Rules) Rule(i int) Rule { return r.rules[i] }

// Step judges one point and moves the state on. A rule holds at every point that
// meets it; nothing restarts after a firing. Rules of the k-of-m kind may fire
// before m points exist, the others may not.
//
// Source of the definitions: Western Electric (1956), Statistical Quality Control
// Handbook; Nelson (1984), Journal of Quality Technology 16(4), with the readings
// stated at each Kind.
func (r *Rules) Step(s *State, p Point) Fired {
	if len(r.rules) == 0 {
		return Fired{}
	}
	// Nothing below branches on the data: on a process in control such a branch
	// is a coin toss, and a wrong guess costs as much as a whole rule. Nor is it
	// split up: the calls would cost as much as the work.
	if p.Z != p.Z || p.X != p.X {
		*s = State{}
		return Fired{}
	}
	size, n := math.Abs(p.Z), uint64(0)
	for _, edge := range r.edges {
		n += bit(size >= edge)
	}
	at := &r.zones[math.Float64bits(p.Z)>>63][n%(2*MaxRules)]
	has := at.has
	if r.neighbours {
		var step uint64
		if s.seen {
			d := p.X - s.last
			step = bit(d >= Tie) | bit(d <= -Tie)<<1
		}
		has |= r.steps[(step|uint64(s.step)<<2)%16]
		if r.turns {
			s.step = uint8(step)
		}
		s.seen, s.last = true, p.X+0 // a negative zero becomes a zero
	}

	// All runs at once. The run lengths stand upright: word b holds bit b of every
	// lane's length, so one addition serves all lanes. A length stops one short of
	// its window: there the next point with the property fires, and more would make
	// no difference. The upper two words are for windows beyond 16 points, which few
	// sets have.
	c, full, on := &s.runs, &r.longest, has&r.runs
	a0, a1, a2, a3 := c[0], c[1], c[2], c[3]
	short := (a0 ^ full[0]) | (a1 ^ full[1]) | (a2 ^ full[2]) | (a3 ^ full[3])
	if r.long {
		short |= (c[4] ^ full[4]) | (c[5] ^ full[5])
	}
	fired, carry := on&^short, on&short
	c[0], carry = (a0^carry)&on, a0&carry
	c[1], carry = (a1^carry)&on, a1&carry
	c[2], carry = (a2^carry)&on, a2&carry
	c[3], carry = (a3^carry)&on, a3&carry
	if r.long {
		a4, a5 := c[4], c[5]
		c[4], carry = (a4^carry)&on, a4&carry
		c[5] = (a5 ^ carry) & on
	}

	ws, sides := r.windows, at.sides
	for i := range ws {
		w, reg := &ws[i], &s.windows[uint(i)%MaxRules]
		if w.next != nil {
			next := w.next[(reg[0]<<2|sides&3)%uint64(len(w.next))]
			reg[0] = uint64(next % (1 << shortFires))
			fired |= uint64(next>>shortFires) << (w.rule % MaxRules)
		} else {
			var high, low uint64
			reg[0], high = w.count(reg[0], sides&1)
			reg[1], low = w.count(reg[1], sides>>1&1)
			fired |= (high | low<<lowLane) << (w.rule % MaxRules)
		}
		sides >>= 2
	}
	high, low := uint16(fired), uint16(fired>>lowLane)
	return Fired{Rules: high | low | uint16(fired>>noneLane), High: high, Low: low}
}

// count adds a point to one register: a firing needs that the current point has the
// property, and k of the m points up to it.
func (w *window) count(reg, has uint64) (after, fires uint64) {
	seen := reg<<1 | has
	fires = has & bit(bits.OnesCount64(seen) >= int(w.k))
	return normal(seen&(1<<(w.m-1)-1), int(w.k), int(w.m)), fires
}

// normal clears from a register of the last m-1 points what can make no
// difference to any firing to come. A firing needs the point it belongs to, so
// before the oldest point (of age a) leaves there are at most m-a more: it matters
// only if the points held are fewer than k and those can make up what is missing.
// When the oldest matters, all newer ones do.
func normal(reg uint64, k, m int) uint64 {
	for reg != 0 {
		held, age := bits.OnesCount64(reg), bits.Len64(reg)
		if held < k && k-held <= m-age {
			break
		}
		reg &^= 1 << (age - 1)
	}
	return reg
}

func bit(b bool) uint64 {
	if b {
		return 1
	}
	return 0
}
