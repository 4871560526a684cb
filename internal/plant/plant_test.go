package plant_test

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"
	"gonum.org/v1/gonum/stat"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// TestStatisticsAgainstALibrary compares with gonum, a general-purpose reference.
func TestStatisticsAgainstALibrary(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(1, 1))
	for range 500 {
		n, decimals := 1+rng.IntN(25), rng.IntN(plant.MaxDecimals+1)
		base := rng.Int64N(1_000_000_000)
		readings, floats := make([]int64, n), make([]float64, n)
		for i := range readings {
			readings[i] = base + rng.Int64N(100)
			floats[i] = float64(readings[i]) / math.Pow10(decimals)
		}
		s := plant.Summarise(readings, decimals)
		if mean := stat.Mean(floats, nil); math.Abs(s.Mean()-mean) > 1e-12*math.Abs(mean) {
			t.Fatalf("mean %v, want %v", s.Mean(), mean)
		}
		if n > 1 {
			// The library's figure loses digits to the large common part, ours does not.
			if sd := stat.StdDev(floats, nil); math.Abs(s.SD-sd) > 1e-6*sd {
				t.Fatalf("sd %v, want %v", s.SD, sd)
			}
		}
	}
	if s := plant.Summarise([]int64{5, 5, 5}, 2); s.SD != 0 || s.Range != 0 || s.Sum != 15 {
		t.Errorf("no spread = %+v", s)
	}
}

// TestExactlyOnTheLine: a mean that is on a limit is not beyond it, whatever the floats
// of its readings are.
func TestExactlyOnTheLine(t *testing.T) {
	t.Parallel()
	judge, err := watch.NewJudge(watch.Standard{
		Standard: limits.Standard{Chart: limits.XBarR, Center: 0.3, Sigma: math.Sqrt(5) / 30, Multiple: 3}, LocationRules: []watch.Rule{{Kind: watch.Beyond, Z: 3}},
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, tc := range []struct {
		readings []int64
		fires    bool
	}{{[]int64{4, 4, 4, 4, 4}, false}, {[]int64{3, 4, 5, 4, 4}, false}, {[]int64{4, 4, 4, 4, 5}, true}, {[]int64{2, 2, 2, 2, 2}, false}} {
		var f plant.FoldState
		j, judged := f.Step(plant.Segment{}, judge, plant.Summarise(tc.readings, 1))
		if !judged || j.Location.Fired.Any() != tc.fires {
			t.Errorf("%v: fires %v, want %v (z %v)", tc.readings, j.Location.Fired.Any(), tc.fires, j.Location.Z)
		}
	}
}

func TestBoundariesStartAfresh(t *testing.T) {
	t.Parallel()
	r1, r2 := uuid.New(), uuid.New()
	c := plant.Course{}
	c = c.With(plant.Boundary{At: at(10), Kind: plant.ByRevision, Revision: r1})
	c = c.With(plant.Boundary{At: at(30), Kind: plant.ByRevision, Revision: r2})
	c = c.With(plant.Boundary{At: at(20), Kind: plant.ByRestart})
	c = c.With(plant.Boundary{At: at(40), Kind: plant.BySetup})
	c = c.With(plant.Boundary{At: at(50), Kind: plant.ByChangeover})
	for minutes, want := range map[float64]plant.Segment{
		0: {}, 10: {From: at(10), Revision: r1}, 19.9: {From: at(10), Revision: r1}, 20: {From: at(20), Revision: r1},
		30: {From: at(30), Revision: r2}, 45: {From: at(40)}, 60: {From: at(50)},
	} {
		if got := c.At(at(minutes)); !got.Same(want) {
			t.Errorf("at minute %v: %+v, want %+v", minutes, got, want)
		}
	}
}

func TestDecide(t *testing.T) {
	t.Parallel()
	look, hold := []plant.Firing{{Panel: plant.Location, Rule: "{}", Side: plant.High}}, []plant.Firing{{Panel: plant.Reading, Rule: plant.OutsideSpecification, Side: plant.Low}}
	for _, tc := range []struct {
		name           string
		firings        []plant.Firing
		learning, open bool
		gravity        plant.Verdict
		want           plant.Verdict
		still          bool
	}{
		{"quiet", nil, false, false, "", plant.Leave, false},
		{"quiet while learning", nil, true, false, "", plant.Learning, false},
		{"a rule", look, false, false, "", plant.Look, false},
		{"outside specification while learning", hold, true, false, "", plant.Hold, false},
		{"quiet with a look open", nil, false, true, plant.Look, plant.Look, true},
		{"quiet with a hold open", nil, false, true, plant.Hold, plant.Hold, true},
		{"a rule with a hold open", look, false, true, plant.Hold, plant.Hold, false},
		{"outside with a look open", hold, false, true, plant.Look, plant.Hold, false},
	} {
		if v, still := plant.Decide(tc.firings, tc.learning, tc.open, tc.gravity); v != tc.want || still != tc.still {
			t.Errorf("%s: %s, still open %v; want %s, %v", tc.name, v, still, tc.want, tc.still)
		}
	}
}

func TestClosing(t *testing.T) {
	t.Parallel()
	line := func(panel plant.Panel, withdrawn bool) plant.MatterLine {
		return plant.MatterLine{Firing: plant.Firing{Panel: panel}, Withdrawn: withdrawn}
	}
	now := at(60)
	for _, tc := range []struct {
		name    string
		lines   []plant.MatterLine
		req     plant.ClosingRequest
		closing plant.Closing
		restart time.Time
		bad     bool
	}{
		{"a fix", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Cause: "c", Action: "a", FixedAt: at(30)}, plant.Fixed, at(30), false},
		{"a fix without its instant is now", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Cause: "c", Action: "a"}, plant.Fixed, now, false},
		{"nothing done restarts at the closing", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Cause: "c"}, plant.NothingDone, now, false},
		{"only hold and nothing done has no restart", []plant.MatterLine{line(plant.Reading, false)}, plant.ClosingRequest{Cause: "c"}, plant.NothingDone, time.Time{}, false},
		{"all withdrawn", []plant.MatterLine{line(plant.Location, true)}, plant.ClosingRequest{}, plant.WithdrawnBy, time.Time{}, false},
		{"no cause", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Action: "a"}, "", time.Time{}, true},
		{"a fix in the future", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Cause: "c", Action: "a", FixedAt: at(61)}, "", time.Time{}, true},
		{"a fix before the signal", []plant.MatterLine{line(plant.Location, false)}, plant.ClosingRequest{Cause: "c", Action: "a", FixedAt: at(-1)}, "", time.Time{}, true},
	} {
		m := plant.Matter{OpenedTaken: at(0), Lines: tc.lines}
		closing, restart, err := m.Resolve(tc.req, now)
		if (err != nil) != tc.bad || closing != tc.closing || !restart.Equal(tc.restart) {
			t.Errorf("%s: %q, restart %s, %v", tc.name, closing, restart, err)
		}
	}
}

func TestDigestTellsContentNotTravel(t *testing.T) {
	t.Parallel()
	r := plant.Round{ID: uuid.New(), Station: uuid.New(), TakenRaw: noon, Skew: time.Second, Person: uuid.New(), Entries: []plant.Entry{{Characteristic: uuid.New(), Readings: []int64{1, 2}}}}
	same := r
	same.Skew, same.Person, same.Source = time.Minute, uuid.New(), "api"
	if r.Digest() != same.Digest() {
		t.Error("the way it travelled changed the digest")
	}
	other := r
	other.Entries = []plant.Entry{{Characteristic: r.Entries[0].Characteristic, Readings: []int64{1, 3}}}
	if r.Digest() == other.Digest() {
		t.Error("another reading left the digest as it was")
	}
}

func TestRuleKeysReadBack(t *testing.T) {
	t.Parallel()
	for _, r := range watch.Nelson() {
		got, err := plant.ParseRuleKey(plant.RuleKey(r))
		if err != nil || got != r {
			t.Errorf("%v became %v, %v", r, got, err)
		}
	}
	b, _ := json.Marshal(plant.Rules{Location: watch.WesternElectric()})
	var back plant.Rules
	if err := json.Unmarshal(b, &back); err != nil || len(back.Location) != len(watch.WesternElectric()) {
		t.Errorf("rules became %v, %v", back, err)
	}
}

func TestWhoMayDoWhat(t *testing.T) {
	t.Parallel()
	may := func(a plant.Action, roles ...plant.Role) bool { return plant.Person{Active: true, Roles: roles}.May(a) }
	for _, tc := range []struct {
		a    plant.Action
		role plant.Role
		want bool
	}{
		{plant.TakeRounds, plant.Operator, true}, {plant.TakeRounds, plant.Supervisor, true}, {plant.TakeRounds, plant.Engineer, false}, {plant.TakeRounds, plant.Administrator, false},
		{plant.VoidRecords, plant.Operator, false}, {plant.VoidRecords, plant.Supervisor, true},
		{plant.SetLimits, plant.Engineer, true}, {plant.SetLimits, plant.Supervisor, false}, {plant.SetLimits, plant.Administrator, false},
		{plant.Manage, plant.Administrator, true}, {plant.Manage, plant.Engineer, false}, {plant.SeeBoard, plant.Administrator, false},
	} {
		if got := may(tc.a, tc.role); got != tc.want {
			t.Errorf("%s may do %d: %v, want %v", tc.role, tc.a, got, tc.want)
		}
	}
	if (plant.Person{Roles: plant.Roles{plant.Engineer}}).May(plant.SetLimits) {
		t.Error("somebody who is not active may do something")
	}
}

func TestCleanText(t *testing.T) {
	t.Parallel()
	for in, want := range map[string]string{"  a\tb\n": "a b", "e\u0301": "é", "a\x00b\x7f": "ab", "\xff": ""} {
		if got := plant.CleanText(in); got != want {
			t.Errorf("CleanText(%q) = %q, want %q", in, got, want)
		}
	}
}
