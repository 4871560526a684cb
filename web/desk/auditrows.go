package desk

import (
	"math"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// auditRow is one adjustment with what it gained.
type auditRow struct {
	When, What, Size, Prompted, Governed, Gain, Total string
	Loss                                              bool
}

// rows lists the adjustments, the newest first.
func (v *auditView) rows(f ui.Format, h plant.History, a plant.AdjustmentAudit) {
	w, s := f.Words, h.State.Setup
	decimals := gainDecimals(a.Items)
	if s.Unit != "" {
		v.Squared = w.T("audit.squared", s.Unit)
	}
	for i := len(a.Items) - 1; i >= 0; i-- {
		it := a.Items[i]
		v.Prompted, v.Unprompted = v.Prompted || it.Change.Prompted, v.Unprompted || !it.Change.Prompted
		if len(v.Rows) == mostAudited {
			continue
		}
		row := auditRow{When: f.Clock(it.Change.HappenedAt), Size: f.WithUnit(f.SignedDecimal(it.Effect.Trimmed(s.Decimals)), s.Unit),
			Prompted: w.T("audit.unprompted"), Governed: f.Count(it.Governed), Loss: it.Gain < 0}
		if it.Change.Prompted {
			row.Prompted = w.T("audit.prompted")
		}
		if k := it.Change; k.Knob != uuid.Nil {
			row.What = w.T("audit.turned", k.KnobName, f.WithUnit(f.SignedDecimal(*k.Turned), k.KnobUnit))
		}
		if it.Governed > 0 {
			row.Gain, row.Total = f.Signed(it.Gain, decimals), f.Signed(it.Total(), decimals)
		}
		v.Rows = append(v.Rows, row)
	}
	if n := len(a.Items); n > mostAudited {
		v.RowsCut = w.T("audit.rows-cut", mostAudited, n)
	}
}

// inUnit is the head of a column with the unit of its figures.
func inUnit(w *words.Printer, head, unit string) string {
	if unit == "" {
		return head
	}
	return w.T("audit.col-in", head, unit)
}

// gainDecimals is how many decimals the column of gains has, the same in all its rows: as
// many as show three figures of its largest.
func gainDecimals(items []plant.AuditedAdjustment) int {
	var most float64
	for _, it := range items {
		if it.Governed > 0 {
			most = max(most, math.Abs(it.Gain))
		}
	}
	return figureDecimals(most)
}
