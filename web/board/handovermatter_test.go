package board

import (
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// TestHandoverSaysWhereAMatterStands: what the board says of an open matter, the next
// shift reads too, as it stood when the summary ends.
func TestHandoverSaysWhereAMatterStands(t *testing.T) {
	t.Parallel()
	plan := plant.ReactionPlan{ID: named("plan"), Verify: true}
	m := plant.MatterOfShift{StationName: "Lathe 2", Name: "Axle seat diameter", Matter: plant.Matter{ID: named("matter"), OpenedAt: before(3 * time.Hour),
		TakenBy: named("operator"), TakenByName: "Operator 1", TakenAt: before(2 * time.Hour),
		Kinds: []plant.KindAdded{{Kind: plant.MatterUp, Plan: plan.ID, Stands: true}}, Plans: map[uuid.UUID]plant.ReactionPlan{plan.ID: plan},
		Lines: []plant.MatterLine{{Firing: beyond}},
		Fixes: []plant.Fix{{ID: named("fix"), Cause: "Insert worn", At: before(time.Hour)}}}}
	if got := newHandoverMatter(format(), m, noon).Taken; got != "Waits for a second person. Operator 1 took it 10:24" {
		t.Errorf("fixed: %q", got)
	}
	if got := newHandoverMatter(format(), m, before(90*time.Minute)).Taken; got != "Operator 1 took it 10:24" {
		t.Errorf("before the fix: %q", got)
	}
	m.TakenBy, m.TakenByName, m.TakenAt, m.Fixes = uuid.Nil, "", time.Time{}, nil
	m.Quiet = plant.Quiet{ID: named("quiet"), Kind: m.Kind(), At: before(time.Hour), Until: noon.Add(time.Hour), Reason: "insert is ordered", PersonName: "Supervisor 1"}
	if got := newHandoverMatter(format(), m, noon).Quiet; got != "Quiet until 13:24. Supervisor 1: insert is ordered" {
		t.Errorf("quiet: %q", got)
	}
	if got := newHandoverMatter(format(), m, noon.Add(time.Hour)).Quiet; got != "" {
		t.Errorf("after the quiet: %q", got)
	}
}
