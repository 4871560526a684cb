package station

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// fixWords say what a round after a fix means for the matter that waits for it. ok is
// false when it means nothing in particular.
func fixWords(f ui.Format, m plant.Matter, taken time.Time, fired bool) (step, more string, ok bool) {
	n := len(m.Fixes)
	if n == 0 || taken.Before(m.Fixes[n-1].Since()) {
		return "", "", false
	}
	w := f.Words
	switch p := m.Progress(); {
	case fired && p.Fix == nil:
		return w.T("matter.round-refutes"), w.T("matter.round-refutes-more"), true
	case !fired && p.Stage == plant.StageReady:
		return w.T("matter.round-confirms"), w.T("matter.confirmed-close"), true
	case !fired && p.Stage == plant.StageVerifying:
		return w.T("matter.round-confirms"), w.T("matter.confirmed-verify"), true
	}
	return "", "", false
}
