package limits

import "math"

// Extremes are the streams that a group chart plots for one round: the highest and
// the lowest location, and the widest spread. Each is judged by the bands of a single
// stream.
type Extremes struct {
	Highest, Lowest, Widest int // indices of streams, the first of equals
	// Tied tells that more than one stream shares the highest (lowest) location: no
	// stream is then extreme alone.
	HighestTied, LowestTied bool
}

// FindExtremes picks the streams of one round that a group chart plots. At least two
// streams with finite figures are needed; on XBarS the spread is the s.d., else the
// range. Differences below tie (in the readings' unit) count as equal.
//
// Source: Burr, Statistical Quality Control Methods (1976), chapter 9; Nelson,
// Journal of Quality Technology 18 (1986), 255-256.
func FindExtremes(chart Chart, streams []Subgroup, tie float64) (Extremes, error) {
	if len(streams) < 2 {
		return Extremes{}, invalid("a group chart needs at least two streams, got %d", len(streams))
	}
	if !(tie >= 0) {
		return Extremes{}, invalid("the difference that counts as equal must not be negative, got %g", tie)
	}
	var e Extremes
	for i, s := range streams {
		if err := s.check(chart, i); err != nil {
			return Extremes{}, err
		}
		if s.Location > streams[e.Highest].Location {
			e.Highest = i
		}
		if s.Location < streams[e.Lowest].Location {
			e.Lowest = i
		}
		a, _ := chart.DispersionPoint(nil, s)
		b, _ := chart.DispersionPoint(nil, streams[e.Widest])
		if a > b {
			e.Widest = i
		}
	}
	for i, s := range streams {
		if i != e.Highest && streams[e.Highest].Location-s.Location <= tie {
			e.HighestTied = true
		}
		if i != e.Lowest && s.Location-streams[e.Lowest].Location <= tie {
			e.LowestTied = true
		}
	}
	return e, nil
}

// StreamRun counts how often the same stream has been extreme in a row, on one side.
// The zero StreamRun has seen nothing.
type StreamRun struct {
	Stream, Length int
}

// Step takes the extreme stream of the next round; with a tie no stream is extreme
// alone and the run is over. It returns the length of the run.
func (r *StreamRun) Step(stream int, tied bool) int {
	switch {
	case tied:
		*r = StreamRun{}
	case r.Length > 0 && r.Stream == stream:
		r.Length++
	default:
		*r = StreamRun{stream, 1}
	}
	return r.Length
}

// RunChance is the probability that k rounds in a row have the same stream extreme
// (on one side) when all streams are alike: (1/streams)^(k-1).
func RunChance(streams, k int) (float64, error) {
	if streams < 2 || k < 1 {
		return math.NaN(), invalid("a run needs at least two streams and one round, got %d and %d", streams, k)
	}
	return math.Pow(1/float64(streams), float64(k-1)), nil
}

// RunFor is the shortest run whose chance is at most the given one, 0 < chance < 1.
func RunFor(streams int, chance float64) (int, error) {
	if streams < 2 || streams > 1e6 {
		return 0, invalid("a run needs two to a million streams, got %d", streams)
	}
	if !(chance > 0 && chance < 1) {
		return 0, invalid("a chance must lie between 0 and 1, got %g", chance)
	}
	k := 1
	for p := 1.0; p > chance*(1+1e-12); p /= float64(streams) {
		k++
	}
	return k, nil
}
