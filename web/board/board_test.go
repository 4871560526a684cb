package board

import (
	"net/url"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
	"holdfast/web/words"
	"holdfast/web/words/wordstest"
)

func cardOf(t *testing.T, s []plant.StationState, station string) cardView {
	t.Helper()
	for i := range s {
		if s[i].Name == station {
			return newCard(format(), &s[i])
		}
	}
	t.Fatalf("no station %s", station)
	return cardView{}
}

func TestCardSaysStateAgeNextAndOwner(t *testing.T) {
	t.Parallel()
	s := twelve()
	for _, tc := range []struct {
		station, tone, word, age, next, owner string
	}{
		{"Turning 1", "look", "Look", "12 min", "next 12:42", "owner: station, 12 min"},
		{"Turning 2", "calm", "Leave", "3 d", "next 12:42", "owner: nobody, 12 min"},
		{"Straightening", "due", "Due", "late 9 min", "station: due 12:15", "owner: nobody"},
		{"Drilling 1", "learning", "Learning", "", "next 12:42", "owner: engineering"},
		{"Drilling 2", "stopped", "Stopped", "36 min", "paused", "owner: nobody, 12 min"},
		{"Press", "hold", "Hold", "26 min", "next 12:42", "owner: station, 26 min"},
		{"Greasing", "unknown", "Unknown", "late 3 h", "station: due 09:24", "owner: nobody"},
		{"Final test", "asked", "Due", "2 min", "station: due 12:22", "owner: nobody"},
	} {
		c := cardOf(t, s, tc.station)
		got := []string{c.Front.Tone, c.Front.Word, c.Front.Age, c.Next, c.Owner}
		if want := []string{tc.tone, tc.word, tc.age, tc.next, tc.owner}; !slices.Equal(got, want) {
			t.Errorf("%s: %q, want %q", tc.station, got, want)
		}
	}
	if c := cardOf(t, s, "Drilling 1"); !c.Strong {
		t.Error("engineering as the owner is not set in bold")
	}
}

func TestOpenMatterDoesNotHideALateRound(t *testing.T) {
	t.Parallel()
	s := floor([]string{"Press"})
	c := &s[0].Characteristics[0]
	open(c, 26*time.Minute, beyond)
	late(c, 9*time.Minute, plant.Late)
	if got := cardOf(t, s, "Press"); got.Front.Word != "Look" || got.Next != "due 12:15, late 9 min" {
		t.Errorf("the card says %q, %q", got.Front.Word, got.Next)
	}
	list := newNeeds(format(), s).List
	if len(list) != 2 || !strings.HasPrefix(list[0].Why, "Look, ") || list[1].Why != "Due, Axle seat: round of 12:15 not taken." {
		t.Errorf("needs: %+v", list)
	}
}

// Whatever is not calm stands on the card with its name, however much is measured.
func TestCardHidesNoStateThatAsksForSomebody(t *testing.T) {
	t.Parallel()
	st := floor([]string{"Press"})[0]
	for i, name := range []string{"Bore", "Length", "Width", "Depth", "Angle", "Weight", "Gloss"} {
		c := quiet(st.Station, name, "mm", 2, 500)
		switch i {
		case 3:
			late(&c, 9*time.Minute, plant.Late)
		case 4:
			open(&c, 20*time.Minute, outside)
		case 5:
			learning(&c, 3)
		case 6:
			stopped(&c, time.Hour)
		}
		st.Characteristics = append(st.Characteristics, c)
	}
	card := newCard(format(), &st)
	if card.Front.Name != "Angle" {
		t.Errorf("%s stands in front, want the gravest", card.Front.Name)
	}
	var names []string
	for _, m := range card.Others {
		names = append(names, m.Word+" "+m.Name)
	}
	for _, want := range []string{"Due Depth", "Learning Weight", "Stopped Gloss"} {
		if !slices.Contains(names, want) {
			t.Errorf("%q is missing among %q", want, names)
		}
	}
	if names[0] != "Due Depth" {
		t.Errorf("%q comes first, want the gravest", names[0])
	}
	if shown := 1 + len(card.Others); card.Calm != format().Words.T("board.more-calm", len(st.Characteristics)-shown) {
		t.Errorf("%d are shown of %d, and the rest is said as %q", shown, len(st.Characteristics), card.Calm)
	}
	for _, o := range []string{"station", "engineering"} {
		if !slices.Contains(strings.Fields(card.Owners), o) {
			t.Errorf("%s has something to do, and the owners are %q", o, card.Owners)
		}
	}
}

func TestOfTwoAlikeTheOlderStandsInFront(t *testing.T) {
	t.Parallel()
	st := floor([]string{"Press"})[0]
	second := quiet(st.Station, "Bore", "mm", 2, 500)
	open(&st.Characteristics[0], 5*time.Minute, beyond)
	open(&second, 50*time.Minute, beyond)
	st.Characteristics = append(st.Characteristics, second)
	if got := newCard(format(), &st).Front.Name; got != "Bore" {
		t.Errorf("%s stands in front", got)
	}
}

func TestCardWithoutSamplesAndWithoutCharacteristics(t *testing.T) {
	t.Parallel()
	st := floor([]string{"Press"})[0]
	learning(&st.Characteristics[0], 0)
	if c := newCard(format(), &st); c.Spark != "" || c.Value != "" || !c.Measured {
		t.Errorf("a card without samples: %+v", c)
	}
	st.Characteristics = nil
	if c := newCard(format(), &st); c.Measured || c.Front.Word != "" {
		t.Errorf("a card with nothing measured: %+v", c)
	}
}

func TestSparkRingsTheOpenMatterOnly(t *testing.T) {
	t.Parallel()
	st := floor([]string{"Press"})[0]
	c := &st.Characteristics[0]
	open(c, time.Minute, outside, beyond)
	earlier := &c.Points[20]
	earlier.Signals = []plant.Signal{{Firing: beyond, Matter: c.Matter.ID}}
	c.Points[10].Signals = []plant.Signal{{Firing: beyond, Matter: uuid.New()}}
	svg := newCard(format(), &st).Spark
	if got := strings.Count(svg, `class="ring-hold"`); got != 1 {
		t.Errorf("%d octagons", got)
	}
	if got := strings.Count(svg, `class="ring"`); got != 0 {
		t.Errorf("%d diamonds beside the octagon on one subgroup", got)
	}
	newest := &c.Points[24]
	newest.Signals = slices.DeleteFunc(newest.Signals, func(s plant.Signal) bool { return s.Panel == plant.Location })
	svg = newCard(format(), &st).Spark
	if got := strings.Count(svg, `class="ring"`); got != 1 {
		t.Errorf("%d diamonds, want the newest signal of the open matter", got)
	}
	c.Matter = nil
	if svg = newCard(format(), &st).Spark; strings.Contains(svg, "ring") {
		t.Error("a closed signal is ringed on the board")
	}
}

// TestNoHoldStandsBehindWhatIsTaken: the wall cannot scroll, so what nobody is at comes first,
// and of that product in doubt, also when it is kept quiet.
func TestNoHoldStandsBehindWhatIsTaken(t *testing.T) {
	t.Parallel()
	states := floor([]string{"Taken Hold", "Late", "Quiet Hold", "Old Look", "New Look", "Hold", "Called Look"})
	at := func(i int) *plant.CharacteristicState { return &states[i].Characteristics[0] }
	m := open(at(0), 9*time.Hour, outside)
	m.TakenByName, m.TakenAt = "Operator 1", before(time.Hour)
	late(at(1), 40*time.Minute, plant.Late)
	m = open(at(2), 30*time.Minute, outside)
	at(2).Escalation.Quiet = plant.Quiet{Matter: m.ID, Kind: plant.Hold, At: before(time.Minute), Until: noon.Add(time.Hour), PersonName: "Supervisor 1", Reason: "known"}
	open(at(3), 8*time.Hour, beyond)
	open(at(4), time.Hour, beyond)
	open(at(5), 20*time.Minute, outside)
	open(at(6), 10*time.Minute, beyond)
	at(6).Escalation.Fired = []plant.FiredStep{{Step: plant.OnBoard, At: before(time.Minute)}}
	var got []string
	for _, n := range newNeeds(format(), states).List {
		got = append(got, n.Station)
	}
	if want := []string{"Called Look", "Hold", "Quiet Hold", "Old Look", "New Look", "Late", "Taken Hold"}; !slices.Equal(got, want) {
		t.Errorf("%q, want %q", got, want)
	}
}

// TestAHoldIsAsOldAsTheHold: a matter that was opened for a look is a Hold from the first
// reading outside, and says beside it since when it is open.
func TestAHoldIsAsOldAsTheHold(t *testing.T) {
	t.Parallel()
	states := floor([]string{"Press"})
	c := &states[0].Characteristics[0]
	m := open(c, 46*time.Minute, beyond, outside)
	m.Lines[1].First = before(16 * time.Minute)
	n := newNeeds(format(), states).List[0]
	if card := newCard(format(), &states[0]); n.Age != "16 min" || n.Opened != "Open since 11:38." || card.Front.Age != "16 min" {
		t.Errorf("%s, %q, on the card %s", n.Age, n.Opened, card.Front.Age)
	}
	h := newHandoverMatter(format(), plant.MatterOfShift{Matter: *m, Setup: c.Setup}, noon)
	if h.Age != "16 min" || h.Opened != "12:08" || h.Before != "Open since 11:38." {
		t.Errorf("handover: %s, %s, %q", h.Age, h.Opened, h.Before)
	}
	m.Lines[1].Withdrawn = true
	if n := newNeeds(format(), states).List[0]; n.Age != "46 min" || n.Opened != "" {
		t.Errorf("a Look again: %s, %q", n.Age, n.Opened)
	}
}

// TestAnOverdueGaugeCheckNeedsAPerson: once on a line, after what is about the process and
// the product, however long it has been due.
func TestAnOverdueGaugeCheckNeedsAPerson(t *testing.T) {
	t.Parallel()
	states := twelve()
	g := &plant.GaugeNow{Gauge: plant.Gauge{ID: named("gauge"), Name: "Micrometer M-04", NextCheck: noon.AddDate(0, 0, -3)}}
	for i := range states[:2] {
		states[i].LineID = states[0].LineID
		states[i].Characteristics[0].Gauge = g
	}
	before := newNeeds(format(), twelve())
	v := newNeeds(format(), states)
	last := v.List[slices.IndexFunc(v.List, func(n needView) bool { return n.Taken != "" })] // what is taken follows
	if len(v.List) != len(before.List)+1 || !strings.HasPrefix(last.Why, "Gauge check overdue: Micrometer M-04, due ") || !strings.HasPrefix(last.Taken, "Measures ") || last.Age != "2 d" {
		t.Errorf("%d needs, the last %+v", len(v.List), last)
	}
	failed := *g
	failed.FailedSince = noon
	for i := range states[:2] {
		states[i].Characteristics[0].Gauge = &failed
	}
	if v := newNeeds(format(), states); len(v.List) != len(before.List) {
		t.Errorf("a gauge that failed has its matters, and %d needs", len(v.List))
	}
}

func TestNeedsAreGravestFirstInWords(t *testing.T) {
	t.Parallel()
	v := newNeeds(format(), twelve())
	var got []string
	for _, n := range v.List {
		got = append(got, n.Age+" | "+n.Station+" | "+n.Why+" | "+n.Taken)
	}
	want := []string{
		"19 min | Sound check | Look, Noise: beyond 3 sigma, high side. | ",
		"3 h | Greasing | Unknown, Fill height: no sample since 08:54, the round of 09:24 was not taken. | ",
		"9 min | Straightening | Due, Run-out: round of 12:15 not taken. | ",
		"26 min | Press | Hold, Press force: outside specification, above the upper limit, at 6.91\u00a0kN (limit 6.80). | Supervisor 1 took it 12:01",
		"12 min | Turning 1 | Look, Axle seat: beyond 3 sigma, high side. | Operator 1 took it 12:14",
	}
	if !slices.Equal(got, want) {
		t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	if v.Order != "5, gravest first" || v.Density != "several" {
		t.Errorf("%q, %q", v.Order, v.Density)
	}
	if len(v.Engineering) != 1 || v.Engineering[0].Progress != "no limits yet, 12 of 20 subgroups" {
		t.Errorf("engineering: %+v", v.Engineering)
	}
}

func TestWhatWasDueTogetherIsOneRound(t *testing.T) {
	t.Parallel()
	st := floor([]string{"Press"})[0]
	second, third := quiet(st.Station, "Bore", "mm", 2, 500), quiet(st.Station, "Length", "mm", 2, 900)
	late(&st.Characteristics[0], 9*time.Minute, plant.Late)
	late(&second, 9*time.Minute, plant.Late)
	late(&third, 2*time.Hour, plant.TooLate)
	st.Characteristics = append(st.Characteristics, second, third)
	list := newNeeds(format(), []plant.StationState{st}).List
	if len(list) != 2 || list[1].Why != "Due, Axle seat, Bore: round of 12:15 not taken." {
		t.Errorf("needs: %+v", list)
	}
}

func TestWhyOfAMatter(t *testing.T) {
	t.Parallel()
	spread := plant.Firing{Panel: plant.Dispersion, Rule: plant.RuleKey(watch.Rule{Kind: watch.Beyond, Z: 3}), Side: plant.High}
	run := plant.Firing{Panel: plant.Location, Rule: plant.RuleKey(watch.Rule{Kind: watch.OneSide, M: 8}), Side: plant.Low}
	for _, tc := range []struct {
		name    string
		firings []plant.Firing
		change  func(*plant.CharacteristicState)
		want    string
	}{
		{"two rules", []plant.Firing{beyond, run}, nil, "beyond 3 sigma, high side; 8 on the low side"},
		{"many rules", []plant.Firing{beyond, run, spread}, nil, "beyond 3 sigma, high side; 8 on the low side; and 1 more"},
		{"the gravest first", []plant.Firing{beyond, outside}, nil, "outside specification, above the upper limit, at 15.011\u00a0mm (limit 15.000); beyond 3 sigma, high side"},
		{"withdrawn lines are not said", []plant.Firing{beyond, spread}, func(c *plant.CharacteristicState) { c.Matter.Lines[0].Withdrawn = true }, "spread: beyond 3 sigma, high side"},
		{"nothing stands", []plant.Firing{beyond}, func(c *plant.CharacteristicState) { c.Matter.Lines[0].Withdrawn = true }, "the signal no longer holds after a correction; it waits to be closed"},
		{"the reading is older than the points", []plant.Firing{outside}, func(c *plant.CharacteristicState) { c.Points = c.Points[:10] }, "outside specification, above the upper limit"},
		{"a better spread", []plant.Firing{{Panel: plant.Dispersion, Rule: spread.Rule, Side: plant.Low}}, nil, "spread: beyond 3 sigma, low side, a change for the better"},
	} {
		st := floor([]string{"Press"})[0]
		c := &st.Characteristics[0]
		open(c, time.Minute, tc.firings...)
		if tc.change != nil {
			tc.change(c)
		}
		if got := why(format(), c); got != tc.want {
			t.Errorf("%s: %q, want %q", tc.name, got, tc.want)
		}
	}
}

func TestNobodyIsNeededOnAQuietFloor(t *testing.T) {
	t.Parallel()
	v := newNeeds(format(), floor([]string{"Press", "Greasing"}))
	if len(v.List) != 0 || v.None == "" || v.Order != "" {
		t.Errorf("%+v", v)
	}
}

func TestEngineeringFoldsALongList(t *testing.T) {
	t.Parallel()
	s := floor([]string{"A", "B", "C", "D", "E", "F"})
	for i := range s {
		learning(&s[i].Characteristics[0], 20+i)
	}
	v := newNeeds(format(), s)
	if len(v.Engineering) != 3 || len(v.More) != 3 || v.MoreText != "3 more" {
		t.Errorf("%d and %d, %q", len(v.Engineering), len(v.More), v.MoreText)
	}
	if got := v.Engineering[0].Progress; got != "no limits yet, 20 subgroups are there to study" {
		t.Error(got)
	}
}

func TestShiftCountsWhatTheStatesHold(t *testing.T) {
	t.Parallel()
	s := twelve()
	n := countAll(kestrelRow, s, noon)
	want := counts{due: 1, late: 2, hold: 1, look: 2, opened: 3, unknown: 1, learning: 1, stopped: 1, next: noon.Add(18 * time.Minute), nextAt: "Turning 1"}
	if n != want {
		t.Errorf("%+v, want %+v", n, want)
	}
	characteristic(t, s, "Press", 0).Matter.OpenedAt = before(7 * time.Hour) // before 06:00
	if n := countAll(kestrelRow, s, noon); n.opened != 2 {
		t.Errorf("%d from this shift", n.opened)
	}
	if v := newShift(format(), kestrelRow, nil); len(v.Facts) != 0 || v.Next != "" {
		t.Errorf("an empty plant has a shift of %+v", v)
	}
}

// TestTheAlarmLoadMarksMidnight: the hours of two days stand under their days.
func TestTheAlarmLoadMarksMidnight(t *testing.T) {
	t.Parallel()
	v := newLoad(format(), twelve())
	if want := []loadDay{{"11 Mar", 11}, {"12 Mar", 13}}; !slices.Equal(v.Days, want) {
		t.Errorf("%+v, want %+v", v.Days, want)
	}
	for i, hour := range v.Hours {
		if v.begins(i) != (hour == "0") {
			t.Errorf("column %d, hour %s, begins a day: %v", i, hour, v.begins(i))
		}
	}
}

func TestHeadNamesTheShift(t *testing.T) {
	t.Parallel()
	if h := newHead(format(), kestrelRow); h.Day != "Thursday 12 March, early shift" || h.Time != "12:24" {
		t.Errorf("%+v", h)
	}
	if h := newHead(format(), plant.Plant{Location: time.UTC}); h.Day != "Thursday 12 March" {
		t.Errorf("without shifts: %+v", h)
	}
}

func TestLanesKeepTheOrderOfTheFloor(t *testing.T) {
	t.Parallel()
	s := twelve()
	slices.Reverse(s)
	lanes := sortLanes(s)
	if len(lanes) != 3 || lanes[0].line.Name != "Axles" || lanes[2].stations[3].Name != "Sound check" {
		t.Errorf("%v", lanes)
	}
	if orderOf(lanes) != orderOf(sortLanes(twelve())) {
		t.Error("the mark of the lanes depends on the order in which they were read")
	}
	if orderOf(lanes) == orderOf(sortLanes(twelve()[:11])) {
		t.Error("a station that went leaves the mark as it was")
	}
}

func TestPagesHoldWhatCanBeReadFromAfar(t *testing.T) {
	t.Parallel()
	if got := pagesOf(sortLanes(twelve())); got != nil {
		t.Errorf("three lanes are split: %v", got)
	}
	if got := pagesOf(sortLanes(sixty())); !slices.Equal(got, [][2]int{{0, 4}, {4, 8}}) {
		t.Errorf("eight lanes: %v", got)
	}
	long := make([]string, 70) // one lane of nine rows
	for i := range long {
		long[i] = string(rune('A'+i/26)) + string(rune('A'+i%26))
	}
	if got := pagesOf(sortLanes(floor(long, []string{"X"}, []string{"Y"}))); !slices.Equal(got, [][2]int{{0, 1}, {1, 3}}) {
		t.Errorf("a long lane and two short ones: %v", got)
	}
}

func TestChoice(t *testing.T) {
	t.Parallel()
	s := sixty()
	line := s[20].LineID
	query := func(q string) url.Values { v, _ := url.ParseQuery(q); return v }
	for _, tc := range []struct {
		query string
		want  choice
	}{
		{"", choice{}},
		{"line=" + line.String(), choice{Line: line}},
		{"line=" + line.String() + "&lanes=2", choice{Line: line}},
		{"owner=engineering&lanes=2", choice{Owner: plant.Engineering, Page: 2}},
		{"owner=boss&lanes=99&line=" + uuid.NewString(), choice{}},
		{"lanes=0&line=x", choice{}},
	} {
		got := readChoice(query(tc.query), s)
		if got != tc.want {
			t.Errorf("%q: %+v, want %+v", tc.query, got, tc.want)
		}
		u, err := url.Parse(got.address())
		if err != nil || readChoice(u.Query(), s) != got {
			t.Errorf("%q: its address %s does not lead back", tc.query, got.address())
		}
	}
	v := newPage(format(), kestrelRow, s, choice{Page: 2})
	if len(v.Lanes) != 4 || v.Lanes[0].Name != "Spokes" || v.Chosen != "Show: Lanes 5 to 8" {
		t.Errorf("the second page has %d lanes from %s: %s", len(v.Lanes), v.Lanes[0].Name, v.Chosen)
	}
	v = newPage(format(), kestrelRow, s, choice{Line: line, Owner: plant.AtStation})
	if len(v.Lanes) != 1 || v.Chosen != "Show: "+v.Lanes[0].Name+", station" {
		t.Errorf("one line: %d lanes, %s", len(v.Lanes), v.Chosen)
	}
	for _, m := range v.Menus {
		current := 0
		for _, l := range m.Links {
			if l.Current {
				current++
			}
		}
		if current > 1 {
			t.Errorf("%s has %d current links", m.Name, current)
		}
	}
	if v = newPage(format(), kestrelRow, twelve(), choice{Owner: plant.Engineering}); v.Nothing {
		t.Error("a board with something for engineering says that there is nothing")
	}
	if v = newPage(format(), kestrelRow, floor([]string{"Press"}), choice{Owner: plant.Engineering}); !v.Nothing {
		t.Error("nothing matches, and it is not said")
	}
}

// The pseudo-locale shows words that bypass the catalogue.
func TestEveryWordComesFromTheCatalogue(t *testing.T) {
	t.Parallel()
	wordstest.Register(t)
	f := format()
	f.Words = words.For(wordstest.Lang)
	fragments, err := Fragments(f, kestrelRow, twelve())
	if err != nil {
		t.Fatal(err)
	}
	for _, frag := range fragments {
		text := string(frag.HTML)
		for _, english := range []string{"Nobody", "owner:", "Look", "Hold", "next 12", "took it", "sigma", "Rounds", "subgroups"} {
			if strings.Contains(text, english) {
				t.Errorf("%s says %q past the catalogue", frag.ID, english)
			}
		}
	}
}
