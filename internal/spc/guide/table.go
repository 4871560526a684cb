package guide

import "holdfast/internal/spc/limits"

// row is one line of the decision table.
type row struct {
	measured Measured
	fits     func(Case) bool
	chart    limits.Chart
	why      string // two sentences
	short    string // the first of them, for parts that share a chart
}

// line makes a row from the two sentences of its reason.
func line(m Measured, chart limits.Chart, fits func(Case) bool, first, second string) row {
	return row{m, fits, chart, first + " " + second, first}
}

// table is read from the top: special structure of the process first, then what is
// asked of the chart, then the size of the subgroup.
var table = []row{
	line(Readings, limits.TSquared, func(c Case) bool { return c.Characteristics > 1 },
		"Several characteristics of one piece move together.",
		"One T-squared chart sees combinations that charts of each alone would pass, at one rate of false alarms."),
	line(Readings, limits.Trend, func(c Case) bool { return c.Wear },
		"The tool wears, so the process is meant to drift between changes.",
		"Limits about the fitted slope, started afresh at each change, tell wear from trouble."),
	line(Readings, limits.Group, func(c Case) bool { return c.Streams > 1 },
		"Several streams are sampled together and may differ from each other.",
		"A group chart plots only the highest and the lowest stream and shows when it is always the same one."),
	line(Readings, limits.Individuals, func(c Case) bool { return c.Batches == Uniform },
		"A batch is uniform, so further readings of it show the gauge and not the process.",
		"Each batch is one value, judged by how it moves from batch to batch."),
	line(Readings, limits.ThreeWay, func(c Case) bool {
		return c.Batches == Nested && c.SubgroupSize > 1 && c.BetweenP != nil && *c.BetweenP < betweenLevel
	},
		"Batch means vary more than the spread within batches explains.",
		"The three-way chart judges batch means by their own moving range and keeps an eye on the spread within."),
	line(Readings, limits.CUSUM, func(c Case) bool { return isSmall(c) && c.ShiftKnown },
		"A small lasting shift of a known size must be caught early.",
		"A CUSUM adds up what single points hide and is tuned to that size."),
	line(Readings, limits.EWMA, isSmall,
		"A small lasting shift must be caught early.",
		"An EWMA remembers the points before and sees it sooner than limits for single points."),
	line(Readings, limits.Individuals, func(c Case) bool { return c.SubgroupSize == 1 },
		"There is one reading at a time.",
		"Its own moving range is the only measure of short-term spread."),
	line(Readings, limits.MedianR, func(c Case) bool {
		return c.ByHand && !c.SizeVaries && c.SubgroupSize%2 == 1 && c.SubgroupSize <= largestForRange
	},
		"Points are worked out by hand from a small odd number of readings.",
		"The middle reading and the range need no arithmetic worth speaking of."),
	line(Readings, limits.XBarS, func(c Case) bool { return c.SizeVaries },
		"The number of readings changes from subgroup to subgroup.",
		"The standard deviation stays comparable where the range would grow with the size."),
	line(Readings, limits.XBarS, func(c Case) bool { return c.SubgroupSize > largestForRange },
		"Subgroups have many readings.",
		"The range would use only two of them, the standard deviation uses all."),
	line(Readings, limits.XBarR, func(Case) bool { return true },
		"There are a few readings in each subgroup.",
		"Their mean shows where the process stands and their range how much it spreads."),

	line(Nonconforming, limits.G, isRare,
		"Nonconforming units are so rare that most subgroups would hold none.",
		"The number of good units between two of them says more than a row of zeros."),
	line(Nonconforming, limits.LaneyP, isOverdispersed,
		"The proportion varies more between subgroups than chance alone explains.",
		"Limits widened by that variation do not take ordinary days for trouble."),
	line(Nonconforming, limits.P, func(c Case) bool { return c.SizeVaries },
		"Units pass or fail and the number inspected changes.",
		"The proportion is comparable between subgroups, and its limits follow their size."),
	line(Nonconforming, limits.NP, func(Case) bool { return true },
		"Units pass or fail in subgroups of constant size.",
		"The plain number of nonconforming units can be plotted as it is counted."),

	line(Nonconformities, limits.T, isRare,
		"Nonconformities are so rare that most subgroups would hold none.",
		"The time or amount between two of them says more than a row of zeros."),
	line(Nonconformities, limits.LaneyU, isOverdispersed,
		"The rate varies more between subgroups than chance alone explains.",
		"Limits widened by that variation do not take ordinary days for trouble."),
	line(Nonconformities, limits.U, func(c Case) bool { return c.SizeVaries },
		"Nonconformities are counted on amounts that change.",
		"The rate per unit is comparable between subgroups, and its limits follow their size."),
	line(Nonconformities, limits.C, func(Case) bool { return true },
		"Nonconformities are counted on the same amount each time.",
		"The plain count can be plotted as it is."),

	line(UnitsBetween, limits.G, func(Case) bool { return true },
		"Events are rare and the good units between them are counted.",
		"Such counts follow the geometric law, whose limits are far from even on both sides."),
	line(TimeBetween, limits.T, func(Case) bool { return true },
		"Events are rare and the time or amount between them is recorded.",
		"Such times follow the exponential law and are judged on a scale that makes them nearly normal."),
}

func isSmall(c Case) bool { return c.SmallShift > 0 && c.SmallShift < small }

func isRare(c Case) bool { return c.EventRate != nil && *c.EventRate < rare }

func isOverdispersed(c Case) bool {
	return c.BetweenSigma != nil && *c.BetweenSigma > overdispersed
}
