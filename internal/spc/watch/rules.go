package watch

import (
	"fmt"
	"math"
	"math/bits"
)

// MaxRules is the largest number of rules one chart may carry.
const MaxRules = 16

// Point is one plotted point as the rules see it. Z is its distance from the
// centre in one-sigma distances of that side (zones). X is the plotted statistic
// in sigmas of a reading, from any fixed origin, and is only ever compared with
// that of the point before (rising, alternating): where subgroups differ in size
// the statistic may rise while its z falls. A NaN has no property at all: it
// breaks every run and is no neighbour. Judge never makes one.
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

// Rules is a compiled set of run rules. It is immutable and safe for concurrent
// use; what it remembers lives in the State it is given.
type Rules struct {
	rules   []Rule
	ops     []op
	compare bool // some rule compares a point with the one before
	turns   bool // some rule compares a step with the one before
}

// State is what a set of rules remembers of the points so far. The zero State
// starts afresh. States are compared with ==: with the same rules, equal states
// have the same future, and states with the same future are equal as far as each
// rule by itself can tell. The exception is the last value, kept exactly where a
// rule compares neighbours. A State belongs to the Rules that made it.
type State struct {
	regs [2 * MaxRules]uint64 // bit 0 is the newest point; high and low side, or one only
	last float64              // X of the last point
	step int8                 // sign of the last step, where a rule asks for turns
	seen bool                 // there is a last point
}

// source tells where the bit of the current point comes from, and how the window
// is read.
type source uint8

const (
	onePoint  source = iota // beyond: no memory
	zoneRun                 // z beyond the edge on one side, all of m
	zoneCount               // z beyond the edge on one side, k of m
	stepRun                 // steps up or down, all of m-1
	turnRun                 // steps that turn against the one before, all of m-2
	nearRun                 // |z| within the edge, all of m
	farRun                  // |z| outside the edge, all of m
)

// op is one rule, ready to run.
type op struct {
	source source
	rule   uint8   // position in the set, and bit in Fired
	reg    uint8   // its first register
	top    uint8   // a full run has this bit set in the register including the current point
	k, m   uint8   // for zoneCount
	edge   float64 // with the tie allowance in it
	keep   uint64  // the bits that outlive this point
	// live maps a register of up to 8 bits to its normal form; nil for longer ones.
	live *[256]uint8
}

// Compile checks a set of up to MaxRules rules and makes it ready to run. The
// order is kept: rule i is bit i of Fired. An empty set is allowed and never fires.
func Compile(rules []Rule) (*Rules, error) {
	if len(rules) > MaxRules {
		return nil, fmt.Errorf("rules: a chart takes at most %d run rules, got %d", MaxRules, len(rules))
	}
	r := &Rules{rules: append([]Rule(nil), rules...)}
	var reg uint8
	for i, rule := range rules {
		if err := rule.Validate(); err != nil {
			return nil, fmt.Errorf("rule %d: %w", i+1, err)
		}
		o := op{rule: uint8(i), reg: reg, edge: rule.Z + Tie, top: uint8(max(rule.M-1, 0))}
		sides := uint8(2)
		switch rule.Kind {
		case Beyond:
			o.source, sides = onePoint, 0
		case KOfM:
			o.k, o.m = uint8(rule.K), uint8(rule.M)
			switch rule.K {
			case rule.M:
				o.source = zoneRun
			default:
				o.source = zoneCount
				if rule.M <= 9 {
					o.live = new([256]uint8)
					for bits := range 1 << (rule.M - 1) {
						o.live[bits] = uint8(normal(uint64(bits), rule.K, rule.M))
					}
				}
			}
		case OneSide:
			o.source = zoneRun
		case RisingOrFalling:
			o.source, o.top, r.compare = stepRun, uint8(rule.M-2), true
		case Alternating:
			o.source, o.top, r.compare, r.turns, sides = turnRun, uint8(rule.M-3), true, true, 1
		case Within:
			o.source, o.edge, sides = nearRun, rule.Z-Tie, 1
		case Outside:
			o.source, sides = farRun, 1
		}
		o.keep = 1<<o.top - 1
		reg += sides
		r.ops = append(r.ops, o)
	}
	return r, nil
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
	var high, low, none uint64
	var up, down, turn uint64
	if r.compare {
		up, down, turn = s.compare(p.X, r.turns)
	}
	size := math.Abs(p.Z)
	for i := range r.ops {
		o := &r.ops[i]
		switch o.source {
		case onePoint:
			high |= bit(p.Z >= o.edge) << o.rule
			low |= bit(p.Z <= -o.edge) << o.rule
		case zoneRun:
			high |= o.run(&s.regs[o.reg%32], bit(p.Z >= o.edge)) << o.rule
			low |= o.run(&s.regs[(o.reg+1)%32], bit(p.Z <= -o.edge)) << o.rule
		case zoneCount:
			high |= o.count(&s.regs[o.reg%32], bit(p.Z >= o.edge)) << o.rule
			low |= o.count(&s.regs[(o.reg+1)%32], bit(p.Z <= -o.edge)) << o.rule
		case stepRun:
			high |= o.run(&s.regs[o.reg%32], up) << o.rule
			low |= o.run(&s.regs[(o.reg+1)%32], down) << o.rule
		case turnRun:
			none |= o.run(&s.regs[o.reg%32], turn) << o.rule
		case nearRun:
			none |= o.run(&s.regs[o.reg%32], bit(size <= o.edge)) << o.rule
		case farRun:
			none |= o.run(&s.regs[o.reg%32], bit(size >= o.edge)) << o.rule
		}
	}
	return Fired{Rules: uint16(high | low | none), High: uint16(high), Low: uint16(low)}
}

// run adds a point to a register whose rule wants every point of the window. One
// point without the property ends the run for good, so only the run itself is
// kept, and no more of it than the next point needs.
func (o *op) run(reg *uint64, has uint64) uint64 {
	w := (*reg<<1 | 1) & -has
	*reg = w & o.keep
	return w >> (o.top & 63) & 1
}

// count adds a point to a register whose rule wants k of the window.
func (o *op) count(reg *uint64, has uint64) uint64 {
	w := *reg<<1 | has
	kept := w & o.keep
	if o.live != nil {
		*reg = uint64(o.live[kept&255])
	} else {
		*reg = normal(kept, int(o.k), int(o.m))
	}
	return has & bit(bits.OnesCount64(w) >= int(o.k))
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

// compare steps from the last point to x and says whether that went up, down, or
// turned against the step before.
func (s *State) compare(x float64, turns bool) (up, down, turn uint64) {
	d := x - s.last
	seen := bit(s.seen)
	up = bit(d >= Tie) & seen
	down = bit(d <= -Tie) & seen
	if turns {
		step := int8(up) - int8(down)
		turn = bit(step*s.step < 0)
		s.step = step
	}
	if s.seen = x == x; s.seen {
		s.last = x + 0 // a negative zero becomes a zero
	} else {
		s.last = 0
	}
	return up, down, turn
}

func bit(b bool) uint64 {
	if b {
		return 1
	}
	return 0
}
