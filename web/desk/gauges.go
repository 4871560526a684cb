package desk

import (
	"net/http"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// gaugesAddress is where the gauges and their checks are seen.
const gaugesAddress = "/desk/gauges"

// checksListed is how many checks of a gauge its history shows.
const checksListed = 200

// gaugeRow is one gauge in the list.
type gaugeRow struct {
	Href, Name, Says, Tone, Symbol, Of, Last, Next string
}

// gaugeHistoryView is one gauge with its checks, newest first.
type gaugeHistoryView struct {
	gaugeRow
	Checks []gaugeCheckRow
}

type gaugeCheckRow struct {
	When, Result, Master, Reading, Note, By string
	Failed                                  bool
}

// listGauges is GET /desk/gauges.
func (d *Desk) listGauges(w http.ResponseWriter, r *http.Request) error {
	list, err := d.store.Gauges(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	var first, rest []gaugeRow // what needs somebody first
	for _, g := range list {
		row := newGaugeRow(f, g)
		if row.Tone == "calm" {
			rest = append(rest, row)
		} else {
			first = append(first, row)
		}
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("reach.gauges-title"))
	shell.Bar = bar(f.Words, uuid.Nil, false, "gauges")
	return ui.Render(w, r, http.StatusOK, gaugesPage(shell, append(first, rest...)))
}

func newGaugeRow(f ui.Format, g plant.GaugeUse) gaugeRow {
	v := gaugeRow{Href: gaugesAddress + "/" + g.ID.String(), Name: g.Name, Last: f.Clock(g.LastCheck), Next: ui.SayDay(f, g.NextCheck)}
	v.Says, v.Tone, v.Symbol = ui.SayGauge(f, g.GaugeNow)
	names := map[uuid.UUID]string{}
	for _, st := range g.Stations {
		names[st.ID] = st.Name
	}
	var of []string
	for _, c := range g.Characteristics {
		of = append(of, f.Words.T("reach.product-of", names[c.StationID], c.Name))
	}
	v.Of = strings.Join(of, "; ")
	return v
}

// showGauge is GET /desk/gauges/{id}.
func (d *Desk) showGauge(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	list, err := d.store.Gauges(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	for _, g := range list {
		if g.ID != id {
			continue
		}
		checks, err := d.store.GaugeChecks(r.Context(), id, checksListed)
		if err != nil {
			return err
		}
		v := gaugeHistoryView{gaugeRow: newGaugeRow(f, g)}
		for _, c := range checks {
			row := gaugeCheckRow{When: f.Clock(c.At), Result: f.Words.T("reach.check-good"), Note: c.Note, By: c.PersonName, Failed: !c.Good}
			if row.Failed {
				row.Result = f.Words.T("reach.check-failed")
			}
			if c.Master != nil {
				row.Master = f.Decimal(*c.Master)
			}
			if c.Reading != nil {
				row.Reading = f.Decimal(*c.Reading)
			}
			v.Checks = append(v.Checks, row)
		}
		shell := ui.ShellFor(r, ui.Desk, g.Name)
		shell.Bar = bar(f.Words, uuid.Nil, false, "gauges")
		return ui.Render(w, r, http.StatusOK, gaugeHistoryPage(shell, v))
	}
	return ui.NotFound(r)
}
