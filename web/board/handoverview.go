package board

import (
	"fmt"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// handoverView is the page.
type handoverView struct {
	Heading, When string
	Running       bool // the shift is not over
	Earlier       string
	Later         string // "" on the newest
	Lines         []handoverLink
	Figures       []handoverFigure
	Sections      []lineView
	Causes        causesView
	Root          *rootView
	May           bool
	Shift         string // as forms send it
	BackLine      string
	Problem       string
	Typed         string
}

type handoverLink struct {
	Name, Address string
	Chosen        bool
}

// handoverFigure is one number of the shift, with what makes it up.
type handoverFigure struct {
	Label, Value, Detail string
	Tone                 string // of what must be seen first; "" calm
}

// lineView is one line of the floor.
type lineView struct {
	ID, Name    string
	NoteID      string
	Stations    []stationKeptView
	Open        []handoverMatter
	Contained   []handoverContained
	Gauges      []handoverGauge
	Ended       []handoverMatter
	Corrections []handoverCorrection
	Changes     []handoverChange
	MoreChanges string

	MoreContained string
	Notes         []handoverNote
	Readers       []string
	Over          bool
}

type stationKeptView struct {
	Name, Promised, Good, Late, Open, Missed, Besides string
	Short                                             bool // something was late or missed
}

type handoverMatter struct {
	Address, Station, Name, Why, Age, Opened, Before, Taken, Ended, Quiet string
	Kind                                                                  plant.Condition
}

type handoverContained struct {
	Address, Station, Name, Quantity, Where, Rest, Since string
}

type handoverGauge struct{ Address, Station, Says string }

type handoverCorrection struct{ When, What, Reason string }

type handoverChange struct{ When, Where, What, Note string }

type handoverNote struct{ ID, Text, By, Cleared string }

type rootView struct{ Root, Made string }

type causesView struct {
	Spans  []handoverLink
	Orders []handoverLink
	Rows   []causeView
	None   bool
}

type causeView struct {
	Cause, Count, Out, Share string
	Width                    string // of 100
}

func newHandover(s ui.Shell, c handoverChoice, all []plant.ShiftSummary, closed []plant.Matter, root *plant.DailyRoot) handoverView {
	f, w := s.Format, s.Words
	v := handoverView{
		Heading: f.Day(c.Span.From),
		When:    w.T("handover.when", f.Clock(c.Span.From), f.Time(c.Span.To)),
		Running: !c.Span.Over(f.Now), Shift: c.Span.From.UTC().Format(time.RFC3339),
	}
	if len(s.Plant.Shifts) > 0 {
		v.Heading = w.T("handover.heading", c.Span.Name, v.Heading)
	}
	v.Earlier = c.address(func(c *handoverChoice) { c.Span = s.Plant.SpanAt(c.Span.From.Add(-time.Second)) })
	if !v.Running {
		v.Later = c.address(func(c *handoverChoice) { c.Span = s.Plant.SpanAt(c.Span.To) })
	}
	v.Lines = append(v.Lines, handoverLink{w.T("handover.all-lines"), c.address(func(c *handoverChoice) { c.Line = uuid.Nil }), c.Line == uuid.Nil})
	shown := make([]plant.ShiftSummary, 0, len(all))
	for _, sum := range all {
		v.Lines = append(v.Lines, handoverLink{sum.Line.Name, c.address(func(c *handoverChoice) { c.Line = sum.Line.ID }), c.Line == sum.Line.ID})
		if c.Line == uuid.Nil || c.Line == sum.Line.ID {
			shown = append(shown, sum)
			v.Sections = append(v.Sections, newLineView(f, sum))
		}
	}
	if c.Line != uuid.Nil {
		v.BackLine = c.Line.String()
	}
	v.Figures = handoverFigures(f, shown)
	v.Causes = newCauses(f, c, closed)
	if root != nil {
		v.Root = &rootView{Root: fmt.Sprintf("%x", root.Root), Made: w.T("handover.root-made", f.Date(root.At), f.Time(root.At), root.Chains)}
	}
	return v
}

func handoverFigures(f ui.Format, list []plant.ShiftSummary) []handoverFigure {
	w := f.Words
	var kept plant.Kept
	var opened, taken, closed, open, cases, parts, prompted, unprompted, changes, unstated int
	for _, s := range list {
		kept = kept.Add(s.Kept())
		o, t, c, still := s.Counts()
		opened, taken, closed, open = opened+o, taken+t, closed+c, open+still
		for _, k := range s.Contained {
			cases++
			parts += k.Left()
			if !k.Stated() {
				unstated++
			}
		}
		for _, h := range s.Changes {
			switch {
			case h.Kind != plant.Adjustment:
				changes++
			case h.Prompted:
				prompted++
			default:
				unprompted++
			}
		}
	}
	out := []handoverFigure{
		{Label: w.T("handover.samples"), Value: w.T("handover.of", f.Count(kept.Good+kept.Late), f.Count(kept.Promised)), Detail: w.T("handover.samples-detail", kept.Late, kept.Open, kept.Missed, kept.Besides)},
		{Label: w.T("handover.matters"), Value: f.Count(open), Detail: w.T("handover.matters-detail", opened, taken, closed)},
		{Label: w.T("handover.contained"), Value: f.Count(parts), Detail: w.T("handover.contained-detail", cases, unstated)},
		{Label: w.T("handover.adjustments"), Value: f.Count(prompted + unprompted), Detail: w.T("handover.adjustments-detail", prompted, unprompted, changes)},
	}
	if kept.Open+kept.Missed > 0 {
		out[0].Tone = "due"
	}
	if open > 0 {
		out[1].Tone = "look"
	}
	if cases > 0 {
		out[2].Tone = "hold"
	}
	return out
}

// So much of a line is listed, the oldest first; the rest is counted.
const (
	changesShown   = 40
	containedShown = 15
)

func newLineView(f ui.Format, sum plant.ShiftSummary) lineView {
	w := f.Words
	v := lineView{ID: sum.Line.ID.String(), Name: sum.Line.Name, NoteID: uuid.Must(uuid.NewV7()).String(), Over: sum.Span.Over(f.Now)}
	for _, st := range sum.Stations {
		v.Stations = append(v.Stations, stationKeptView{st.Station.Name, f.Count(st.Promised), f.Count(st.Good), f.Count(st.Late), f.Count(st.Open), f.Count(st.Missed), f.Count(st.Besides), st.Late+st.Open+st.Missed > 0})
	}
	for _, m := range sum.StillOpen() {
		v.Open = append(v.Open, newHandoverMatter(f, m, sum.Until))
	}
	for _, m := range sum.Ended() {
		v.Ended = append(v.Ended, newHandoverMatter(f, m, sum.Until))
	}
	for i, c := range sum.Contained {
		if i == containedShown {
			v.MoreContained = w.T("handover.more-contained", len(sum.Contained)-containedShown)
			break
		}
		row := handoverContained{Address: chartAddress(c.Station.ID, c.Characteristic.ID), Station: c.Station.Name, Name: c.Characteristic.Name, Since: f.Clock(c.OpenedAt)}
		if c.Matter != uuid.Nil && c.MatterClosed.IsZero() {
			row.Address = matterAddress(c.Station.ID, c.Characteristic.ID, c.Matter)
		}
		row.Quantity = w.T("handover.parts", c.Left())
		if !c.Stated() {
			row.Quantity = w.T("handover.not-stated")
		}
		place, tag := c.Where()
		row.Where, row.Rest = strings.Join(nonEmpty(place, tag), ", "), ui.SayRest(f, c)
		v.Contained = append(v.Contained, row)
	}
	for _, g := range sum.Gauges {
		v.Gauges = append(v.Gauges, handoverGauge{stationAddress(g.Station.ID, g.First), g.Station.Name, w.T("handover.gauge", g.Gauge.Name, ui.SayDay(f, g.Gauge.NextCheck))})
	}
	for _, c := range sum.Corrections {
		what := w.T("handover.corrected", len(c.Withdrew), c.StationName, c.Name, f.Clock(c.TakenAt))
		if c.Voided {
			what = w.T("handover.voided", len(c.Withdrew), c.StationName, c.Name, f.Clock(c.TakenAt))
		}
		v.Corrections = append(v.Corrections, handoverCorrection{When: f.Clock(c.RecordedAt), What: what, Reason: c.Reason})
	}
	for i, h := range sum.Changes {
		if i == changesShown {
			v.MoreChanges = w.T("handover.more-changes", len(sum.Changes)-changesShown)
			break
		}
		v.Changes = append(v.Changes, newHandoverChange(f, h))
	}
	for _, n := range sum.Notes {
		row := handoverNote{ID: n.ID.String(), Text: n.Text, By: w.T("handover.by", n.WrittenBy, f.Clock(n.WrittenAt))}
		if !n.ClearedAt.IsZero() {
			row.Cleared = w.T("handover.cleared-by", n.ClearedBy, f.Clock(n.ClearedAt))
		}
		v.Notes = append(v.Notes, row)
	}
	for _, r := range sum.Readers {
		v.Readers = append(v.Readers, w.T("handover.by", r.Name, f.Clock(r.At)))
	}
	return v
}

func nonEmpty(texts ...string) (out []string) {
	for _, t := range texts {
		if t != "" {
			out = append(out, t)
		}
	}
	return out
}

func newHandoverChange(f ui.Format, h plant.ChangeOfShift) handoverChange {
	w := f.Words
	v := handoverChange{When: f.Clock(h.HappenedAt), Where: h.MachineName, Note: h.Note}
	switch {
	case h.Kind == plant.Adjustment && h.Size != nil && h.Prompted:
		v.What = w.T("handover.adjusted-prompted", h.Name, f.WithUnit(f.SignedDecimal(*h.Size), h.Unit))
	case h.Kind == plant.Adjustment && h.Size != nil:
		v.What = w.T("handover.adjusted-unprompted", h.Name, f.WithUnit(f.SignedDecimal(*h.Size), h.Unit))
	default:
		v.What = w.T("handover.change." + string(h.Kind))
	}
	return v
}

// causesShown is how many causes are drawn; the trade looks at the few that make most.
const causesShown = 10

func newCauses(f ui.Format, c handoverChoice, closed []plant.Matter) causesView {
	w := f.Words
	var v causesView
	for _, d := range causeDays {
		name := w.T("handover.causes-shift")
		if d > 0 {
			name = w.T("handover.causes-days", d)
		}
		v.Spans = append(v.Spans, handoverLink{name, c.address(func(c *handoverChoice) { c.Days = d }) + "#causes", c.Days == d})
	}
	v.Orders = []handoverLink{
		{w.T("handover.by-count"), c.address(func(c *handoverChoice) { c.ByTime = false }) + "#causes", !c.ByTime},
		{w.T("handover.by-time"), c.address(func(c *handoverChoice) { c.ByTime = true }) + "#causes", c.ByTime},
	}
	list := plant.Pareto(closed, c.ByTime)
	v.None = len(list) == 0
	weight := func(s plant.CauseShare) float64 {
		if c.ByTime {
			return s.Out.Seconds()
		}
		return float64(s.Count)
	}
	var total, sum float64
	for _, s := range list {
		total += weight(s)
	}
	for i, s := range list {
		if i == causesShown {
			break
		}
		sum += weight(s)
		row := causeView{Cause: s.Cause, Count: f.Count(s.Count), Out: f.Age(s.Out)}
		if total > 0 {
			row.Width = strconv.FormatFloat(100*weight(s)/weight(list[0]), 'f', 1, 64)
			row.Share = w.T("handover.share", f.Number(100*sum/total, 0))
		}
		if weight(list[0]) == 0 {
			row.Width = "0"
		}
		v.Rows = append(v.Rows, row)
	}
	return v
}
