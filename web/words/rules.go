package words

import (
	"strconv"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
)

// Rule says what a run rule looks for, on one side where side is high or low:
// "2 of 3 beyond 2 sigma, high side".
func (p *Printer) Rule(r watch.Rule, side plant.Side) string {
	key := "ui.rule." + string(r.Kind)
	if side == plant.High || side == plant.Low {
		if sided := key + "." + string(side); p.Has(sided) {
			key = sided
		}
	}
	if !p.Has(key) {
		return p.T("ui.rule.unknown")
	}
	return p.T(key, p.Number(strconv.FormatFloat(r.Z, 'g', -1, 64)), r.K, r.M)
}

// RuleKey says the rule that a firing or a matter's line keeps by its key
// (plant.RuleKey). A key that was written by another version and cannot be read
// is said to be unknown.
func (p *Printer) RuleKey(key string, side plant.Side) string {
	r, err := plant.ParseRuleKey(key)
	if err != nil {
		return p.T("ui.rule.unknown")
	}
	return p.Rule(r, side)
}

// Firing says what a subgroup did: "8 on the low side", "spread: beyond 3 sigma,
// high side", "outside specification, above the upper limit", "its gauge failed the
// check". A change for the better under this set-up says so.
func (p *Printer) Firing(f plant.Firing, s plant.Setup) string {
	switch f.Panel {
	case plant.Reading:
		return p.T("ui.outside." + string(f.Side))
	case plant.GaugeCheck:
		return p.T("ui.gauge-failed")
	}
	said := p.RuleKey(f.Rule, f.Side)
	if f.Panel == plant.Dispersion {
		said = p.T("ui.rule.spread", said)
	}
	if f.Better(s) {
		said = p.T("ui.firing-better", said)
	}
	return said
}
