package ui

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// Tone is the class that gives a state its colour: "hold", "look", "due", "unknown",
// "stopped", "learning" or "calm".
func Tone(c plant.Condition) string {
	switch c {
	case plant.IsHold, plant.IsLook, plant.IsUnknown, plant.IsStopped, plant.IsLearning:
		return string(c)
	case plant.IsDue, plant.IsLate:
		return "due"
	}
	return "calm"
}

// SymbolOf is the name of the state's shape, for Symbol.
func SymbolOf(c plant.Condition) string {
	switch c {
	case plant.IsHold, plant.IsLook, plant.IsUnknown, plant.IsLearning:
		return string(c)
	case plant.IsStopped:
		return "stop"
	case plant.IsDue, plant.IsLate:
		return "due"
	}
	return "leave"
}

// ConditionWord is the one word of a state.
func ConditionWord(w *words.Printer, c plant.Condition) string {
	return w.T("ui.state." + string(c))
}

// ConditionOf is the condition that looks like a verdict.
func ConditionOf(v plant.Verdict) plant.Condition {
	switch v {
	case plant.Hold:
		return plant.IsHold
	case plant.Look:
		return plant.IsLook
	case plant.Learning:
		return plant.IsLearning
	}
	return plant.CalmLeave
}

// OpenedBefore says since when a matter is open, where it became what it is now only later:
// its age is that of the Hold. "" where the two are one.
func OpenedBefore(f Format, m plant.Matter) string {
	if m.KindSince().Sub(m.OpenedAt) < time.Minute {
		return ""
	}
	return f.Words.T("ui.opened-before", f.Clock(m.OpenedAt))
}

// VerdictWords is what a verdict tells the operator to do.
func VerdictWords(w *words.Printer, v plant.Verdict) string {
	return w.T("ui.verdict." + string(v))
}

// OwnerWord is who must act.
func OwnerWord(w *words.Printer, o plant.Owner) string {
	return w.T("ui.owner." + string(o))
}

// OccasionWord is why a sample is taken, "" when for no reason that a plan names.
func OccasionWord(w *words.Printer, o plant.Occasion) string {
	if o == plant.Unplanned {
		return ""
	}
	return w.T("ui.occasion." + string(o))
}
