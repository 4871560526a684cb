package watch

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"strconv"
)

// Kind is the family a run rule belongs to, spelled as in its JSON.
type Kind string

// The families of run rules. z is the distance from the centre in one-sigma
// distances of that side; every comparison is strict, and the current point must
// itself have the property.
const (
	Beyond          Kind = "beyond"            // the point is beyond z
	KOfM            Kind = "k-of-m"            // k of the last m are beyond z on the side of the current point
	OneSide         Kind = "one-side"          // the last m are on one side of the centre
	RisingOrFalling Kind = "rising-or-falling" // m points, each above (below) the one before: m-1 steps
	Alternating     Kind = "alternating"       // m points whose m-1 steps alternate in sign
	Within          Kind = "within"            // the last m are within z of the centre, either side
	Outside         Kind = "outside"           // the last m are outside z, on either side, one side only included
)

// MaxWindow is the longest window a rule may look back over, in points.
const MaxWindow = 63

// Tie is the difference below which two values count as equal, in sigmas. Sums of
// readings are exact; what is left is the rounding of centre, sigma and quotient.
const Tie = 1e-9

// Rule is one run rule. Only the fields its Kind speaks of are used; the others
// must be zero. Z is in one-sigma distances, K and M are points.
type Rule struct {
	Kind Kind
	K, M int
	Z    float64
}

// shape says which arguments a kind takes and the least window that means
// something: one point is on a side without any run, a step needs two points, an
// alternation three.
type shape struct {
	k, m, z bool
	leastM  int
}

var shapes = map[Kind]shape{
	Beyond:          {z: true},
	KOfM:            {k: true, m: true, z: true, leastM: 1},
	OneSide:         {m: true, leastM: 2},
	RisingOrFalling: {m: true, leastM: 2},
	Alternating:     {m: true, leastM: 3},
	Within:          {m: true, z: true, leastM: 2},
	Outside:         {m: true, z: true, leastM: 2},
}

// Validate says in one sentence what is wrong with the rule, or nil. Windows run
// up to MaxWindow points, k from 1 to m, z is a finite distance above 0.
func (r Rule) Validate() error {
	sh, ok := shapes[r.Kind]
	if !ok {
		return fmt.Errorf("kind: there is no run rule called %q", string(r.Kind))
	}
	switch {
	case !sh.m && r.M != 0:
		return fmt.Errorf("m: %q takes no window, got m = %d", r.Kind, r.M)
	case sh.m && (r.M < sh.leastM || r.M > MaxWindow):
		return fmt.Errorf("m: %q needs a window of %d to %d points, got %d", r.Kind, sh.leastM, MaxWindow, r.M)
	case !sh.k && r.K != 0:
		return fmt.Errorf("k: %q takes no k, got %d", r.Kind, r.K)
	case sh.k && (r.K < 1 || r.K > r.M):
		return fmt.Errorf("k: %q needs k from 1 to m = %d, got %d", r.Kind, r.M, r.K)
	case !sh.z && r.Z != 0:
		return fmt.Errorf("z: %q takes no distance, got z = %v", r.Kind, r.Z)
	case sh.z && (!(r.Z > 0) || math.IsInf(r.Z, 1)):
		return fmt.Errorf("z: %q needs a finite distance above 0 sigma, got %v", r.Kind, r.Z)
	}
	return nil
}

// String says the rule in words, as in "2 of 3 beyond 2 sigma, same side".
func (r Rule) String() string {
	switch r.Kind {
	case Beyond:
		return "beyond " + r.distance()
	case KOfM:
		return fmt.Sprintf("%d of %d beyond %s, same side", r.K, r.M, r.distance())
	case OneSide:
		return fmt.Sprintf("%d on one side", r.M)
	case RisingOrFalling:
		return fmt.Sprintf("%d rising or falling", r.M)
	case Alternating:
		return fmt.Sprintf("%d alternating", r.M)
	case Within:
		return fmt.Sprintf("%d within %s", r.M, r.distance())
	case Outside:
		return fmt.Sprintf("%d outside %s", r.M, r.distance())
	}
	return fmt.Sprintf("unknown rule %q", string(r.Kind))
}

func (r Rule) distance() string { return strconv.FormatFloat(r.Z, 'g', -1, 64) + " sigma" }

// wire is the JSON of a rule. Pointers tell an argument that was left out from
// one that was given as zero.
type wire struct {
	Kind Kind     `json:"kind"`
	K    *int     `json:"k,omitempty"`
	M    *int     `json:"m,omitempty"`
	Z    *float64 `json:"z,omitempty"`
}

// MarshalJSON writes the arguments the kind takes and no others.
func (r Rule) MarshalJSON() ([]byte, error) {
	if err := r.Validate(); err != nil {
		return nil, err
	}
	sh, w := shapes[r.Kind], wire{Kind: r.Kind}
	if sh.k {
		w.K = &r.K
	}
	if sh.m {
		w.M = &r.M
	}
	if sh.z {
		w.Z = &r.Z
	}
	return json.Marshal(w)
}

// UnmarshalJSON reads a rule and validates it. A field that the rule does not
// know, or that its kind does not take, is an error. A beyond without z means 3.
func (r *Rule) UnmarshalJSON(data []byte) error {
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	var w wire
	if err := dec.Decode(&w); err != nil {
		return fmt.Errorf("run rule: %w", err)
	}
	sh, ok := shapes[w.Kind]
	switch {
	case !ok:
		return Rule{Kind: w.Kind}.Validate()
	case !sh.k && w.K != nil:
		return fmt.Errorf("k: %q takes no k", w.Kind)
	case !sh.m && w.M != nil:
		return fmt.Errorf("m: %q takes no window", w.Kind)
	case !sh.z && w.Z != nil:
		return fmt.Errorf("z: %q takes no distance", w.Kind)
	}
	out := Rule{Kind: w.Kind}
	if w.K != nil {
		out.K = *w.K
	}
	if w.M != nil {
		out.M = *w.M
	}
	switch {
	case w.Z != nil:
		out.Z = *w.Z
	case w.Kind == Beyond:
		out.Z = 3
	}
	if err := out.Validate(); err != nil {
		return err
	}
	*r = out
	return nil
}
