package plant

import "time"

// AlarmSpan is how far back the alarm load of a station is counted.
const AlarmSpan = 24 * time.Hour

// Alarm rates for one person, in alarms an hour, averaged over steady running.
//
// Source: EEMUA Publication 191, Alarm systems: a guide to design, management and
// procurement, written for control rooms: one alarm in ten minutes is very likely
// acceptable, one in five manageable (quoted from memory).
const (
	AcceptableAlarms = 6  // an hour: one in ten minutes
	ManageableAlarms = 12 // an hour: one in five minutes
)

// LoadGrade says how a number of alarms in one hour compares with those rates.
type LoadGrade uint8

const (
	LoadAcceptable LoadGrade = iota
	LoadManageable
	LoadTooMuch
)

// GradeOfLoad grades the alarms that one person got in an hour.
func GradeOfLoad(alarms int) LoadGrade {
	switch {
	case alarms <= AcceptableAlarms:
		return LoadAcceptable
	case alarms <= ManageableAlarms:
		return LoadManageable
	}
	return LoadTooMuch
}

// AlarmHours counts a station's alarms in the hours before now: the last is the hour that
// ends now, the one before it the hour before, and so on.
func (s StationState) AlarmHours(hours int, now time.Time) []int {
	out := make([]int, hours)
	for _, at := range s.Alarms {
		if ago := int(now.Sub(at) / time.Hour); !at.After(now) && ago < hours {
			out[hours-1-ago]++
		}
	}
	return out
}
