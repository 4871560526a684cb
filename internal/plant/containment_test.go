package plant_test

import (
	"math/rand/v2"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Whatever people state, in whatever order: what is left is what was kept less what was
// disposed of, it is never negative, and the product is settled only with nothing left.
func TestQuantitiesOfContainedProductAddUp(t *testing.T) {
	t.Parallel()
	steps := append([]plant.ContainmentStep{plant.KeptAside, plant.CountedAgain, plant.NothingToKeep, plant.RestGone, "nonsense"}, plant.Dispositions...)
	settled, refused := 0, 0
	for seed := range uint64(500) {
		rng := rand.New(rand.NewPCG(seed, 3))
		c := plant.Containment{MatterClosed: noon}
		for range 12 {
			left := c.Left()
			e := plant.ContainmentEntry{Step: steps[rng.IntN(len(steps))], Quantity: rng.IntN(60) - 3, Place: "red rack", Note: "measured each"}
			if rng.IntN(3) == 0 {
				e.Quantity = left
			}
			got, err := c.Admit(e)
			if err != nil {
				if !plant.IsKind(err, plant.Invalid) {
					t.Fatal(err)
				}
				refused++
				continue
			}
			c.Entries = append(c.Entries, got)
			switch {
			case c.Left() < 0 || c.Left() != c.Kept()-c.Disposed() || c.Left() != left+got.Delta:
				t.Fatalf("seed %d: after %+v %d are left of %d kept, %d disposed", seed, got, c.Left(), c.Kept(), c.Disposed())
			case got.Step.Disposes() && (got.Delta != -e.Quantity || e.Quantity > left):
				t.Fatalf("seed %d: %+v was admitted with %d left", seed, got, left)
			case got.Step == plant.CountedAgain && c.Left() != e.Quantity:
				t.Fatalf("seed %d: counted %d, %d are left", seed, e.Quantity, c.Left())
			case c.Settled() != (c.Stated() && c.Left() == 0):
				t.Fatalf("seed %d: settled %v with %d left", seed, c.Settled(), c.Left())
			}
			if c.Settled() {
				settled++
			}
		}
	}
	if settled < 100 || refused < 100 {
		t.Errorf("only %d states were settled and %d statements refused", settled, refused)
	}
	open := plant.Containment{Matter: uuid.New(), Entries: []plant.ContainmentEntry{{Step: plant.KeptAside, Delta: 5}, {Step: plant.Scrapped, Delta: -5}}}
	if open.Settled() {
		t.Error("settled while its matter is open, and more may come")
	}
}

func TestStatementsSayWhatIsMissing(t *testing.T) {
	t.Parallel()
	kept := plant.Containment{Entries: []plant.ContainmentEntry{{Step: plant.KeptAside, Quantity: 40, Delta: 40, Place: "rack 3", Tag: "R-17"}}}
	for field, e := range map[string]plant.ContainmentEntry{
		"quantity": {Step: plant.Scrapped, Quantity: 41},
		"place":    {Step: plant.KeptAside, Quantity: 4},
		"note":     {Step: plant.Released, Quantity: 4},
		"step":     {Step: "lost", Quantity: 4},
		"":         {Step: plant.NothingToKeep, Note: "none was made"},
	} {
		_, err := kept.Admit(e)
		pe, ok := err.(*plant.Error)
		if !ok || pe.Field != field {
			t.Errorf("%+v: %v, want a problem at %q", e, err, field)
		}
	}
	if place, tag := kept.Where(); place != "rack 3" || tag != "R-17" {
		t.Errorf("kept at %q with %q", place, tag)
	}
}
