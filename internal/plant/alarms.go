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

// AlarmHours counts a station's alarms in so many whole hours before end, oldest first.
func (s StationState) AlarmHours(hours int, end time.Time) []int {
	out := make([]int, hours)
	for _, at := range s.Alarms {
		if ago := int(end.Sub(at) / time.Hour); at.Before(end) && ago < hours {
			out[hours-1-ago]++
		}
	}
	return out
}

// AlarmsSince counts the station's alarms after an instant.
func (s StationState) AlarmsSince(t time.Time) int {
	n := 0
	for _, at := range s.Alarms {
		if at.After(t) {
			n++
		}
	}
	return n
}
