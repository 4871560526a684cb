package ui

import (
	"holdfast/internal/plant"
	"holdfast/web/words"
)

// StepView is one step of a reaction plan as the tablet asks it. The desk shows the same
// as a preview, with nothing to press.
type StepView struct {
	Count   string // "Step 2 of 4"
	About   string // the kind of matter whose plan it belongs to
	Given   string // what was answered before, when this is about what to do then
	Says    string
	Kind    plant.StepKind
	Limits  string // of a value, with its unit
	Unit    string
	Raw     string // as typed
	Problem string
	Preview bool
	Stopped string // of a step that stops the machine: it is reported stopped already, and since when
}

// NewStep is a step in words; the caller adds the count and what was answered.
func NewStep(f Format, s plant.PlanStep) StepView {
	return StepView{Says: s.Says, Kind: s.Kind, Unit: s.Unit, Limits: StepLimits(f, s)}
}

// StepLimits says between what a value should lie, "" when it is not asked for.
func StepLimits(f Format, s plant.PlanStep) string {
	switch {
	case s.Lower != nil && s.Upper != nil:
		return f.Words.T("matter.between", f.Decimal(*s.Lower), f.WithUnit(f.Decimal(*s.Upper), s.Unit))
	case s.Lower != nil:
		return f.Words.T("matter.at-least", f.WithUnit(f.Decimal(*s.Lower), s.Unit))
	case s.Upper != nil:
		return f.Words.T("matter.at-most", f.WithUnit(f.Decimal(*s.Upper), s.Unit))
	}
	return ""
}

// MatterKindWord names a kind of matter.
func MatterKindWord(w *words.Printer, k plant.MatterKind) string {
	return w.T("matter.kind." + string(k))
}

// StageWords say where a matter stands in a few words: "Step 2 of 4". They are empty
// where its state and who took it say it all.
func StageWords(w *words.Printer, p plant.Progress) string {
	switch p.Stage {
	case plant.StageWorking:
		if len(p.Steps) == 0 {
			return ""
		}
		if p.Next == len(p.Steps) {
			return w.T("matter.steps-done", len(p.Steps))
		}
		return w.T("matter.step-of", p.Next+1, len(p.Steps))
	case plant.StageConfirming, plant.StageVerifying, plant.StageReady:
		return w.T("matter.waits." + string(p.Stage))
	}
	return ""
}
