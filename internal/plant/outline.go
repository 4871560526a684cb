package plant

import (
	"math"
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/limits"
)

// Thing is a kind of what a plant has. All of them are retired and never deleted, since
// what was recorded points to them.
type Thing string

const (
	ALine           Thing = "line"
	AStation        Thing = "station"
	AMachine        Thing = "machine"
	APart           Thing = "part"
	AGauge          Thing = "gauge"
	AShift          Thing = "shift" // of the calendar: it is in no list of things
	ACharacteristic Thing = "characteristic"
)

// Outline is all that a plant is set up with, in the order of the floor and with what is
// retired.
type Outline struct {
	Plant           Plant
	Lines           []Line
	Stations        []Station
	Machines        []Machine
	Parts           []Part
	Gauges          []Gauge
	Characteristics []Described
	People          Staff
	Rounds          bool // a round was ever recorded
}

// Staff says which roles somebody who may sign in holds. The first run asks for it;
// who they are is the business of the pages about people.
type Staff struct{ Engineer, RoundTaker bool }

// Described is a characteristic with its set-up of now.
type Described struct {
	Characteristic
	Setup    Setup
	Revision int  // number of the limits in force, 0: learning
	Given    bool // those limits were stated from earlier knowledge
}

// Line finds a line by id. It and those below return the zero value when there is none.
func (o Outline) Line(id uuid.UUID) Line {
	return found(o.Lines, func(v Line) bool { return v.ID == id })
}

// Station finds a station by id.
func (o Outline) Station(id uuid.UUID) Station {
	return found(o.Stations, func(v Station) bool { return v.ID == id })
}

// Machine finds a machine by id.
func (o Outline) Machine(id uuid.UUID) Machine {
	return found(o.Machines, func(v Machine) bool { return v.ID == id })
}

// Part finds a part by id.
func (o Outline) Part(id uuid.UUID) Part {
	return found(o.Parts, func(v Part) bool { return v.ID == id })
}

// Gauge finds a gauge by id.
func (o Outline) Gauge(id uuid.UUID) Gauge {
	return found(o.Gauges, func(v Gauge) bool { return v.ID == id })
}

// Characteristic finds a characteristic by id.
func (o Outline) Characteristic(id uuid.UUID) Described {
	return found(o.Characteristics, func(v Described) bool { return v.ID == id })
}

func found[T any](list []T, is func(T) bool) (none T) {
	if i := slices.IndexFunc(list, is); i >= 0 {
		return list[i]
	}
	return none
}

// Longest texts of a set-up, in characters.
const (
	MaxName   = 80
	MaxUnit   = 20
	MaxDetail = 120
)

// CleanName is the name of a thing in the form in which it is kept.
func CleanName(field, s string) (string, error) {
	s, err := CleanTextWithin(field, s, MaxName)
	if err == nil && s == "" {
		return "", Invalidf(field, "Give it a name.")
	}
	return s, err
}

// Clean brings a set-up into the form in which it is kept: exact numbers with as many
// decimals as are measured, where that changes nothing. Texts that are too long are refused.
func (s *Setup) Clean() error {
	var err error
	if s.Unit, err = CleanTextWithin("unit", s.Unit, MaxUnit); err != nil {
		return err
	}
	c := &s.ControlPlan
	for field, text := range map[string]*string{
		"operation": &c.Operation, "drawing": &c.Drawing, "drawing_revision": &c.DrawingRevision, "plan": &c.Plan,
		"risk_analysis": &c.RiskAnalysis, "special_mark": &c.SpecialMark, "method": &c.Method,
	} {
		if *text, err = CleanTextWithin(field, *text, MaxDetail); err != nil {
			return err
		}
	}
	for _, d := range []**Decimal{&s.Target, &s.Lower, &s.Upper} {
		if *d == nil || s.Decimals < 0 || s.Decimals > MaxDecimals {
			continue
		}
		if n, err := (*d).In(s.Decimals); err == nil {
			*d = &Decimal{Units: n, Decimals: s.Decimals}
		}
	}
	return nil
}

// MaxShifts is the most shifts that a day may have.
const MaxShifts = 6

// CheckShifts says what in a shift calendar cannot be. An empty one is right: the day is
// one shift.
func CheckShifts(shifts []Shift) error {
	if len(shifts) > MaxShifts {
		return Invalidf("shifts", "A day has at most %d shifts.", MaxShifts)
	}
	for i, s := range shifts {
		switch {
		case s.Name == "":
			return Invalidf("shifts", "Each shift needs a name.")
		case len([]rune(s.Name)) > MaxName:
			return Invalidf("shifts", "The name of a shift has at most %d characters.", MaxName)
		case s.Starts < 0 || s.Starts >= 24*time.Hour || s.Starts%time.Minute != 0:
			return Invalidf("shifts", "A shift starts at a time of the day, such as 06:00.")
		}
		for _, o := range shifts[:i] {
			switch {
			case o.Name == s.Name:
				return Invalidf("shifts", "Two shifts are called %s.", s.Name)
			case o.Starts == s.Starts:
				return Invalidf("shifts", "%s and %s start at the same time.", o.Name, s.Name)
			}
		}
	}
	if len(shifts) == 1 {
		return Invalidf("shifts", "One shift alone is the whole day: leave the calendar empty, or name at least two.")
	}
	return nil
}

// MaxStreams is the most parallel sources that a machine may have.
const MaxStreams = 64

// Check says what about a machine cannot be.
func (m Machine) Check() error {
	if !(m.PartsPerHour >= 0 && m.PartsPerHour <= 1e6) {
		return Invalidf("rate", "The rate is a number of parts an hour, at most a million.")
	}
	if len(m.Streams) > MaxStreams {
		return Invalidf("streams", "A machine has at most %d streams.", MaxStreams)
	}
	for i, s := range m.Streams {
		if slices.ContainsFunc(m.Streams[:i], func(o Stream) bool { return o.Name == s.Name }) {
			return Invalidf("streams", "A machine names each of its streams once: %s is there twice.", s.Name)
		}
	}
	return nil
}

// SetupEffect is what saving another version of a set-up does.
type SetupEffect struct {
	Changed  []string // what differs, by the names of the form's fields, in their order
	Learning []string // those of Changed under which the limits in force mean nothing
}

// Effect compares a set-up with the version that it is to replace.
func (s Setup) Effect(old Setup) SetupEffect {
	var e SetupEffect
	add := func(name string, differs, relearns bool) {
		if differs {
			e.Changed = append(e.Changed, name)
			if relearns {
				e.Learning = append(e.Learning, name)
			}
		}
	}
	add("unit", s.Unit != old.Unit, true)
	add("decimals", s.Decimals != old.Decimals, true)
	add("target", !same(s.Target, old.Target), false)
	add("lower", !same(s.Lower, old.Lower), false)
	add("upper", !same(s.Upper, old.Upper), false)
	add("worse", s.Worse != old.Worse, false)
	add("size", s.Size != old.Size, true)
	add("chart", s.Chart != old.Chart, true)
	add("gauge", s.GaugeID != old.GaugeID, false)
	add("minutes", s.Plan.EveryMinutes != old.Plan.EveryMinutes, false)
	add("parts", s.Plan.EveryParts != old.Plan.EveryParts, false)
	add("events", !slices.Equal(s.Plan.Events, old.Plan.Events), false)
	add("grace", s.Plan.GraceMinutes != old.Plan.GraceMinutes, false)
	a, b := s.ControlPlan, old.ControlPlan
	add("operation", a.Operation != b.Operation, false)
	add("drawing", a.Drawing != b.Drawing, false)
	add("drawing_revision", a.DrawingRevision != b.DrawingRevision, false)
	add("plan", a.Plan != b.Plan, false)
	add("risk_analysis", a.RiskAnalysis != b.RiskAnalysis, false)
	add("special_mark", a.SpecialMark != b.SpecialMark, false)
	add("method", a.Method != b.Method, false)
	return e
}

func same(a, b *Decimal) bool {
	if a == nil || b == nil {
		return a == b
	}
	return a.Compare(*b) == 0
}

// KnownLimits are a centre and a sigma that an engineer states from earlier knowledge, to
// judge by from the first round on. They are frozen as a revision whose basis says so.
type KnownLimits struct {
	Characteristic uuid.UUID
	SetupVersion   int
	After          int     // number of the newest revision that the engineer saw, 0 when none
	Center         float64 // in the unit
	Sigma          float64 // of a single reading
	Reason         string  // where they come from
	Person         uuid.UUID
}

// Check says what in known limits cannot be, for the set-up that they are meant for.
func (k *KnownLimits) Check(s Setup) error {
	var err error
	if k.Reason, err = CleanTextWithin("reason", k.Reason, 500); err != nil {
		return err
	}
	switch {
	case math.IsNaN(k.Center) || math.Abs(k.Center) > 1e12:
		return Invalidf("center", "The centre is a number in the unit of the characteristic.")
	case !(k.Sigma > 0) || k.Sigma > 1e12:
		return Invalidf("sigma", "Sigma is a number above zero, in the unit of the characteristic.")
	case k.Sigma < math.Pow10(-s.Decimals)/100:
		return Invalidf("sigma", "This sigma is less than a hundredth of the last decimal that is measured. Is it in the same unit?")
	case k.Reason == "":
		return Invalidf("reason", "Say where centre and sigma come from.")
	}
	if s.Lower != nil && s.Upper != nil {
		width := s.Upper.Float() - s.Lower.Float()
		if k.Center < s.Lower.Float()-width || k.Center > s.Upper.Float()+width {
			return Invalidf("center", "This centre is far outside the specification. Is it in the same unit?")
		}
	}
	return nil
}

// Revision is the known limits as a revision, with the rules that its chart starts with.
func (k KnownLimits) Revision(s Setup) Revision {
	return Revision{
		Characteristic: k.Characteristic, SetupVersion: s.Version, Chart: s.Chart, Estimator: s.Chart.DefaultEstimator(),
		Center: k.Center, Sigma: k.Sigma, Multiple: limits.DefaultMultiple, Rules: s.DefaultRules(),
		Basis: Basis{Given: true}, Reason: k.Reason, Author: k.Person,
	}
}
