package plant

import "time"

// EscalationSettings are what a plant may set about finding somebody.
type EscalationSettings struct {
	EscalationPlan
	LongestQuietMinutes int // a matter may be kept quiet for so long at a time
	GiveUpHours         int // a message that cannot be delivered is tried for so long
}

var defaultEscalationSettings = EscalationSettings{
	EscalationPlan: DefaultEscalation, LongestQuietMinutes: 12 * 60, GiveUpHours: 24,
}

// mostMinutes bounds the time of a step: a week.
const mostMinutes = 7 * 24 * 60

// EscalationSettingsTable lists the settings of escalation.
var EscalationSettingsTable = []SettingField{
	stepSetting("look-board", func(p *EscalationPlan) *int { return &p.Look.Board }),
	stepSetting("look-supervisors", func(p *EscalationPlan) *int { return &p.Look.Supervisors }),
	stepSetting("look-message", func(p *EscalationPlan) *int { return &p.Look.Message }),
	stepSetting("hold-board", func(p *EscalationPlan) *int { return &p.Hold.Board }),
	stepSetting("hold-supervisors", func(p *EscalationPlan) *int { return &p.Hold.Supervisors }),
	stepSetting("hold-message", func(p *EscalationPlan) *int { return &p.Hold.Message }),
	stepSetting("round-board", func(p *EscalationPlan) *int { return &p.Round.Board }),
	stepSetting("round-supervisors", func(p *EscalationPlan) *int { return &p.Round.Supervisors }),
	stepSetting("round-message", func(p *EscalationPlan) *int { return &p.Round.Message }),
	{Key: "escalation.longest-quiet", Unit: "minutes", Least: 10, Most: mostMinutes, Field: func(s *Settings) any { return &s.Escalation.LongestQuietMinutes }},
	{Key: "escalation.give-up", Unit: "hours", Least: 1, Most: 14 * 24, Field: func(s *Settings) any { return &s.Escalation.GiveUpHours }},
}

func stepSetting(key string, of func(*EscalationPlan) *int) SettingField {
	return SettingField{Key: "escalation." + key, Unit: "minutes", Most: mostMinutes,
		Field: func(s *Settings) any { return of(&s.Escalation.EscalationPlan) }}
}

func (s EscalationSettings) check() error {
	for _, of := range []struct {
		field string
		StepTimes
	}{{"escalation.look-message", s.Look}, {"escalation.hold-message", s.Hold}, {"escalation.round-message", s.Round}} {
		last := 0
		for _, minutes := range []int{of.Board, of.Supervisors, of.Message} {
			if minutes > 0 && minutes < last {
				return Invalidf(of.field, "A later step cannot come before an earlier one. Set it to 0 to leave it out.")
			}
			last = max(last, minutes)
		}
	}
	return nil
}

// LongestQuiet is how long a matter may be kept quiet at a time.
func (s EscalationSettings) LongestQuiet() time.Duration {
	return time.Duration(s.LongestQuietMinutes) * time.Minute
}

// GiveUp is how long a message is tried before it is listed as not delivered.
func (s EscalationSettings) GiveUp() time.Duration {
	return time.Duration(s.GiveUpHours) * time.Hour
}
