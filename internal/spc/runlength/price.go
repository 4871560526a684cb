package runlength

import (
	"math"

	"holdfast/internal/spc/watch"
)

// Sampling says how often a stream is sampled.
type Sampling struct {
	// IntervalHours between two subgroups.
	IntervalHours float64
	// HoursPerWeek the process runs; at most 168.
	HoursPerWeek float64
	// PartsPerHour made by the stream; 0 where parts are not counted.
	PartsPerHour float64
}

func (s Sampling) check() error {
	switch {
	case !(s.IntervalHours > 0 && s.IntervalHours <= 1e6):
		return invalid("the sampling interval must be above 0 hours, got %v", s.IntervalHours)
	case !(s.HoursPerWeek > 0 && s.HoursPerWeek <= 168):
		return invalid("hours per week must be above 0 and at most 168, got %v", s.HoursPerWeek)
	case !(s.PartsPerHour >= 0 && s.PartsPerHour <= 1e12):
		return invalid("parts per hour must not be negative, got %v", s.PartsPerHour)
	}
	return nil
}

// Price is what a set of rules costs and buys at a rate of sampling.
type Price struct {
	// FalseAlarmsPerWeek expected on a process that has not changed.
	FalseAlarmsPerWeek float64
	// Unchanged is the run length on that process.
	Unchanged RunLength
	// Caught holds one entry for each change asked about.
	Caught []Catch
}

// Catch tells how soon a change is caught.
type Catch struct {
	Change Change
	Length RunLength
	// MeanHours and MedianHours from the change to the signal, and the parts made
	// in that time. A change begins between two samples, so half an interval is
	// taken off.
	MeanHours, MedianHours float64
	MeanParts, MedianParts float64
}

// PriceOf prices everything a standard watches, for subgroups of n readings: the
// false alarms per week, and how soon each change is caught. The rules do not
// restart after a signal; false alarms are counted as if each began a new history.
// Arguments and errors are those of [Standard]; at most 100 changes are taken.
//
//	false alarms per week = subgroups per week / ARL unchanged
//	hours to the signal   = (run length - 1/2) · interval
//
// Source: common practice with the ARL; the half interval follows from a change
// that is equally likely anywhere between two samples.
func PriceOf(s watch.Standard, n int, sampling Sampling, changes []Change, opt Options) (Price, error) {
	if err := sampling.check(); err != nil {
		return Price{}, err
	}
	if len(changes) > 100 {
		return Price{}, invalid("at most 100 changes are taken, got %d", len(changes))
	}
	unchanged, err := Standard(s, n, Change{}, opt)
	if err != nil {
		return Price{}, err
	}
	out := Price{
		Unchanged:          unchanged,
		FalseAlarmsPerWeek: sampling.HoursPerWeek / sampling.IntervalHours / unchanged.Mean,
	}
	for _, c := range changes {
		r, err := Standard(s, n, c, opt)
		if err != nil {
			return Price{}, err
		}
		median, err := r.Median()
		if err != nil {
			return Price{}, err
		}
		hours := func(points float64) float64 { return math.Max(0, points-0.5) * sampling.IntervalHours }
		catch := Catch{Change: c, Length: r, MeanHours: hours(r.Mean), MedianHours: hours(median)}
		catch.MeanParts = catch.MeanHours * sampling.PartsPerHour
		catch.MedianParts = catch.MedianHours * sampling.PartsPerHour
		out.Caught = append(out.Caught, catch)
	}
	return out, nil
}
