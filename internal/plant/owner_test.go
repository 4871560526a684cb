package plant

import (
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"
)

// TestEveryBranchOfRouting walks the table of who must act (design 1 and the words of
// the defaults).
func TestEveryBranchOfRouting(t *testing.T) {
	t.Parallel()
	rules := DefaultSettings().Owner
	well := situation{limits: true, quiet: 25, asked: true, readings: 125, subgroups: 25, grade: AtCapable}
	with := func(f func(*situation)) situation { s := well; f(&s); return s }
	for name, tc := range map[string]struct {
		s      situation
		owner  Owner
		reason OwnerReason
	}{
		"stable and capable":               {well, Nobody, IsCapable},
		"a matter is open":                 {with(func(s *situation) { s.matter = true }), AtStation, MatterOpen},
		"a matter while learning":          {situation{matter: true}, AtStation, MatterOpen},
		"learning":                         {with(func(s *situation) { s.limits = false }), Engineering, NoLimits},
		"soon after a matter":              {with(func(s *situation) { s.afterMatter, s.quiet = true, 24 }), AtStation, Settling},
		"long after a matter":              {with(func(s *situation) { s.afterMatter = true }), Nobody, IsCapable},
		"new limits":                       {with(func(s *situation) { s.quiet = 24 }), Engineering, TooFew},
		"too few readings":                 {with(func(s *situation) { s.readings = 99 }), Engineering, TooFew},
		"too few subgroups":                {with(func(s *situation) { s.subgroups = 24 }), Engineering, TooFew},
		"no specification":                 {with(func(s *situation) { s.asked, s.readings, s.subgroups, s.grade = false, 0, 0, Ungraded }), Nobody, NoSpecification},
		"no specification, unproved":       {with(func(s *situation) { s.asked, s.quiet = false, 3 }), Engineering, TooFew},
		"no spread":                        {with(func(s *situation) { s.grade = Ungraded }), Engineering, NoSpread},
		"not capable":                      {with(func(s *situation) { s.grade = BelowAll }), Engineering, NotCapable},
		"could be accepted":                {with(func(s *situation) { s.grade = AtAccepted }), Engineering, NotCapable},
		"accepted":                         {with(func(s *situation) { s.grade, s.mark = AtAccepted, Marked }), Nobody, IsAccepted},
		"accepted once":                    {with(func(s *situation) { s.grade, s.mark = AtAccepted, MarkEnded }), Engineering, AcceptanceEnded},
		"accepted, and worse since":        {with(func(s *situation) { s.grade, s.mark = BelowAll, Marked }), Engineering, NotCapable},
		"accepted, and capable since":      {with(func(s *situation) { s.grade, s.mark = AtCapable, Marked }), Nobody, IsCapable},
		"accepted, and a matter is open":   {with(func(s *situation) { s.matter, s.grade, s.mark = true, AtAccepted, Marked }), AtStation, MatterOpen},
		"not capable, soon after a matter": {with(func(s *situation) { s.grade, s.afterMatter, s.quiet = BelowAll, true, 0 }), AtStation, Settling},
	} {
		owner, reason := route(tc.s, rules)
		if owner != tc.owner || reason != tc.reason {
			t.Errorf("%s: %s because of %s, want %s because of %s", name, owner, reason, tc.owner, tc.reason)
		}
	}
}

// began is when the records of these tests begin.
var began = time.Date(2026, 3, 2, 6, 0, 0, 0, time.UTC)

func hour(h float64) time.Time { return began.Add(time.Duration(h * float64(time.Hour))) }

// hourly is so many subgroups of 5, one an hour from hour 1, with a Ppk near 0.9, 1.15 or
// 2 by how wide they are (in thousandths, against a specification of 0 +- 0.030).
func hourly(n int, spread int64) []OwnerSubgroup {
	out := make([]OwnerSubgroup, n)
	for i := range out {
		d := int64(i%3) - 1
		out[i] = OwnerSubgroup{hour(float64(i + 1)), Summarise([]int64{d * spread / 4, spread, -spread, spread / 2, -spread / 2}, 3)}
	}
	return out
}

func spec(units int64) *Decimal { return &Decimal{Units: units, Decimals: 3} }

func recordOf(subgroups []OwnerSubgroup) OwnerRecord {
	return OwnerRecord{
		Until:     hour(1000),
		Setups:    []Setup{{Version: 1, MadeAt: began, Lower: spec(-30), Upper: spec(30)}},
		Course:    Course{Boundaries: []Boundary{{At: hour(0.5), Kind: ByRevision, Revision: uuid.New()}}},
		Subgroups: subgroups,
	}
}

// said is a course in short.
func said(course []Ownership) (out []OwnerReason) {
	for _, o := range course {
		out = append(out, o.Reason)
	}
	return out
}

func TestTheCourseOfTheOwnerFollowsTheRecord(t *testing.T) {
	t.Parallel()
	look := []MatterLine{{Firing: Firing{Panel: Location, Rule: "r"}}}
	hold := []MatterLine{{Firing: Firing{Panel: Reading, Rule: OutsideSpecification}}}
	gone := []MatterLine{{Firing: Firing{Panel: Location, Rule: "r"}, Withdrawn: true}}
	matter := func(lines []MatterLine, from, to float64) Matter {
		return Matter{ID: uuid.New(), OpenedAt: hour(from), OpenedTaken: hour(from), ClosedAt: hour(to), Lines: lines}
	}
	for name, tc := range map[string]struct {
		r    OwnerRecord
		want []OwnerReason
	}{
		"capable":     {recordOf(hourly(30, 6)), []OwnerReason{NoLimits, TooFew, IsCapable}},
		"not capable": {recordOf(hourly(30, 14)), []OwnerReason{NoLimits, TooFew, NotCapable}},
		"a matter and its fix": {func() OwnerRecord {
			r := recordOf(hourly(80, 6))
			r.Matters = []Matter{matter(look, 40, 42)}
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable, MatterOpen, Settling, IsCapable}},
		"only a hold": {func() OwnerRecord {
			r := recordOf(hourly(80, 14))
			r.Matters = []Matter{matter(hold, 40, 42)}
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable, MatterOpen, NotCapable}},
		"a hold where the plant counts them": {func() OwnerRecord {
			r := recordOf(hourly(80, 14))
			r.Matters = []Matter{matter(hold, 40, 42)}
			s := DefaultSettings()
			s.Owner.HoldsCount, s.MadeAt = true, began
			r.Settings = []Settings{s}
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable, MatterOpen, Settling, NotCapable}},
		"a withdrawn matter": {func() OwnerRecord {
			r := recordOf(hourly(80, 6))
			r.Matters = []Matter{matter(gone, 40, 42)}
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable, MatterOpen, IsCapable}},
		"new limits": {func() OwnerRecord {
			r := recordOf(hourly(80, 6))
			r.Course = r.Course.With(Boundary{At: hour(50.5), Kind: ByRevision, Revision: uuid.New()})
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable, TooFew, IsCapable}},
		"a restart under the same limits": {func() OwnerRecord {
			r := recordOf(hourly(80, 6))
			r.Course = r.Course.With(Boundary{At: hour(50.5), Kind: ByRestart})
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable}},
		"a new set-up": {func() OwnerRecord {
			r := recordOf(hourly(80, 6))
			r.Course = r.Course.With(Boundary{At: hour(50.5), Kind: BySetup})
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable, NoLimits}},
		"accepted for a time": {func() OwnerRecord {
			r := recordOf(hourly(90, 11))
			r.Acceptances = []Acceptance{{ID: uuid.New(), AcceptedAt: hour(40), Until: hour(60), Lower: spec(-30), Upper: spec(30)}}
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable, IsAccepted, AcceptanceEnded}},
		"accepted and ended early": {func() OwnerRecord {
			r := recordOf(hourly(90, 11))
			r.Acceptances = []Acceptance{{ID: uuid.New(), AcceptedAt: hour(40), Until: hour(600), Lower: spec(-30), Upper: spec(30), End: Ending{At: hour(50)}}}
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable, IsAccepted, AcceptanceEnded}},
		"accepted for another specification": {func() OwnerRecord {
			r := recordOf(hourly(90, 11))
			r.Acceptances = []Acceptance{{ID: uuid.New(), AcceptedAt: hour(40), Until: hour(600), Lower: spec(-25), Upper: spec(30)}}
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable}},
		"a customer asks for more": {func() OwnerRecord {
			r := recordOf(hourly(90, 6))
			s := DefaultSettings()
			s.Owner.Capable, s.MadeAt = 4, hour(60)
			r.Settings = []Settings{s}
			return r
		}(), []OwnerReason{NoLimits, TooFew, IsCapable, NotCapable}},
		"a wider specification": {func() OwnerRecord {
			r := recordOf(hourly(90, 14))
			r.Setups = append(r.Setups, Setup{Version: 2, MadeAt: hour(60), Lower: spec(-90), Upper: spec(90)})
			return r
		}(), []OwnerReason{NoLimits, TooFew, NotCapable, IsCapable}},
		"no specification": {func() OwnerRecord {
			r := recordOf(hourly(30, 6))
			r.Setups[0].Lower, r.Setups[0].Upper = nil, nil
			return r
		}(), []OwnerReason{NoLimits, TooFew, NoSpecification}},
		"nothing varies": {recordOf(hourly(30, 0)), []OwnerReason{NoLimits, TooFew, NoSpread}},
	} {
		standing, course := tc.r.Fold()
		if got := said(course); !slices.Equal(got, tc.want) {
			t.Errorf("%s: %v, want %v (figure %+v)", name, got, tc.want, standing.Figure)
		}
		if n := len(course); n == 0 || standing.Last != course[n-1] {
			t.Errorf("%s: the standing ends with %+v", name, standing.Last)
		}
	}
}

// TestWhatEngineeringFoundOutlastsAMatter: while the station looks for a special cause the
// finding stands beside it, and afterwards it is engineering's since the same instant; not
// under new limits or another specification.
func TestWhatEngineeringFoundOutlastsAMatter(t *testing.T) {
	t.Parallel()
	r := recordOf(hourly(120, 14))
	for i, at := range []float64{40, 75} {
		r.Matters = append(r.Matters, Matter{ID: uuid.New(), OpenedAt: hour(at), OpenedTaken: hour(at), ClosedAt: hour(at + 1 + float64(i)), Lines: []MatterLine{{Firing: Firing{Panel: Location, Rule: "r"}}}})
	}
	_, course := r.Fold()
	if want := []OwnerReason{NoLimits, TooFew, NotCapable, MatterOpen, Settling, NotCapable, MatterOpen, Settling, NotCapable}; !slices.Equal(said(course), want) {
		t.Fatalf("course %v", said(course))
	}
	found := Finding{Reason: NotCapable, Since: course[2].Since}
	for i, o := range course[2:] {
		found.Between = (i + 2) / 3 // how often the station had it since
		if o.Owner == Engineering && o.Between != found.Between {
			t.Errorf("%d: %d times at the station in between, want %d", i, o.Between, found.Between)
		}
		if found.Between = i / 3; o.Owner == AtStation && o.Finding != found || o.Owner == Engineering && (!o.Since.Equal(found.Since) || o.Finding != Finding{}) {
			t.Errorf("%d: %+v, the finding is since %s", i, o, found.Since)
		}
	}
	for name, change := range map[string]func(*OwnerRecord){
		"new limits": func(r *OwnerRecord) {
			r.Course = r.Course.With(Boundary{At: hour(40.5), Kind: ByRevision, Revision: uuid.New()})
		},
		"another specification": func(r *OwnerRecord) {
			r.Setups = append(r.Setups, Setup{Version: 2, MadeAt: hour(40.5), Lower: spec(-20), Upper: spec(20)})
		},
	} {
		r := r
		r.Matters = r.Matters[:1]
		change(&r)
		for _, at := range []float64{40.7, 41} { // open, and closed a moment ago
			r.Until = hour(at)
			if standing, _ := r.Fold(); standing.Last.Owner != AtStation && standing.Last.Reason != TooFew || standing.Last.Finding != (Finding{}) {
				t.Errorf("%s: at %v %+v", name, at, standing.Last)
			}
		}
		r.Until = hour(1000)
		if standing, _ := r.Fold(); standing.Last.Owner != Engineering || !standing.Last.Since.After(hour(40)) {
			t.Errorf("%s: in the end %+v", name, standing.Last)
		}
	}
}

// TestSubgroupsBetweenASignalAndItsFixAreNoPartOfTheFigure: the fix came before the
// closing, and what was taken between the two is the mended process.
func TestSubgroupsBetweenASignalAndItsFixAreNoPartOfTheFigure(t *testing.T) {
	t.Parallel()
	subgroups := hourly(80, 6)
	for i := 39; i < 41; i++ { // hours 40 and 41, far off
		subgroups[i].Stats = Summarise([]int64{90, 91, 92, 93, 94}, 3)
	}
	r := recordOf(subgroups)
	r.Matters = []Matter{{OpenedAt: hour(40), OpenedTaken: hour(40), RestartAt: hour(41.5), ClosedAt: hour(50), Lines: []MatterLine{{Firing: Firing{Panel: Location}}}}}
	clean := recordOf(slices.Concat(hourly(39, 6), hourly(80, 6)[41:]))
	got, _ := r.Fold()
	want, _ := clean.Fold()
	if got.Figure != want.Figure || got.Figure.Subgroups != 78 {
		t.Errorf("figure %+v, want %+v of 78 subgroups", got.Figure, want.Figure)
	}
}

// TestOwnershipIsOneAndItsOrderMakesNoDifference draws records at random: at every
// instant there is exactly one known owner for one known reason that belongs to it, the
// course has no gaps, and the record gives the same whatever order its parts are kept in.
// A record that is cut tells the same of the time that it can tell.
func TestOwnershipIsOneAndItsOrderMakesNoDifference(t *testing.T) {
	t.Parallel()
	owns := map[OwnerReason]Owner{MatterOpen: AtStation, Settling: AtStation, NoLimits: Engineering, TooFew: Engineering, NoSpread: Engineering,
		NotCapable: Engineering, AcceptanceEnded: Engineering, NoSpecification: Nobody, IsCapable: Nobody, IsAccepted: Nobody}
	if len(owns) != len(OwnerReasons) {
		t.Fatal("a reason is missing here")
	}
	for seed := range uint64(60) {
		rng := rand.New(rand.NewPCG(seed, 7))
		r := recordOf(hourly(40+rng.IntN(100), 4+rng.Int64N(12)))
		r.Until = hour(float64(150 + rng.IntN(100)))
		for at := 20.0; rng.IntN(4) > 0; {
			m := Matter{ID: uuid.New(), OpenedAt: hour(at), OpenedTaken: hour(at), Lines: []MatterLine{{Firing: Firing{Panel: []Panel{Location, Reading, Dispersion}[rng.IntN(3)]}, Withdrawn: rng.IntN(4) == 0}}}
			if at += 1 + 20*rng.Float64(); rng.IntN(8) > 0 {
				m.ClosedAt = hour(at)
			}
			r.Matters = append(r.Matters, m)
			if m.Open() {
				break
			}
			at += 30 * rng.Float64()
		}
		for range rng.IntN(3) {
			kind := []BoundaryKind{ByRevision, BySetup, ByRestart, ByChangeover}[rng.IntN(4)]
			r.Course = r.Course.With(Boundary{At: hour(10 + 120*rng.Float64()), Kind: kind, Revision: uuid.New()})
		}
		if rng.IntN(2) == 0 {
			at := 10 + 100*rng.Float64()
			r.Acceptances = []Acceptance{{ID: uuid.New(), AcceptedAt: hour(at), Until: hour(at + 50*rng.Float64() + 1), Lower: spec(-30), Upper: spec(30)}}
		}
		standing, course := r.Fold()
		for i, o := range course {
			if owns[o.Reason] != o.Owner {
				t.Fatalf("seed %d: %s owns because of %q", seed, o.Owner, o.Reason)
			}
			if i > 0 && (!course[i-1].For.Before(o.For) || course[i-1].Reason == o.Reason || o.Since.After(o.For)) {
				t.Fatalf("seed %d: %+v after %+v", seed, o, course[i-1])
			}
		}
		mixed := r
		mixed.Matters, mixed.Acceptances = slices.Clone(r.Matters), slices.Clone(r.Acceptances)
		rng.Shuffle(len(mixed.Matters), func(i, j int) { mixed.Matters[i], mixed.Matters[j] = mixed.Matters[j], mixed.Matters[i] })
		slices.Reverse(mixed.Acceptances)
		if again, c := mixed.Fold(); again != standing || !slices.Equal(c, course) {
			t.Fatalf("seed %d: kept in another order it gives %+v, want %+v", seed, again.Last, standing.Last)
		}
		// The state of the moment says what the fold says.
		setup := r.setupAt(r.Until)
		segment, _ := r.Course.inForce(r.Until)
		c := CharacteristicState{Setup: setup, ReadAt: r.Until, Rules: DefaultSettings().Owner, Standing: standing}
		if segment.Revision != uuid.Nil {
			c.Revision = &Revision{ID: segment.Revision}
		}
		for i, m := range r.Matters {
			if !m.OpenedAt.After(r.Until) && (m.Open() || m.ClosedAt.After(r.Until)) {
				c.Matter = &r.Matters[i]
			}
		}
		if len(r.Acceptances) > 0 {
			c.Acceptance = r.Acceptances[0]
		}
		if got := c.Ownership(); got != standing.Last {
			t.Fatalf("seed %d: now %+v, the fold says %+v", seed, got, standing.Last)
		}
	}
}

// TestALongRecordIsToldFromItsNewestPart: a record that was cut begins where its figure
// can be computed, and says that it does.
func TestALongRecordIsToldFromItsNewestPart(t *testing.T) {
	t.Parallel()
	all := recordOf(hourly(OwnerReach+200, 6))
	all.Until = hour(5000)
	cut := all
	cut.Cut, cut.Subgroups = true, all.Subgroups[75:]
	cut.Course = Course{Before: Segment{From: hour(0.5), Revision: all.Course.Boundaries[0].Revision}}
	whole, _ := all.Fold()
	part, course := cut.Fold()
	if part.Figure != whole.Figure || part.Quiet != whole.Quiet || part.Last.Reason != whole.Last.Reason {
		t.Errorf("from a part: %+v, want %+v", part, whole)
	}
	if len(course) != 1 || !course[0].AtLeast || !course[0].Since.Equal(all.Subgroups[200].TakenAt) {
		t.Errorf("course %+v", course)
	}
}

func TestUnknownKeepsItsOwner(t *testing.T) {
	t.Parallel()
	c := CharacteristicState{Revision: &Revision{}, Rules: DefaultSettings().Owner, Setup: Setup{Upper: spec(30)},
		Standing: Standing{Quiet: 25, Figure: Figure{Readings: 125, Subgroups: 25, Grade: BelowAll}}}
	before := c.Ownership()
	c.Due.State = TooLate
	after := c.Ownership()
	if before.Owner != Engineering || before.Unknown || after.Owner != before.Owner || after.Reason != before.Reason || !after.Unknown {
		t.Errorf("known %+v, long overdue %+v", before, after)
	}
	if !c.WantsProtection() {
		t.Error("nobody asks how the product is protected")
	}
	c.Protections = []Protection{{}}
	if c.WantsProtection() {
		t.Error("it is protected, and asked for all the same")
	}
}

func BenchmarkOwnerFold(b *testing.B) {
	r := recordOf(hourly(OwnerReach+125, 9))
	r.Until = hour(5000)
	r.Cut = true
	r.Course = Course{Before: Segment{Revision: uuid.New()}}
	for b.Loop() {
		r.Fold()
	}
}
