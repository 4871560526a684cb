package plant_test

import (
	"math/rand/v2"
	"testing"

	"holdfast/internal/plant"
)

func TestHowAPlanWasKept(t *testing.T) {
	t.Parallel()
	half := plant.SamplingPlan{EveryMinutes: 30}
	taken := func(minutes ...int) (out []plant.Sample) {
		for _, m := range minutes {
			out = append(out, plant.Sample{At: at(float64(m))})
		}
		return out
	}
	stopped := plant.MachineLog{{At: at(-100), Running: true}, {At: at(45), Running: false}, {At: at(225), Running: true}}
	for name, c := range map[string]struct {
		plan    plant.SamplingPlan
		log     plant.MachineLog
		samples []plant.Sample
		happens []plant.Happening
		want    plant.Kept
	}{
		"all on time":             {plan: half, samples: taken(0, 30, 60, 90), want: plant.Kept{Promised: 4, Good: 4}},
		"none":                    {plan: half, want: plant.Kept{Promised: 4, Missed: 4}},
		"one late":                {plan: half, samples: taken(0, 45, 75, 105), want: plant.Kept{Promised: 4, Good: 3, Late: 1}},
		"a gap":                   {plan: half, samples: taken(0, 90), want: plant.Kept{Promised: 4, Good: 2, Missed: 2}},
		"one more than asked":     {plan: half, samples: taken(0, 5, 30, 60, 90), want: plant.Kept{Promised: 4, Good: 4, Besides: 1}},
		"a little early":          {plan: half, samples: taken(0, 25, 55, 85, 115), want: plant.Kept{Promised: 5, Good: 5}},
		"the machine stood still": {plan: half, log: stopped, samples: taken(0, 30), want: plant.Kept{Promised: 2, Good: 2}},
		"no plan":                 {samples: taken(3, 77), want: plant.Kept{Besides: 2}},
		"after a tool change": {plan: plant.SamplingPlan{Events: []plant.Occasion{plant.ToolChange}, GraceMinutes: 20},
			happens: []plant.Happening{{At: at(10), Occasion: plant.ToolChange}, {At: at(60), Occasion: plant.ToolChange}},
			samples: taken(15), want: plant.Kept{Promised: 2, Good: 0, Late: 1, Missed: 1}},
	} {
		// The sample before was taken half an hour before the shift; two hours are looked at.
		log := c.log
		if log == nil {
			log = plant.MachineLog{{At: at(-100), Running: true}}
		}
		got := c.plan.Keep(noon, at(120), plant.Sample{At: at(-30), Due: at(-30)}, c.samples, at(-5000), plant.Machine{}, log, c.happens)
		if got != c.want {
			t.Errorf("%s: %+v, want %+v", name, got, c.want)
		}
	}
}

// What fell due before the stretch is not counted in it, and what is due and may still be
// taken in time is not missed.
func TestKeptAtTheEdges(t *testing.T) {
	t.Parallel()
	half := plant.SamplingPlan{EveryMinutes: 30}
	log := plant.MachineLog{{At: at(-1000), Running: true}}
	got := half.Keep(noon, at(31), plant.Sample{At: at(-40), Due: at(-40)}, nil, at(-5000), plant.Machine{}, log, nil)
	if want := (plant.Kept{Promised: 1, Open: 1}); got != want { // due at -10 (before), 20 (late, and may still be taken)
		t.Errorf("due before the stretch: %+v, want %+v", got, want)
	}
	if want := (plant.Kept{Promised: 1, Missed: 1}); got.Ended() != want {
		t.Errorf("once the shift is over: %+v, want %+v", got.Ended(), want)
	}
	got = half.Keep(noon, at(51), plant.Sample{At: at(-40), Due: at(-40)}, nil, at(-5000), plant.Machine{}, log, nil)
	if want := (plant.Kept{Promised: 1, Missed: 1}); got != want { // the next one is due: nothing answers that of 20 any more
		t.Errorf("a whole interval late: %+v, want %+v", got, want)
	}
	got = half.Keep(noon, at(31), plant.Sample{At: noon, Due: noon}, nil, at(-5000), plant.Machine{}, log, nil)
	if got != (plant.Kept{}) {
		t.Errorf("due a minute ago: %+v, want nothing yet", got)
	}
	got = half.Keep(noon, at(120), plant.Sample{}, nil, at(100), plant.Machine{}, log, nil)
	if got != (plant.Kept{}) {
		t.Errorf("a plan of twenty minutes ago: %+v", got)
	}
}

// Whatever was taken when: every sample is counted once, promised is the sum of its parts,
// and two stretches side by side give what the whole gives.
func TestKeptAddsUp(t *testing.T) {
	t.Parallel()
	for seed := range uint64(400) {
		rng := rand.New(rand.NewPCG(seed, 9))
		plan := plant.SamplingPlan{EveryMinutes: 10 + rng.IntN(50)}
		log := plant.MachineLog{{At: at(-1000), Running: true}}
		running := true
		for m := rng.IntN(200); m < 600; m += 1 + rng.IntN(200) {
			running = !running
			log = append(log, plant.MachineState{At: at(float64(m)), Running: running})
		}
		var samples []plant.Sample
		for m := rng.IntN(40); m < 480; m += 1 + rng.IntN(90) {
			samples = append(samples, plant.Sample{At: at(float64(m))})
		}
		before := plant.Sample{At: at(-5)}
		whole := plan.Keep(noon, at(480), before, samples, at(-5000), plant.Machine{}, log, nil)
		if whole.Taken() != len(samples) || whole.Promised != whole.Good+whole.Late+whole.Open+whole.Missed {
			t.Fatalf("seed %d: %+v of %d samples", seed, whole, len(samples))
		}
		if whole.Promised > 480/plan.EveryMinutes+len(samples)+1 {
			t.Fatalf("seed %d: %d promised every %d minutes", seed, whole.Promised, plan.EveryMinutes)
		}
	}
}
