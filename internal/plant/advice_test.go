package plant

import (
	"math"
	"testing"
	"time"

	"github.com/google/uuid"
)

func advise(t *testing.T, h History, k *Knob) Advice {
	t.Helper()
	a, err := h.Advise(k)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func TestAdviceKinds(t *testing.T) {
	t.Parallel()
	steady := []float64{10, 10.1, 9.9, 10.05, 9.95, 10, 9.9, 10.1, 10, 10.08, 9.97, 10, 9.93, 10.14}
	screw := func(h History, gain Decimal) *Knob {
		return &Knob{Step: Decimal{5, 2}, Moves: []Gain{{h.State.ID, gain}}}
	}
	for _, tc := range []struct {
		name   string
		kind   AdviceKind
		adjust float64
		turn   string
		make   func() (History, *Knob)
	}{
		{"nothing open", AdviseLeave, 0, "0.00", func() (History, *Knob) { return stretch(steady...), nil }},
		{"no round since a matter was closed", AdviseFresh, 0, "0", func() (History, *Knob) {
			h := stretch(steady...)
			h.matter(12, 13, Fixed, Location)
			return h, nil
		}},
		{"no limits", AdviseLearning, 0, "0", func() (History, *Knob) {
			h := stretch(steady...)
			h.State.Revision = nil
			return h, nil
		}},
		{"signal, no round since", AdviseRound, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5)
			h.matter(2, -1, "", Location)
			return h, nil
		}},
		{"signal, and adjusted since the last round", AdviseRound, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.4)
			h.matter(2, -1, "", Location)
			h.adjusted(3, -40, true)
			return h, nil
		}},
		// By hand: one round 0.40 above, 1.96 sigma is 0.196.
		{"signal, one round since", AdviseTurn, -0.4, "-0.40", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.4)
			h.matter(2, -1, "", Location)
			return h, nil
		}},
		// Only the rounds after the signal count: 10.9 itself does not.
		{"signal, two rounds since, through a knob", AdviseTurn, -0.38, "-0.95", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.9, 10.3, 10.44)
			h.matter(2, -1, "", Location)
			return h, screw(h, Decimal{4, 1})
		}},
		{"a knob that turns the other way", AdviseTurn, -0.38, "0.95", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.9, 10.3, 10.44)
			h.matter(2, -1, "", Location)
			return h, screw(h, Decimal{-4, 1})
		}},
		{"signal, the round since is near target", AdviseNone, 0, "0.00", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.1)
			h.matter(2, -1, "", Location)
			return h, nil
		}},
		{"less than half a step", AdviseNone, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.3)
			h.matter(2, -1, "", Location)
			return h, &Knob{Step: Decimal{1, 0}, Moves: []Gain{{h.State.ID, Decimal{1, 0}}}}
		}},
		{"what is open is about the spread", AdviseElsewhere, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.1)
			h.matter(2, -1, "", Dispersion)
			return h, nil
		}},
		{"what is open is a single reading", AdviseElsewhere, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.1)
			h.matter(2, -1, "", Reading)
			return h, nil
		}},
		{"the gauge failed its check", AdviseGauge, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.4)
			h.matter(2, -1, "", GaugeCheck)
			return h, nil
		}},
		{"a signal, and the gauge is not good", AdviseGauge, 0, "0", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.5, 10.4)
			h.matter(2, -1, "", Location)
			h.State.Gauge = &GaugeNow{FailedSince: at(3)}
			return h, nil
		}},
		{"steady, but set off target", AdviseOffTarget, -0.09, "-0.09", func() (History, *Knob) {
			var v []float64
			for i := range 24 {
				v = append(v, 10.09+[]float64{0.05, -0.05}[i%2])
			}
			return stretch(v...), nil
		}},
		// Grubbs: the first try corrects the whole, the second half of what is left.
		{"setting up, first try", AdviseSetUp, -0.42, "-0.42", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.42)
			h.Changes = []Change{{Kind: ToolChanged, HappenedAt: at(1).Add(time.Minute)}}
			return h, nil
		}},
		{"setting up, second try", AdviseSetUp, 0.12, "0.12", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.42, 9.76)
			h.Changes = []Change{{Kind: ToolChanged, HappenedAt: at(1).Add(time.Minute)}}
			h.adjusted(2, -42, false)
			return h, nil
		}},
		{"after a new tool, within chance", AdviseLeave, 0, "0.00", func() (History, *Knob) {
			h := stretch(10, 10.1, 10.12)
			h.Changes = []Change{{Kind: ToolChanged, HappenedAt: at(1).Add(time.Minute)}}
			return h, nil
		}},
		{"setting up while learning, near enough", AdviseSettled, 0, "0.00", func() (History, *Knob) {
			h := stretch(10, 10.1, 10)
			h.State.Revision = nil
			h.Changes = []Change{{Kind: ToolChanged, HappenedAt: at(1).Add(time.Minute)}}
			return h, nil
		}},
	} {
		t.Run(tc.name, func(t *testing.T) {
			t.Parallel()
			h, k := tc.make()
			a := advise(t, h, k)
			if a.Kind != tc.kind || math.Abs(a.Adjust-tc.adjust) > 1e-9 {
				t.Errorf("%s %g, want %s %g: %+v", a.Kind, a.Adjust, tc.kind, tc.adjust, a)
			}
			if want, _ := ParseDecimal(tc.turn); a.Turn.Compare(want) != 0 {
				t.Errorf("turn %s, want %s", a.Turn, tc.turn)
			}
		})
	}
}

// TestLeavingItAloneInFigures checks what is said with nothing open, by hand.
func TestLeavingItAloneInFigures(t *testing.T) {
	t.Parallel()
	h := stretch(10, 10.1, 9.9, 10.05, 9.95, 10, 9.9, 10.1, 10, 10.08, 9.97, 10, 9.93, 10.15)
	h.adjusted(3, 10, false) // what it carries is taken off the rounds that are drawn
	a := advise(t, h, nil)
	// 0.15 is 1.5 sigma: 2 (1 - Phi(1.5)) = 0.1336 (tables of the normal distribution).
	if !a.HasLast || math.Abs(a.Deviation-0.15) > 1e-9 || math.Abs(a.Chance-0.1336) > 5e-5 {
		t.Errorf("last round %+g, chance %.4f", a.Deviation, a.Chance)
	}
	if math.Abs(a.Correction+0.15) > 1e-9 || a.LeftAt != 0 || math.Abs(a.MovedTo+0.15) > 1e-9 {
		t.Errorf("correction %g, from %g to %g", a.Correction, a.LeftAt, a.MovedTo)
	}
	if len(a.Left) != 14 || math.Abs(a.Left[3]-10.05) > 1e-9 || math.Abs(a.Left[4]-9.85) > 1e-9 || math.Abs(a.Corrected[5]-(10+9.9-9.85)) > 1e-9 {
		t.Errorf("left %v, corrected %v", a.Left, a.Corrected)
	}
	if a.Unprompted != 1 || a.LeftSpread <= 0 || a.CorrectedSpread <= a.LeftSpread {
		t.Errorf("%d unprompted, spread %g and %g", a.Unprompted, a.LeftSpread, a.CorrectedSpread)
	}
}

// TestAnOffsetIsOldOrNew: steady rounds off target may lie where the limits were set, or
// beyond chance away from there without any rule having fired.
func TestAnOffsetIsOldOrNew(t *testing.T) {
	t.Parallel()
	var v []float64
	for i := range 24 {
		v = append(v, 10.09+[]float64{0.05, -0.05}[i%2])
	}
	h := stretch(v...)
	// By hand: 0.09 from the centre, 0.1/sqrt(24) = 0.0204 a standard error.
	if a := advise(t, h, nil); a.Kind != AdviseOffTarget || math.Abs(a.OffCentre-0.09) > 1e-9 {
		t.Errorf("%s, %g from the centre, want 0.09", a.Kind, a.OffCentre)
	}
	h.State.Revision.Center = 10.06 // 1.5 standard errors
	if a := advise(t, h, nil); a.Kind != AdviseOffTarget || a.OffCentre != 0 {
		t.Errorf("%s, %g from the centre, want 0", a.Kind, a.OffCentre)
	}
}

func TestKnobEffects(t *testing.T) {
	t.Parallel()
	a, b := uuid.Must(uuid.NewV7()), uuid.Must(uuid.NewV7())
	k := Knob{Name: " Dosing screw ", Unit: "turns", Step: Decimal{5, 2}, Reason: "weighed", Moves: []Gain{{b, Decimal{-125, 3}}, {a, Decimal{4, 1}}}}
	if err := k.Clean(); err != nil || k.Name != "Dosing screw" || k.Moves[0].Characteristic != a {
		t.Fatalf("%+v, %v", k, err)
	}
	got, err := k.Effects(Decimal{-15, 2})
	if err != nil || got[0].Size.String() != "-0.060" || got[1].Size.String() != "0.01875" {
		t.Errorf("%v, %v", got, err)
	}
	if s := got[0].Size.Trimmed(2).String(); s != "-0.06" {
		t.Errorf("trimmed %s", s)
	}
	for name, bad := range map[string]func(*Knob){
		"name":   func(k *Knob) { k.Name = " " },
		"unit":   func(k *Knob) { k.Unit = "" },
		"step":   func(k *Knob) { k.Step.Units = 0 },
		"reason": func(k *Knob) { k.Reason = "" },
		"moves":  func(k *Knob) { k.Moves = nil },
	} {
		v := k
		bad(&v)
		pe, ok := v.Clean().(*Error)
		if !ok || pe.Kind != Invalid || pe.Field != name {
			t.Errorf("%s: %v", name, pe)
		}
	}
	for _, moves := range [][]Gain{{{a, Decimal{0, 1}}}, {{a, Decimal{1, 1}}, {a, Decimal{2, 1}}}, {{a, Decimal{1, 6}}}} {
		v := k
		v.Moves = moves
		if err := v.Clean(); !IsKind(err, Invalid) {
			t.Errorf("%v: %v", moves, err)
		}
	}
	if _, err := (Knob{Moves: []Gain{{a, Decimal{999_999_999_999, 0}}}}).Effects(Decimal{1000, 0}); !IsKind(err, Invalid) {
		t.Errorf("too large a turn: %v", err)
	}
}
