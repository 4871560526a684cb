package gauge

import (
	"math"

	"holdfast/internal/spc/dist"
)

// Agreement is the result of a study of appraisers who sort by attributes.
type Agreement struct {
	Items, Raters int
	// Fleiss is the kappa of all raters together.
	Fleiss float64
	// Cohen[i][j] is the unweighted kappa of raters i and j, 1 on the diagonal; nil
	// where both gave every item the same single label, which tells nothing.
	Cohen [][]*float64
}

// Agree computes the kappas of ratings[item][rater]; labels may be anything. At least
// one item and two raters are needed, and two labels in use.
//
//	κ = (observed - chance)/(1 - chance)
//
// Source: Cohen, Educational and Psychological Measurement 20 (1960), 37-46; Fleiss,
// Psychological Bulletin 76 (1971), 378-382.
func Agree(ratings [][]string) (Agreement, error) {
	if len(ratings) == 0 {
		return Agreement{}, invalid("there are no items")
	}
	raters := len(ratings[0])
	if raters < 2 {
		return Agreement{}, invalid("at least two raters are needed, got %d", raters)
	}
	if float64(raters)*float64(len(ratings)) > MaxReadings || raters > 200 {
		return Agreement{}, invalid("a study has at most 200 raters and %d ratings", MaxReadings)
	}
	number := map[string]int{}
	labelled := make([][]int, len(ratings))
	for i, item := range ratings {
		if len(item) != raters {
			return Agreement{}, invalid("every rater must rate every item: item 1 has %d ratings, item %d has %d", raters, i+1, len(item))
		}
		labelled[i] = make([]int, raters)
		for j, label := range item {
			k, ok := number[label]
			if !ok {
				k = len(number)
				number[label] = k
			}
			labelled[i][j] = k
		}
	}
	if len(number) < 2 {
		return Agreement{}, invalid("every rating is the same: kappa says nothing about such a study")
	}
	if len(number) > 1000 {
		return Agreement{}, invalid("at most 1000 different labels are taken, got %d", len(number))
	}
	a := Agreement{Items: len(ratings), Raters: raters, Fleiss: fleiss(labelled, len(number))}
	a.Cohen = make([][]*float64, raters)
	for i := range a.Cohen {
		a.Cohen[i] = make([]*float64, raters)
		a.Cohen[i][i] = some(1)
	}
	for i := range raters {
		for j := range i {
			k := cohenOf(labelled, i, j, len(number))
			a.Cohen[i][j], a.Cohen[j][i] = k, k
		}
	}
	return a, nil
}

func fleiss(labelled [][]int, labels int) float64 {
	items, raters := float64(len(labelled)), float64(len(labelled[0]))
	overall := make([]float64, labels)
	count := make([]float64, labels)
	observed := 0.0
	for _, item := range labelled {
		clear(count)
		for _, k := range item {
			count[k]++
			overall[k]++
		}
		pairs := 0.0
		for _, n := range count {
			pairs += n * (n - 1)
		}
		observed += pairs / (raters * (raters - 1)) / items
	}
	chance := 0.0
	for _, n := range overall {
		p := n / (items * raters)
		chance += p * p
	}
	return (observed - chance) / (1 - chance)
}

func cohenOf(labelled [][]int, a, b, labels int) *float64 {
	first, second := make([]float64, labels), make([]float64, labels)
	same := 0.0
	for _, item := range labelled {
		first[item[a]]++
		second[item[b]]++
		if item[a] == item[b] {
			same++
		}
	}
	return kappa(same, first, second, float64(len(labelled)))
}

// kappa is Cohen's, from the number of equal ratings and each rater's totals.
func kappa(same float64, first, second []float64, n float64) *float64 {
	chance := 0.0
	for k := range first {
		chance += first[k] / n * (second[k] / n)
	}
	if chance >= 1 {
		return nil
	}
	return some((same/n - chance) / (1 - chance))
}

// CohenTable computes Cohen's kappa from a square table of counts, rows by the first
// rater's label, columns by the second's. It fails when both used the same single
// label throughout.
func CohenTable(table [][]int) (float64, error) {
	n := len(table)
	if n < 2 || n > 1000 {
		return math.NaN(), invalid("the table must have 2 to 1000 rows, got %d", n)
	}
	first, second := make([]float64, n), make([]float64, n)
	same, total := 0.0, 0.0
	for i, row := range table {
		if len(row) != n {
			return math.NaN(), invalid("the table must be square: it has %d rows, row %d has %d columns", n, i+1, len(row))
		}
		for j, c := range row {
			if c < 0 || c > 1e9 {
				return math.NaN(), invalid("a count must be 0 to 1e9, got %d in row %d, column %d", c, i+1, j+1)
			}
			v := float64(c)
			first[i] += v
			second[j] += v
			total += v
			if i == j {
				same += v
			}
		}
	}
	if total == 0 {
		return math.NaN(), invalid("the table is empty")
	}
	k := kappa(same, first, second, total)
	if k == nil {
		return math.NaN(), invalid("every rating is the same: kappa says nothing about such a study")
	}
	return *k, nil
}

// Rate is a proportion of trials with its exact 95 % interval.
type Rate struct {
	Value     float64
	Low, High float64
	Of        int // trials
}

// Errors are the rates at which an appraiser judges wrongly; nil where the study had
// no such items. They are the inspection errors of sampling plans.
type Errors struct {
	FalseReject *Rate // conforming items that were rejected
	Miss        *Rate // nonconforming items that were passed
}

// InspectionErrors compares judgements with the truth, item by item: rejected[i] what
// the appraiser said, nonconforming[i] what item i is.
//
// Source: exact interval of a proportion: Clopper and Pearson, Biometrika 26 (1934),
// 404-413.
func InspectionErrors(rejected, nonconforming []bool) (Errors, error) {
	if len(rejected) != len(nonconforming) {
		return Errors{}, invalid("there are %d judgements of %d items", len(rejected), len(nonconforming))
	}
	if len(rejected) == 0 || len(rejected) > MaxReadings {
		return Errors{}, invalid("a study has 1 to %d judgements, got %d", MaxReadings, len(rejected))
	}
	var good, bad, falseRejects, misses int
	for i, r := range rejected {
		switch {
		case nonconforming[i]:
			bad++
			if !r {
				misses++
			}
		default:
			good++
			if r {
				falseRejects++
			}
		}
	}
	var e Errors
	var err error
	if e.FalseReject, err = rate(falseRejects, good); err != nil {
		return Errors{}, err
	}
	e.Miss, err = rate(misses, bad)
	return e, err
}

func rate(k, n int) (*Rate, error) {
	if n == 0 {
		return nil, nil
	}
	r := &Rate{Value: float64(k) / float64(n), High: 1, Of: n}
	var err error
	if k > 0 {
		if r.Low, err = dist.BetaQuantile(0.025, float64(k), float64(n-k+1)); err != nil {
			return nil, err
		}
	}
	if k < n {
		if r.High, err = dist.BetaUpperQuantile(0.025, float64(k+1), float64(n-k)); err != nil {
			return nil, err
		}
	}
	return r, nil
}
