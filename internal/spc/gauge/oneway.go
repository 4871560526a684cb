package gauge

import "math"

// OneWay is a one-way analysis of variance: several levels (instruments, parts,
// appraisers), each with its own readings.
type OneWay struct {
	Between, Within, Total Row
	RSquared               float64 // share of the sum of squares between levels
	// WithinSD is the root of the mean square within; BetweenVariance the component
	// of variance of the levels, which needs equal numbers of readings to be exact
	// and is 0 when it would be negative.
	WithinSD, BetweenVariance float64
}

// Levels analyses readings[level][replicate]; at least two levels, readings beyond one
// a level, and some spread are needed. F and P of Between are nil when nothing varies
// within.
//
// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 7.4.3.3.
func Levels(readings [][]float64) (OneWay, error) {
	if len(readings) < 2 {
		return OneWay{}, invalid("at least two levels are needed, got %d", len(readings))
	}
	count, squaresOfSizes := 0, 0.0
	for i, level := range readings {
		if len(level) == 0 {
			return OneWay{}, invalid("level %d has no readings", i+1)
		}
		for k, x := range level {
			if err := readingOK(x, "reading %d of level %d", k+1, i+1); err != nil {
				return OneWay{}, err
			}
		}
		count += len(level)
		squaresOfSizes += float64(len(level)) * float64(len(level))
	}
	if count > MaxReadings {
		return OneWay{}, invalid("a study has at most %d readings, got %d", MaxReadings, count)
	}
	m := len(readings)
	if count == m {
		return OneWay{}, invalid("no level has two readings: there is no spread within")
	}
	origin := readings[0][0]
	means := make([]float64, m)
	grand, within := 0.0, 0.0
	for i, level := range readings {
		n := float64(len(level))
		for _, x := range level {
			means[i] += (x - origin) / n
		}
		left := 0.0
		for _, x := range level {
			d := (x - origin) - means[i]
			within += d * d
			left += d
		}
		within -= left * left / n
		grand += means[i] * n / float64(count)
	}
	between := 0.0
	for i, level := range readings {
		d := means[i] - grand
		between += float64(len(level)) * d * d
	}
	within = math.Max(0, within)
	total := between + within
	if total == 0 {
		return OneWay{}, invalid("all readings are equal")
	}
	if err := allFinite(&total); err != nil {
		return OneWay{}, err
	}
	o := OneWay{
		Between: Row{Source: Part, DF: m - 1, SS: between},
		Within:  Row{Source: Repeatability, DF: count - m, SS: within},
		Total:   Row{Source: Total, DF: count - 1, SS: total},
	}
	o.Between.mean()
	o.Within.mean()
	o.Between.test(o.Within)
	o.RSquared = between / total
	o.WithinSD = math.Sqrt(*o.Within.MS)
	size := (float64(count) - squaresOfSizes/float64(count)) / float64(m-1)
	o.BetweenVariance = math.Max(0, (*o.Between.MS-*o.Within.MS)/size)
	return o, allFinite(&o.RSquared, &o.WithinSD, &o.BetweenVariance, o.Between.MS, o.Within.MS, o.Between.F, o.Between.P)
}
