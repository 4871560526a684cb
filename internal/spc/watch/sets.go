package watch

import "holdfast/internal/spc/limits"

// WesternElectric returns the four zone rules of the Statistical Quality Control
// Handbook.
//
// Source: Western Electric Company (1956), Statistical Quality Control Handbook;
// the window of 8 on one side is theirs.
func WesternElectric() []Rule {
	return []Rule{
		{Kind: Beyond, Z: 3},
		{Kind: KOfM, K: 2, M: 3, Z: 2},
		{Kind: KOfM, K: 4, M: 5, Z: 1},
		{Kind: OneSide, M: 8},
	}
}

// Nelson returns the eight rules of Nelson, in the order of the paper.
//
// Source: L. S. Nelson (1984), "The Shewhart Control Chart: Tests for Special
// Causes", Journal of Quality Technology 16(4), 237-239.
func Nelson() []Rule {
	return []Rule{
		{Kind: Beyond, Z: 3},
		{Kind: OneSide, M: 9},
		{Kind: RisingOrFalling, M: 6},
		{Kind: Alternating, M: 14},
		{Kind: KOfM, K: 2, M: 3, Z: 2},
		{Kind: KOfM, K: 4, M: 5, Z: 1},
		{Kind: Within, M: 15, Z: 1},
		{Kind: Outside, M: 8, Z: 1},
	}
}

// Defaults returns the rules a chart starts with when nobody has chosen others,
// for subgroups of nominal size n.
//
//   - Means, medians and individuals, whose statistic is near normal: the Western
//     Electric set.
//   - Ranges and standard deviations of at least four readings, and counts: beyond
//     and 8 on one side.
//   - Moving ranges and the spread of two or three readings: beyond alone. They
//     are so skewed that 8 on one side would alarm every 94 moving ranges and every
//     171 ranges of two, against 370 wanted.
//   - Rare events (g, t): beyond alone. EWMA, CUSUM and T-squared have limits of
//     their own and no rules.
//
// A chart without a dispersion chart gets none for it.
func Defaults(chart limits.Chart, n int, dispersion bool) []Rule {
	beyond := Rule{Kind: Beyond, Z: 3}
	oneSide := Rule{Kind: OneSide, M: 8}
	if dispersion {
		switch chart.DispersionStatistic() {
		case "":
			return nil
		case "moving-range":
			return []Rule{beyond}
		}
		if n < 4 {
			return []Rule{beyond}
		}
		return []Rule{beyond, oneSide}
	}
	switch chart {
	case limits.P, limits.NP, limits.C, limits.U, limits.LaneyP, limits.LaneyU:
		return []Rule{beyond, oneSide}
	case limits.G, limits.T:
		return []Rule{beyond}
	case limits.EWMA, limits.CUSUM, limits.TSquared:
		return nil
	}
	return WesternElectric()
}
