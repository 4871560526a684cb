package capability

import "math"

// Specification holds the limits a part must keep and the value it should have, in
// the readings' unit. A nil pointer is a side or a target that does not exist; a
// reading on a limit is inside.
type Specification struct {
	Lower, Upper, Target *float64
}

func (s Specification) check() error {
	for _, c := range []struct {
		name  string
		value *float64
	}{{"the lower specification limit", s.Lower}, {"the upper specification limit", s.Upper}, {"the target", s.Target}} {
		if c.value != nil && !finite(*c.value) {
			return invalid("%s must be a finite number, got %g", c.name, *c.value)
		}
	}
	if s.Lower == nil && s.Upper == nil {
		return invalid("there is no specification limit to compare with")
	}
	if s.Lower != nil && s.Upper != nil && !(*s.Lower < *s.Upper) {
		return invalid("the lower specification limit %g must be below the upper one %g", *s.Lower, *s.Upper)
	}
	return nil
}

// PPM are parts per million outside on each side; nil where there is no limit.
type PPM struct {
	Below, Above *float64
}

// NormalPPM returns the parts per million of a normal process outside the
// specification, from its mean and its standard deviation above zero.
func NormalPPM(mean, sd float64, spec Specification) (PPM, error) {
	if err := spec.check(); err != nil {
		return PPM{}, err
	}
	if !finite(mean) || !(sd > 0) || math.IsInf(sd, 1) {
		return PPM{}, invalid("a normal process has a finite mean and an s.d. above zero, got %g and %g", mean, sd)
	}
	l := normalLaw{mean, sd}
	return spec.expected(l), nil
}

// observed counts the readings strictly outside.
func (s Specification) observed(x []float64) PPM {
	below, above := 0, 0
	for _, v := range x {
		if s.Lower != nil && v < *s.Lower {
			below++
		}
		if s.Upper != nil && v > *s.Upper {
			above++
		}
	}
	var p PPM
	if s.Lower != nil {
		p.Below = some(1e6 * float64(below) / float64(len(x)))
	}
	if s.Upper != nil {
		p.Above = some(1e6 * float64(above) / float64(len(x)))
	}
	return p
}

// expected asks a distribution for its tails.
func (s Specification) expected(l law) PPM {
	var p PPM
	if s.Lower != nil {
		lower, _ := l.tails(*s.Lower)
		p.Below = some(1e6 * lower)
	}
	if s.Upper != nil {
		_, upper := l.tails(*s.Upper)
		p.Above = some(1e6 * upper)
	}
	return p
}

// nearest is the smaller of the two one-sided figures that exist.
func nearest(lower, upper *float64) *float64 {
	switch {
	case lower == nil:
		return upper
	case upper == nil:
		return lower
	}
	return some(math.Min(*lower, *upper))
}

func some(x float64) *float64 { return &x }
