package gauge

import (
	"math"
	"slices"

	"holdfast/internal/spc/factor"
)

// D2Star is the factor between the root mean square of an average of g ranges of n
// normal readings and sigma, √(d2² + d3²/g); for many ranges it becomes d2.
//
// Source: Duncan, Quality Control and Industrial Statistics; Patnaik, Biometrika 37
// (1950), 78-87.
func D2Star(n, g int) (float64, error) {
	if g < 1 {
		return math.NaN(), invalid("at least one range is needed, got %d", g)
	}
	d2, err := factor.D2(n)
	if err != nil {
		return math.NaN(), err
	}
	d3, err := factor.D3(n)
	if err != nil {
		return math.NaN(), err
	}
	return math.Sqrt(d2*d2 + d3*d3/float64(g)), nil
}

// AverageRange is a crossed study computed by averages and ranges, the way it is done
// with paper; interaction cannot be seen by it. All s.d. are in the readings' unit.
type AverageRange struct {
	MeanRange        float64 // of the trials of one appraiser on one part
	AppraiserSpan    float64 // between the highest and the lowest appraiser's mean
	PartSpan         float64 // between the highest and the lowest part's mean
	K1, K2, K3       float64 // factors from those three to s.d.
	Equipment        float64 // s.d. of repeatability
	AppraiserSD      float64
	Gauge            float64
	PartSD           float64
	TotalSD          float64
	OfTotal          Components  // 100 × s.d. / total s.d.
	OfTolerance      *Components // 100 × 6 s.d. / tolerance
	CategoriesUncut  float64
	Categories       int
	MeanRanges, Mean []float64 // of each appraiser
}

// CrossByRange computes a balanced study measurements[part][appraiser][trial] by
// averages and ranges, with the exact factors 1/d2 for repeatability (many ranges) and
// 1/d2* of one range for appraisers and parts. It needs at least two parts, two
// appraisers and two trials.
//
// Source: the average and range method, common practice in the measurement manuals of
// the motor trade; figures checked against the example of AIAG, Measurement Systems
// Analysis (from memory).
func CrossByRange(measurements [][][]float64, tolerance *float64) (AverageRange, error) {
	if err := toleranceOK(tolerance); err != nil {
		return AverageRange{}, err
	}
	c, err := shape(measurements)
	if err != nil {
		return AverageRange{}, err
	}
	if c.Appraisers < 2 {
		return AverageRange{}, invalid("at least two appraisers are needed, got %d", c.Appraisers)
	}
	r := AverageRange{MeanRanges: make([]float64, c.Appraisers), Mean: make([]float64, c.Appraisers)}
	partMeans := make([]float64, c.Parts)
	p, a, n := float64(c.Parts), float64(c.Appraisers), float64(c.Trials)
	origin := measurements[0][0][0]
	for i, part := range measurements {
		for j, trials := range part {
			r.MeanRanges[j] += (slices.Max(trials) - slices.Min(trials)) / p
			for _, x := range trials {
				r.Mean[j] += (x - origin) / n / p
				partMeans[i] += (x - origin) / n / a
			}
		}
	}
	for _, v := range r.MeanRanges {
		r.MeanRange += v / a
	}
	r.AppraiserSpan = slices.Max(r.Mean) - slices.Min(r.Mean)
	r.PartSpan = slices.Max(partMeans) - slices.Min(partMeans)
	for j := range r.Mean {
		r.Mean[j] += origin
	}
	d2, err := factor.D2(c.Trials)
	if err != nil {
		return AverageRange{}, err
	}
	r.K1 = 1 / d2
	for _, k := range []struct {
		size int
		into *float64
	}{{c.Appraisers, &r.K2}, {c.Parts, &r.K3}} {
		star, err := D2Star(k.size, 1)
		if err != nil {
			return AverageRange{}, err
		}
		*k.into = 1 / star
	}
	return r, r.finish(p*n, tolerance)
}

// finish computes the s.d. from the averages and ranges; each appraiser made so many
// readings.
func (r *AverageRange) finish(readings float64, tolerance *float64) error {
	r.Equipment = r.MeanRange * r.K1
	if r.Equipment == 0 {
		return invalid("repeated readings never differ: the gauge reads too coarsely to be judged by this study")
	}
	span := r.AppraiserSpan * r.K2
	r.AppraiserSD = math.Sqrt(math.Max(0, span*span-r.Equipment*r.Equipment/readings))
	r.PartSD = r.PartSpan * r.K3
	r.Gauge = math.Hypot(r.Equipment, r.AppraiserSD)
	r.TotalSD = math.Hypot(r.Gauge, r.PartSD)
	sd := Components{
		Repeatability: r.Equipment, Appraiser: r.AppraiserSD, Reproducibility: r.AppraiserSD,
		Gauge: r.Gauge, Part: r.PartSD, Total: r.TotalSD,
	}
	r.OfTotal = sd.each(func(v float64) float64 { return 100 * v / r.TotalSD })
	if tolerance != nil {
		shares := sd.each(func(v float64) float64 { return 100 * 6 * v / *tolerance })
		r.OfTolerance = &shares
		if err := allFinite(shares.pointers()...); err != nil {
			return err
		}
	}
	r.CategoriesUncut = 1.41 * r.PartSD / r.Gauge
	var err error
	if r.Categories, err = categories(r.PartSD / r.Gauge); err != nil {
		return err
	}
	return allFinite(append(sd.pointers(), &r.CategoriesUncut)...)
}

// RangeOnly is the quick study: each part is measured once by each appraiser, or so
// many times by one gauge, and only the ranges are looked at.
type RangeOnly struct {
	MeanRange float64
	Factor    float64 // by which the mean range is divided
	Gauge     float64 // s.d. of the gauge
}

// QuickRange divides the mean range of readings[part] by d2* for so many parts, the
// form for a few parts; at least one part with at least two readings, all parts alike.
//
// Source: as CrossByRange.
func QuickRange(readings [][]float64) (RangeOnly, error) {
	mean, n, err := meanRange(readings)
	if err != nil {
		return RangeOnly{}, err
	}
	star, err := D2Star(n, len(readings))
	if err != nil {
		return RangeOnly{}, err
	}
	return RangeOnly{mean, star, mean / star}, nil
}

// RangeOverD2 divides the mean range of readings[part] by d2, which is unbiased for
// sigma; the form for many parts. Conditions are those of QuickRange.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 8.7.
func RangeOverD2(readings [][]float64) (RangeOnly, error) {
	mean, n, err := meanRange(readings)
	if err != nil {
		return RangeOnly{}, err
	}
	d2, err := factor.D2(n)
	if err != nil {
		return RangeOnly{}, err
	}
	return RangeOnly{mean, d2, mean / d2}, nil
}

func meanRange(readings [][]float64) (mean float64, n int, err error) {
	if len(readings) == 0 {
		return 0, 0, invalid("there are no parts")
	}
	n = len(readings[0])
	if n < 2 {
		return 0, 0, invalid("each part must be measured at least twice, part 1 was measured %d times", n)
	}
	if float64(n)*float64(len(readings)) > MaxReadings {
		return 0, 0, invalid("a study has at most %d readings", MaxReadings)
	}
	for i, part := range readings {
		if len(part) != n {
			return 0, 0, invalid("all parts must be measured equally often: part 1 %d times, part %d %d times", n, i+1, len(part))
		}
		for k, x := range part {
			if err := readingOK(x, "reading %d of part %d", k+1, i+1); err != nil {
				return 0, 0, err
			}
		}
		mean += (slices.Max(part) - slices.Min(part)) / float64(len(readings))
	}
	if mean == 0 {
		return 0, 0, invalid("repeated readings never differ: the gauge reads too coarsely to be judged by this study")
	}
	return mean, n, nil
}
