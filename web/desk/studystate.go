package desk

import (
	"encoding/base64"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
	"holdfast/web/ui"
)

const (
	maxCause  = 120
	maxChoice = 5000 // left-out subgroups that an address may name
)

// studyState is a limit study as its address has it.
type studyState struct {
	From, To  time.Time // whole minutes, both included; zero: not chosen yet
	Last      int       // the newest so many instead, 0 when not asked for
	Estimator limits.Estimator
	Multiple  float64
	Rules     plant.Rules
	Out       []exclusion

	rulesGiven bool
	typed      url.Values // as it came, to be shown again
	problems   map[string]string
}

// exclusion is a subgroup that is left out, with its cause.
type exclusion struct {
	Subgroup uuid.UUID
	Cause    string
}

func (e exclusion) code() string {
	return base64.RawURLEncoding.EncodeToString(e.Subgroup[:]) + "~" + e.Cause
}

func readExclusion(code string) (exclusion, bool) {
	id, cause, ok := strings.Cut(code, "~")
	b, err := base64.RawURLEncoding.DecodeString(id)
	if !ok || err != nil || len(b) != 16 {
		return exclusion{}, false
	}
	cause, err = plant.CleanTextWithin("cause", cause, maxCause)
	return exclusion{Subgroup: uuid.UUID(b), Cause: cause}, err == nil && cause != ""
}

// readStudy reads a study from an address. What is wrong with it goes to problems, by
// field; the rest stands.
func readStudy(q url.Values, f ui.Format) studyState {
	w := f.Words
	s := studyState{typed: q, problems: map[string]string{}, Estimator: limits.Estimator(q.Get("estimator"))}
	var ok bool
	if text := q.Get("from"); text != "" {
		if s.From, ok = parseTime(text, f.Zone); !ok {
			s.problems["from"] = w.T("desk.stretch.bad-time")
		}
	}
	if text := q.Get("to"); text != "" {
		if s.To, ok = parseTime(text, f.Zone); !ok {
			s.problems["to"] = w.T("desk.stretch.bad-time")
		} else if !s.From.IsZero() && s.To.Before(s.From) {
			s.problems["to"] = w.T("desk.stretch.to-before-from")
		}
	}
	if text := strings.TrimSpace(q.Get("last")); text != "" {
		n, err := strconv.Atoi(text)
		if err != nil || n < 1 || n > mostSubgroups {
			s.problems["last"] = w.T("desk.stretch.bad-last", mostSubgroups)
		} else {
			s.Last, s.From, s.To = n, time.Time{}, time.Time{}
		}
	}
	if text := strings.TrimSpace(q.Get("multiple")); text != "" {
		d, err := plant.ParseDecimal(text)
		if err != nil || d.Float() < 1 || d.Float() > 6 {
			s.problems["multiple"] = w.T("desk.study.bad-multiple")
		} else {
			s.Multiple = d.Float()
		}
	}
	s.rulesGiven = q.Get("rules") != ""
	if s.rulesGiven {
		s.Rules = plant.Rules{Location: readRules(q["loc"]), Dispersion: readRules(q["dis"])}
		if len(s.Rules.Location) == 0 {
			s.problems["rules"] = w.T("desk.rules.one-at-least")
		}
	}
	for _, code := range q["out"] {
		if e, ok := readExclusion(code); ok && len(s.Out) < maxChoice && s.cause(e.Subgroup) == "" {
			s.Out = append(s.Out, e)
		}
	}
	return s
}

// complete fills in what was not chosen: the ways of the revision in force, else the
// defaults of the chart.
func (s *studyState) complete(h plant.History) {
	setup, rev := h.State.Setup, h.State.Revision
	if rev != nil && rev.Chart != setup.Chart {
		rev = nil
	}
	if !setup.Chart.Allows(s.Estimator) {
		s.Estimator = setup.Chart.DefaultEstimator()
		if rev != nil {
			s.Estimator = rev.Estimator
		}
	}
	if s.Multiple == 0 {
		s.Multiple = limits.DefaultMultiple
		if rev != nil {
			s.Multiple = rev.Multiple
		}
	}
	if !s.rulesGiven {
		s.Rules = setup.DefaultRules()
		if rev != nil {
			s.Rules = rev.Rules
		}
	}
}

// cause is why a subgroup is left out, "" for one that is not.
func (s *studyState) cause(id uuid.UUID) string {
	for _, e := range s.Out {
		if e.Subgroup == id {
			return e.Cause
		}
	}
	return ""
}

// stretch is what the study reads of the record. The minute of the end belongs to it.
func (s *studyState) stretch() plant.Stretch {
	if s.From.IsZero() && s.To.IsZero() {
		n := s.Last
		if n == 0 {
			n = LiveStretch
		}
		return plant.Stretch{Last: n}
	}
	st := plant.Stretch{From: s.From.Truncate(time.Minute)}
	if !s.To.IsZero() {
		st.To = s.To.Truncate(time.Minute).Add(time.Minute - time.Microsecond)
	}
	return st
}

// asked reports whether somebody chose the stretch; a study that is just begun is
// nobody's mistake.
func (s *studyState) asked() bool {
	return s.typed.Get("from") != "" || s.typed.Get("to") != "" || s.typed.Get("last") != ""
}

// pin fixes a stretch that was asked for by count, so that samples that come in while
// it is studied do not move it.
func (s *studyState) pin(points []plant.Point) {
	if len(points) == 0 || !s.From.IsZero() && !s.To.IsZero() {
		return
	}
	if s.From.IsZero() {
		s.From = points[0].TakenAt
	}
	if s.To.IsZero() {
		s.To = points[len(points)-1].TakenAt
	}
	s.Last = 0
}

// values is the study as an address has it.
func (s *studyState) values(zone *time.Location) url.Values {
	q := url.Values{}
	if !s.From.IsZero() {
		q.Set("from", s.From.In(zone).Format(fieldTime))
	}
	if !s.To.IsZero() {
		q.Set("to", s.To.In(zone).Format(fieldTime))
	}
	if s.Last > 0 {
		q.Set("last", itoa(s.Last))
	}
	if s.Estimator != "" {
		q.Set("estimator", string(s.Estimator))
	}
	if s.Multiple != 0 {
		q.Set("multiple", formatMultiple(s.Multiple))
	}
	q.Set("rules", "1")
	for _, r := range s.Rules.Location {
		q.Add("loc", ruleCode(r))
	}
	for _, r := range s.Rules.Dispersion {
		q.Add("dis", ruleCode(r))
	}
	for _, e := range s.Out {
		q.Add("out", e.code())
	}
	return q
}

func formatMultiple(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// act does what a button of the study asks for. It reports whether the state changed;
// what stood against it is among the problems then.
func (s *studyState) act(f ui.Format, h plant.History) bool {
	do, arg, _ := strings.Cut(s.typed.Get("do"), ":")
	w := f.Words
	switch do {
	case "leave":
		return s.leave(f, h)
	case "back":
		n := len(s.Out)
		s.Out = slices.DeleteFunc(s.Out, func(e exclusion) bool { return e.Subgroup.String() == arg })
		return len(s.Out) != n
	case "set":
		defaults := h.State.Setup.DefaultRules()
		switch arg {
		case "western-electric":
			s.Rules.Location = watch.WesternElectric()
		case "nelson":
			s.Rules.Location = watch.Nelson()
		default:
			s.Rules = defaults
		}
		delete(s.problems, "rules")
		return true
	case "add":
		r, ok := newRule(f, s.typed, s.problems)
		if !ok {
			return false
		}
		list := &s.Rules.Location
		if arg == "dis" {
			list = &s.Rules.Dispersion
		}
		switch {
		case slices.Contains(*list, r):
			s.problems["kind"] = w.T("desk.rule.twice")
			return false
		case len(*list) >= watch.MaxRules:
			s.problems["kind"] = w.T("desk.rule.too-many", watch.MaxRules)
			return false
		}
		*list = append(*list, r)
		delete(s.problems, "rules")
		return true
	}
	return false
}

// leave leaves out the subgroup whose number was typed.
func (s *studyState) leave(f ui.Format, h plant.History) bool {
	w := f.Words
	n, err := strconv.Atoi(strings.TrimSpace(s.typed.Get("no")))
	if err != nil || n < 1 || n > len(h.Points) {
		s.problems["no"] = w.T("desk.leave.bad-number", len(h.Points))
	} else if s.cause(h.Points[n-1].Subgroup) != "" {
		s.problems["no"] = w.T("desk.leave.already", n)
	}
	cause, err := plant.CleanTextWithin("own", s.typed.Get("own"), maxCause)
	if err != nil {
		s.problems["own"] = ui.ProblemOf(w, err, "own")
	} else if cause == "" {
		if cause, err = plant.CleanTextWithin("cause", s.typed.Get("cause"), maxCause); err != nil || cause == "" {
			s.problems["cause"] = w.T("desk.leave.no-cause")
		}
	}
	if s.problems["no"] != "" || s.problems["own"] != "" || s.problems["cause"] != "" {
		return false
	}
	s.Out = append(s.Out, exclusion{Subgroup: h.Points[n-1].Subgroup, Cause: cause})
	return true
}
