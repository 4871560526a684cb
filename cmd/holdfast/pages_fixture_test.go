package main

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store/storetest"
)

// works is a plant in which every page has something to show, with names that are as long
// as people give them.
type works struct {
	*running
	knob                 plant.Knob
	gauge                plant.Gauge
	long                 plant.Characteristic
	look, hold, quiet    plant.Matter
	lookRound, holdRound uuid.UUID
	description          string // address of a file that waits to be confirmed
}

func serveWorks(t testing.TB) *works {
	t.Helper()
	w := &works{running: serve(t)}
	for _, step := range []func(testing.TB){w.floor, w.past, w.rules, w.open, w.said, w.devicesAndPeople, w.messages, w.file} {
		step(t)
	}
	return w
}

func (w *works) ok(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// floor adds what the fixture lacks: a line of long names, a gauge, what can be turned.
func (w *works) floor(t testing.TB) {
	ctx := context.Background()
	line := plant.Line{ID: storetest.ID(), Name: "Straightening and inspection"}
	st := plant.Station{ID: storetest.ID(), LineID: line.ID, Name: "Straightening and run-out inspection 3", Family: "straightening"}
	m := plant.Machine{ID: storetest.ID(), StationID: st.ID, Name: "Three-roller straightening bench 12", PartsPerHour: 90}
	w.ok(t, w.AddLine(ctx, line, w.Engineer.ID))
	w.ok(t, w.AddStation(ctx, st, w.Engineer.ID))
	w.ok(t, w.AddMachine(ctx, m, w.Engineer.ID))
	w.gauge = plant.Gauge{ID: storetest.ID(), Name: "Dial indicator on the granite table 4", Resolution: storetest.Decimal(t, "0.001"), CheckDays: 7}
	w.ok(t, w.AddGauge(ctx, w.gauge, w.Engineer.ID))
	w.long = plant.Characteristic{ID: storetest.ID(), StationID: st.ID, MachineID: m.ID, Name: "Radial run-out at the bearing seat of the drive side"}
	w.ok(t, w.AddCharacteristic(ctx, w.long, plant.Setup{Unit: "mm", Decimals: 3, Target: storetest.Decimal(t, "0.020"), Lower: storetest.Decimal(t, "0.005"), Upper: storetest.Decimal(t, "0.035"),
		Chart: limits.Individuals, Size: 1, Plan: plant.SamplingPlan{EveryMinutes: 60, Events: []plant.Occasion{plant.ToolChange, plant.AfterAdjustment}}, GaugeID: w.gauge.ID}, w.Engineer.ID))
	var err error
	w.knob, err = w.SaveKnob(ctx, plant.Knob{ID: storetest.ID(), Machine: w.Machine.ID, Name: "Tool offset X of the finishing turret", Unit: "mm", Step: *storetest.Decimal(t, "0.001"),
		Reason: "Measured on ten parts at each of five settings", MadeBy: w.Engineer.ID,
		Moves: []plant.Gain{{Characteristic: w.Diameter.ID, PerUnit: *storetest.Decimal(t, "2")}}})
	w.ok(t, err)
	for _, m := range []plant.Machine{w.Machine, w.Second} {
		w.ok(t, w.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: m.ID, Running: true, Part: w.PartA.ID, Lot: "K-2026-0311", Person: w.Operator.ID}))
	}
}

// rules sets reaction plans, a retired cause and the settings of the plant.
func (w *works) rules(t testing.TB) {
	ctx := context.Background()
	steps := []plant.PlanStep{
		{Says: "Is the insert whole? Look at it under the lamp.", Kind: plant.StepYesNo, IfNot: "Change the insert, and write its number into the tool book."},
		{Says: "Measure the part again on the second gauge.", Kind: plant.StepValue, Unit: "mm", Lower: storetest.Decimal(t, "14.982"), Upper: storetest.Decimal(t, "15.000")},
		{Says: "Call the setter.", Kind: plant.StepDone},
	}
	for _, kind := range []plant.MatterKind{plant.MatterUp, plant.MatterReading, plant.MatterDispersion} {
		_, err := w.SavePlan(ctx, plant.ReactionPlan{Scope: plant.PlanScope{Family: "turning"}, Kind: kind, Steps: steps, Confirm: true, Verify: kind == plant.MatterReading, Person: w.Engineer.ID})
		w.ok(t, err)
	}
	_, err := w.SavePlan(ctx, plant.ReactionPlan{Scope: plant.PlanScope{Characteristic: w.long.ID}, Kind: plant.MatterGauge, Steps: steps[2:], Person: w.Engineer.ID})
	w.ok(t, err)
	cause := plant.Cause{ID: storetest.ID(), Name: "Coolant nozzle bent away from the cutting edge", Family: "turning"}
	w.ok(t, w.NewCause(ctx, cause, w.Engineer.ID))
	w.ok(t, w.RetireCause(ctx, cause.ID, true, w.Engineer.ID))
	now, err := w.Settings(ctx)
	w.ok(t, err)
	version := now.Version
	now.Escalation.LongestQuietMinutes += 60
	_, err = w.ChangeSettings(ctx, plant.SettingsChange{ID: storetest.ID(), Replaces: version, Settings: now, Reason: "Agreed with the customer at the yearly review", Person: w.Engineer.ID})
	w.ok(t, err)
}

// past is a calm history with limits, adjustments, a shift that was handed over, a matter
// that was closed and a correction.
func (w *works) past(t testing.TB) {
	ctx := context.Background()
	w.calm(t, 22)
	w.MustFreeze(t, w.Diameter)
	for i := range 24 {
		d := int64(i%5) - 2
		w.Clock.Advance(10 * time.Minute)
		w.MustRecord(t, w.Force, 610+d, 612, 609-d, 611, 612+d, 610)
		w.MustRecord(t, w.Length, 1000+d, 1001, 999-d)
		w.MustRecord(t, w.Mass, 120+2*d)
		w.MustRecord(t, w.long, 20+d)
		if i%6 == 5 {
			w.turn(t, int64(i%4)-1)
			w.MustRecord(t, w.Diameter, 14991+d, 14992, 14990-d, 14991, 14992)
		}
	}
	w.MustFreeze(t, w.Length)
	w.MustFreeze(t, w.Mass)
	w.MustFreeze(t, w.long)
	w.ok(t, w.WriteNote(ctx, plant.ShiftNote{ID: storetest.ID(), Line: w.Line.ID, Text: "Coolant concentration low on lathe 1, barrel ordered for Friday", WrittenByID: w.Operator.ID}))
	w.Clock.Advance(30 * time.Minute)
	w.MustRecord(t, w.Length, 1019, 1018, 1019)
	m := w.matterOf(t, w.Length)
	w.Clock.Advance(5 * time.Minute)
	w.ok(t, w.StateProduct(ctx, plant.ContainmentEntry{ID: storetest.ID(), Containment: m.ID, Step: plant.KeptAside, Quantity: 64, Place: "Red rack 3, second shelf", Tag: "R-17", Person: w.Operator.ID}))
	w.ok(t, w.StateProduct(ctx, plant.ContainmentEntry{ID: storetest.ID(), Containment: m.ID, Step: plant.Released, Quantity: 64, Note: "each measured on the second gauge", Person: w.Supervisor.ID}))
	causes, err := w.Causes(ctx, "turning")
	w.ok(t, err)
	w.ok(t, w.TakeMatter(ctx, m.ID, m.Version, w.Operator.ID))
	m = w.matterOf(t, w.Length)
	w.ok(t, w.CloseMatter(ctx, plant.ClosingRequest{Matter: m.ID, Version: m.Version, Cause: causes[0].Name, CauseID: causes[0].ID, Action: "Insert changed, offset set back", Person: w.Operator.ID}))
	w.ok(t, w.LogChange(ctx, plant.Change{ID: storetest.ID(), Station: w.Station.ID, Machine: w.Machine.ID, Kind: plant.ToolChanged, Note: "Insert grade B", HappenedAt: w.Clock.Now(), Person: w.Operator.ID}))
	w.ok(t, w.KeepRoot(ctx))
	p, err := w.Store.Plant(ctx)
	w.ok(t, err)
	w.Clock.Advance(8 * time.Hour)
	before := p.SpanAt(p.SpanAt(w.Clock.Now()).From.Add(-time.Minute))
	w.ok(t, w.ConfirmHandover(ctx, w.Line.ID, before, w.Supervisor.ID))
}

// turn adjusts the diameter although nothing asks for it.
func (w *works) turn(t testing.TB, steps int64) {
	t.Helper()
	if steps == 0 {
		steps = 3
	}
	turned := plant.Decimal{Units: steps, Decimals: 3}
	w.ok(t, w.LogChange(context.Background(), plant.Change{ID: storetest.ID(), Station: w.Station.ID, Machine: w.Machine.ID, Characteristic: w.Diameter.ID, Kind: plant.Adjustment,
		Knob: w.knob.ID, Turned: &turned, Note: "A little high since the break", HappenedAt: w.Clock.Now(), Person: w.Operator.ID}))
}

// open is what somebody has to act on now: a Look that was taken, a Hold that nobody took
// and one that is kept quiet.
func (w *works) open(t testing.TB) {
	ctx := context.Background()
	taken := w.Clock.Now()
	a := w.MustRecord(t, w.Diameter, 14990, 14991, 14992, 14989, 14993)
	w.Clock.Advance(time.Minute)
	if _, err := w.Correct(ctx, plant.Correction{Characteristic: w.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: taken, Replaces: 1,
		Readings: []int64{14990, 14991, 14992, 14989, 14992}, Reason: plant.CorrectionReasons[0], Person: w.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	w.Clock.Advance(30 * time.Minute)
	w.lookRound = w.MustRecord(t, w.Diameter, 14998, 14999, 14998, 14999, 14998).Round
	w.look = w.matterOf(t, w.Diameter)
	w.holdRound = w.MustRecord(t, w.Force, 610, 612, 691, 611, 609, 613).Round
	w.hold = w.matterOf(t, w.Force)
	w.MustRecord(t, w.Mass, 151)
	w.quiet = w.matterOf(t, w.Mass)
	w.Clock.Advance(4 * time.Minute)
	w.ok(t, w.QuietMatter(ctx, plant.QuietRequest{ID: storetest.ID(), Matter: w.quiet.ID, Version: w.quiet.Version, Until: w.Clock.Now().Add(5 * time.Hour).Truncate(30 * time.Minute),
		Reason: "Heater fuse changed, the dispenser comes up to temperature until the evening", Person: w.Supervisor.ID}))
	w.ok(t, w.TakeMatter(ctx, w.look.ID, w.look.Version, w.Operator.ID))
	w.look = w.matterOf(t, w.Diameter)
	plan, err := w.PlanInForce(ctx, w.Diameter.ID, plant.MatterUp)
	w.ok(t, err)
	w.ok(t, w.AnswerStep(ctx, plant.StepAnswer{ID: storetest.ID(), Matter: w.look.ID, Plan: plan.ID, Attempt: 1, Step: 1, Seq: 1, Said: plant.SaidNo, Person: w.Operator.ID}))
	w.ok(t, w.StateProduct(ctx, plant.ContainmentEntry{ID: storetest.ID(), Containment: w.hold.ID, Step: plant.KeptAside, Quantity: 118, Place: "Red rack 3, second shelf", Tag: "R-18", Person: w.Operator.ID}))
	w.Clock.Advance(20 * time.Minute)
}

// said is what engineering has stated, what gauges were found to be, and what came from
// outside and could not be taken.
func (w *works) said(t testing.TB) {
	ctx := context.Background()
	_, err := w.RefreshStandings(ctx, true)
	w.ok(t, err)
	w.ok(t, w.StateProtection(ctx, plant.Protection{ID: storetest.ID(), Characteristic: w.Length.ID, Method: plant.InspectAll, DecidedBy: "Quality manager",
		Instruction: "Snap gauge on every shoulder. What does not pass goes into the red box, with the time on the card.", From: w.Clock.Now(), Person: w.Engineer.ID}))
	for _, good := range []bool{true, false} {
		w.ok(t, w.CheckGauge(ctx, plant.GaugeCheckRecord{ID: storetest.ID(), Gauge: w.gauge.ID, Good: good, Master: storetest.Decimal(t, "0.020"), Reading: storetest.Decimal(t, "0.023"),
			Note: "Pin worn on one side, sent away", Person: w.Operator.ID}))
		w.Clock.Advance(time.Minute)
	}
	content, err := json.Marshal(map[string]any{"line": "0.5902 in"})
	w.ok(t, err)
	w.ok(t, w.SetAside(ctx, plant.Aside{Station: w.Station.ID, About: storetest.ID(), Person: w.Operator.ID, Why: plant.Invalidf("line", "A reading came in another unit: %q.", "0.5902 in")}, content))
	w.ok(t, w.WriteNote(ctx, plant.ShiftNote{ID: storetest.ID(), Line: w.Line.ID, Text: "Lathe 2 is warm only after half an hour; measure twice until then", WrittenByID: w.Operator.ID}))
}

func (w *works) devicesAndPeople(t testing.TB) {
	ctx := context.Background()
	w.person(t, "away", plant.Operator)
	away, err := w.PersonByLogin(ctx, "away")
	w.ok(t, err)
	w.ok(t, w.SetActive(ctx, away.ID, false, w.Administrator.ID))
	w.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge at the straightening bench", Station: w.Station.ID})
	lost, _ := w.enrol(t, plant.Device{Kind: plant.Wall, Name: "Wall screen in the old hall"})
	w.ok(t, w.RevokeDevice(ctx, lost.ID, w.Administrator.ID))
	_, err = w.MakeDeviceCode(ctx, plant.Device{Kind: plant.Tablet, Name: "Tablet 7, straightening and inspection", Station: w.Station.ID}, w.Administrator.ID)
	w.ok(t, err)
}

// messages calls supervisors, and gives a message up that could not be delivered.
func (w *works) messages(t testing.TB) {
	ctx := context.Background()
	states, err := w.StationStates(ctx, 0)
	w.ok(t, err)
	calls := plant.CallsDue(states, w.Clock.Now())
	if len(calls) == 0 {
		t.Fatal("nobody is called")
	}
	for _, c := range calls {
		_, err := w.FireStep(ctx, c, []plant.Message{{Target: "tickets", Title: c.Station.Name + ", " + c.Characteristic.Name + ": nobody has taken it", Body: "-"}})
		w.ok(t, err)
	}
	out, err := w.ClaimMessages(ctx, "tickets", 10, time.Minute)
	w.ok(t, err)
	if len(out) == 0 {
		t.Fatal("no message waits")
	}
	for _, m := range out {
		_, err := w.MessageFailed(ctx, m, "It answered 404 Not Found.", w.Clock.Now(), false, true)
		w.ok(t, err)
	}
}

// file sends the description of a plant, which waits to be confirmed.
func (w *works) file(t testing.TB) {
	var file strings.Builder
	file.WriteString("Line;Station;Machine;Characteristic;Unit;Decimals;Lower specification limit;Upper specification limit;Parts per subgroup;Sample every minutes\r\n")
	for i := range 12 {
		fmt.Fprintf(&file, "Line %d;Station %d;Machine %d;Characteristic %d;mm;3;9,990;10,010;5;60\r\n", i/6, i/3, i/2, i)
	}
	file.WriteString("Line 9;Station 9;Machine 9;A line with a mistake;mm;many;9,990;10,010;5;60\r\n")
	res, body := w.visit(t, "engineer1").upload("plant of the new hall.csv", file.String())
	w.description = res.Header.Get("Location")
	if res.StatusCode != http.StatusSeeOther || !strings.HasPrefix(w.description, "/admin/description/") {
		t.Fatalf("sending a file: %d %.300s", res.StatusCode, body)
	}
}

func (w *works) matterOf(t testing.TB, c plant.Characteristic) plant.Matter {
	t.Helper()
	st, err := w.StationState(context.Background(), c.StationID, 1)
	w.ok(t, err)
	for _, one := range st.Characteristics {
		if one.ID == c.ID && one.Matter != nil {
			return *one.Matter
		}
	}
	t.Fatalf("no matter is open on %s", c.Name)
	return plant.Matter{}
}

// scope is the query of the page of one reaction plan.
func scope(kind plant.MatterKind, family string) string {
	return url.Values{"kind": {string(kind)}, "family": {family}}.Encode()
}
