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

// Panel is one of the charts that a standard has.
type Panel uint8

// A group chart judges its lowest stream, the third panel, by the location's rules.
const (
	PanelLocation Panel = iota
	PanelDispersion
	PanelThird
)

// Defaults returns the rules a chart starts with when nobody has chosen others, for
// subgroups of nominal size n and limits at 3 sigma.
func Defaults(chart limits.Chart, n int, dispersion bool) []Rule {
	if dispersion {
		return DefaultsAt(chart, PanelDispersion, n, 0)
	}
	return DefaultsAt(chart, PanelLocation, n, 0)
}

// DefaultsAt is Defaults for any panel and for limits at any multiple of sigma (0:
// limits.DefaultMultiple): the first rule is always beyond the limit that is drawn.
//
//   - Means, medians, individuals, short runs, deviations from a trend and the means
//     of batches, whose statistic is near normal: the Western Electric set.
//   - Ranges and standard deviations of at least four readings, and counts: beyond
//     and 8 on one side.
//   - Moving ranges and the spread of two or three readings: beyond alone. They
//     are so skewed that 8 on one side would alarm every 94 moving ranges and every
//     171 ranges of two, against 370 wanted.
//   - Rare events (g, t) and extremes of streams: beyond alone.
//   - T-squared: beyond its own limit, which has z = 3 at any false-alarm rate. EWMA
//     and CUSUM have limits of their own and no rules.
//
// A chart without the panel gets none for it.
func DefaultsAt(chart limits.Chart, panel Panel, n int, multiple float64) []Rule {
	if multiple == 0 || chart == limits.TSquared {
		multiple = limits.DefaultMultiple
	}
	beyond := Rule{Kind: Beyond, Z: multiple}
	switch panel {
	case PanelLocation:
		switch {
		case chart == limits.EWMA || chart == limits.CUSUM:
			return nil
		case chart == limits.G || chart == limits.T || chart == limits.TSquared || chart == limits.Group:
			return []Rule{beyond}
		case chart.Counts():
			return []Rule{beyond, {Kind: OneSide, M: 8}}
		}
		rules := WesternElectric()
		rules[0] = beyond
		return rules
	case PanelDispersion:
		switch chart {
		case limits.Individuals, limits.ThreeWay:
			return []Rule{beyond}
		case limits.Group: // the widest of several: runs mean nothing
			if n < 2 {
				return nil
			}
			return []Rule{beyond}
		case limits.XBarR, limits.XBarS, limits.MedianR, limits.Trend:
		default:
			return nil
		}
	case PanelThird:
		if chart != limits.ThreeWay {
			return nil
		}
	default:
		return nil
	}
	if n < 4 {
		return []Rule{beyond}
	}
	return []Rule{beyond, {Kind: OneSide, M: 8}}
}
