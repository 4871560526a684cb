package plant

import "math/big"

// offShare and offSteps say when a gauge that somebody calls good is asked about: the
// check differs from the master by more than a tenth of the tolerance, the usual 10:1 rule
// of thumb for a gauge and what it measures, or by more than ten steps of its display
// where no tolerance is known. Both are common practice, neither is a verdict.
const (
	offShare = 10
	offSteps = 10
)

// GaugeOff is how far a check of a gauge was from its master.
type GaugeOff struct {
	By        string   // the difference without its sign, with the decimals of the finer of the two
	Tolerance *Decimal // of the narrowest of what it measures that it was held against; nil: the resolution
}

// Off compares what the gauge said with its master. It returns nil where they agree well
// enough, where one of them is not known, or where there is neither a specification with
// both limits among the set-ups of what it measures nor a resolution to compare with.
func (c GaugeCheckRecord) Off(g Gauge, measures []Setup) *GaugeOff {
	if c.Master == nil || c.Reading == nil {
		return nil
	}
	by := new(big.Rat).Sub(c.Reading.rat(), c.Master.rat())
	by.Abs(by)
	off := &GaugeOff{By: by.FloatString(max(c.Reading.Decimals, c.Master.Decimals))}
	var narrowest *big.Rat
	decimals := 0
	for _, s := range measures {
		if s.Lower == nil || s.Upper == nil {
			continue
		}
		if width := new(big.Rat).Sub(s.Upper.rat(), s.Lower.rat()); narrowest == nil || width.Cmp(narrowest) < 0 {
			narrowest, decimals = width, max(s.Lower.Decimals, s.Upper.Decimals)
		}
	}
	var most *big.Rat
	switch {
	case narrowest != nil:
		most = new(big.Rat).Quo(narrowest, big.NewRat(offShare, 1))
		if d, err := ParseDecimal(narrowest.FloatString(decimals)); err == nil {
			off.Tolerance = &d
		}
	case g.Resolution != nil:
		most = new(big.Rat).Mul(g.Resolution.rat(), big.NewRat(offSteps, 1))
	default:
		return nil
	}
	if by.Cmp(most) <= 0 {
		return nil
	}
	return off
}

func (d Decimal) rat() *big.Rat { return big.NewRat(d.Units, pow10[d.Decimals]) }
