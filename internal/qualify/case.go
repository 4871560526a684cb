package qualify

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Status tells where an expected value comes from.
type Status string

const (
	Published  Status = "published"   // the printed figure was seen
	FromMemory Status = "from memory" // recalled from a publication, confirmed by recomputation
	Computed   Status = "computed"    // found independently, by the method that is named
)

// Case is one value that this machine must reproduce.
type Case struct {
	Group    string
	Name     string
	Source   string
	Status   Status
	Expected float64
	// Allowance is how far the obtained value may lie away, standard errors apart, and
	// Basis tells what it follows from.
	Allowance float64
	Basis     string
	// SE is the standard error of Expected, 0 where it is not simulated.
	SE float64

	obtain figure
}

// figure computes a value, with its standard error where it is simulated.
type figure func() (value, se float64, err error)

// sheet gathers the cases of one source.
type sheet struct {
	group  string
	source string
	status Status
	cases  []Case
}

func (s *sheet) add(name string, want, allowance, se float64, basis string, got figure) {
	s.cases = append(s.cases, Case{
		Group: s.group, Name: name, Source: s.source, Status: s.status,
		Expected: want, Allowance: allowance, SE: se, Basis: basis, obtain: got,
	})
}

// from returns a sheet of the same group with another source.
func (s *sheet) from(status Status, source string) *sheet {
	return &sheet{group: s.group, source: source, status: status}
}

// join takes the cases of other sheets.
func (s *sheet) join(others ...*sheet) []Case {
	for _, o := range others {
		s.cases = append(s.cases, o.cases...)
	}
	return s.cases
}

// printed adds a value that holds to half a unit of its last printed place.
func (s *sheet) printed(name string, want node, got figure) {
	if want.null() {
		return
	}
	text := want.text()
	s.add(name, want.float(), lastPlace(text)/2*(1+1e-6), 0, "half a unit of the last place printed", got)
}

// digits adds a value that holds to the given number of significant digits.
func (s *sheet) digits(name string, want node, n int, got figure) {
	if want.null() {
		return
	}
	x := want.float()
	s.add(name, x, significant(x, n), 0, fmt.Sprintf("%d significant digits", n), got)
}

// within adds a value that holds to a stated distance.
func (s *sheet) within(name string, want, allowance float64, basis string, got figure) {
	s.add(name, want, allowance, 0, basis, got)
}

// whole adds a count, an index or the like, which has no allowance.
func (s *sheet) whole(name string, want float64, got figure) {
	s.add(name, want, 0, 0, "a whole number", got)
}

// simulated adds a value with a standard error of its own.
func (s *sheet) simulated(name string, want node, se float64, got figure) {
	if want.null() {
		return
	}
	s.add(name, want.float(), lastPlace(want.text())/2, se, "four standard errors", got)
}

// absent adds a limit that must not exist.
func (s *sheet) absent(name string, a *answer, path ...any) {
	s.add(name+" is absent (1 = yes)", 1, 0, 0, "a whole number", func() (float64, float64, error) {
		v, err := a.value(path...)
		if err == nil && v == nil {
			return 1, 0, nil
		}
		return 0, 0, err
	})
}

// lastPlace is the unit of the last digit of a number as it is written.
func lastPlace(text string) float64 {
	mantissa, exponent, _ := strings.Cut(strings.ToLower(text), "e")
	e, _ := strconv.Atoi(exponent)
	if _, decimals, has := strings.Cut(mantissa, "."); has {
		e -= len(decimals)
	}
	return math.Pow(10, float64(e))
}

// significant is half a unit of the n-th significant digit of x.
func significant(x float64, n int) float64 {
	if x == 0 {
		return math.Pow(10, -float64(n))
	}
	return 0.5 * math.Pow(10, math.Floor(math.Log10(math.Abs(x)))-float64(n-1)) * (1 + 1e-6)
}
