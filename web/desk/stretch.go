package desk

import (
	"context"
	"net/url"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// LiveStretch is how many of the newest subgroups the live chart shows.
const LiveStretch = 60

// mostSubgroups is the largest count that may be asked for by number. The store clips
// what is asked for by time.
const mostSubgroups = 5000

// span is a stretch that a link names.
type span string

const (
	newest  span = ""
	shift   span = "shift"
	day     span = "day"
	week    span = "week"
	month   span = "month"
	all     span = "all"
	between span = "between"
)

var spans = []span{newest, shift, day, week, month, all}

// asked is the stretch that an address asks for.
type asked struct {
	Span     span
	Last     int // for newest, Before and After
	From, To time.Time
	Before   time.Time // the newest Last before this instant
	After    time.Time // the oldest Last after it

	// As typed, to be shown again.
	FromText, ToText, LastText          string
	FromProblem, ToProblem, LastProblem string
}

// live reports whether it is the stretch that is pushed.
func (a asked) live() bool {
	return a.Span == newest && a.Last == LiveStretch && a.Before.IsZero() && a.After.IsZero()
}

func (a asked) problem() bool { return a.FromProblem != "" || a.ToProblem != "" || a.LastProblem != "" }

const fieldTime = "2006-01-02T15:04"

// parseTime reads what a date-and-time field sends, in the plant's wall time.
func parseTime(text string, zone *time.Location) (time.Time, bool) {
	for _, layout := range []string{fieldTime, "2006-01-02T15:04:05", "2006-01-02 15:04", "2006-01-02"} {
		if t, err := time.ParseInLocation(layout, strings.TrimSpace(text), zone); err == nil && t.Year() >= 1900 && t.Year() < 10000 {
			return t, true
		}
	}
	return time.Time{}, false
}

// readStretch reads the stretch from an address.
func readStretch(q url.Values, f ui.Format, p plant.Plant) asked {
	a := asked{Last: LiveStretch, FromText: q.Get("from"), ToText: q.Get("to"), LastText: q.Get("last")}
	w := f.Words
	if a.LastText != "" {
		n, err := strconv.Atoi(strings.TrimSpace(a.LastText))
		if err != nil || n < 1 || n > mostSubgroups {
			a.LastProblem = w.T("desk.stretch.bad-last", mostSubgroups)
		} else {
			a.Last = n
		}
	}
	switch s := span(q.Get("span")); s {
	case shift:
		_, began := p.ShiftAt(f.Now)
		a.Span, a.From, a.To = s, began, f.Now
	case day:
		a.Span, a.From, a.To = s, f.Now.AddDate(0, 0, -1), f.Now
	case week:
		a.Span, a.From, a.To = s, f.Now.AddDate(0, 0, -7), f.Now
	case month:
		a.Span, a.From, a.To = s, f.Now.AddDate(0, -1, 0), f.Now
	case all:
		a.Span, a.To = s, f.Now
	default:
		a.readBetween(f)
	}
	if t, err := time.Parse(time.RFC3339Nano, q.Get("before")); err == nil {
		a.Span, a.Before = newest, t
	} else if t, err := time.Parse(time.RFC3339Nano, q.Get("after")); err == nil {
		a.Span, a.After = newest, t
	}
	return a
}

func (a *asked) readBetween(f ui.Format) {
	if a.FromText == "" && a.ToText == "" {
		return
	}
	w := f.Words
	a.Span, a.To = between, f.Now
	var ok bool
	if a.FromText == "" {
		a.FromProblem = w.T("desk.stretch.no-from")
	} else if a.From, ok = parseTime(a.FromText, f.Zone); !ok {
		a.FromProblem = w.T("desk.stretch.bad-time")
	}
	if a.ToText != "" {
		if a.To, ok = parseTime(a.ToText, f.Zone); !ok {
			a.ToProblem = w.T("desk.stretch.bad-time")
		} else if a.FromProblem == "" && !a.To.After(a.From) {
			a.ToProblem = w.T("desk.stretch.to-before-from")
		}
	}
}

// read reads the history of the stretch.
func (d *Desk) read(ctx context.Context, id uuid.UUID, a asked) (plant.History, error) {
	switch {
	case !a.After.IsZero():
		return d.readAfter(ctx, id, a)
	case !a.Before.IsZero():
		return d.store.History(ctx, id, plant.Stretch{Last: a.Last, To: a.Before.Add(-time.Microsecond)})
	case a.Span == newest:
		return d.store.History(ctx, id, plant.Stretch{Last: a.Last})
	}
	return d.store.History(ctx, id, plant.Stretch{From: a.From, To: a.To})
}

// readAfter reads the first subgroups after an instant. The record is read backwards,
// so this asks for windows that double until they hold enough, and never for more
// than a few times what is shown.
func (d *Desk) readAfter(ctx context.Context, id uuid.UUID, a asked) (plant.History, error) {
	from := a.After.Add(time.Microsecond)
	for width := 24 * time.Hour; ; width *= 2 {
		to := from.Add(width)
		h, err := d.store.History(ctx, id, plant.Stretch{From: from, To: to})
		if err != nil {
			return h, err
		}
		newestTaken := h.State.LastTaken
		if len(h.Points) >= a.Last || !to.Before(newestTaken) || h.Clipped {
			if len(h.Points) > a.Last && !h.Clipped {
				// What stands around the points is read again for just these.
				return d.store.History(ctx, id, plant.Stretch{From: from, To: h.Points[a.Last-1].TakenAt})
			}
			return h, nil
		}
	}
}

// older and newer are the addresses of the neighbouring stretches, "" where there is
// none to go to.
func (a asked) older(h plant.History, p plant.Plant) url.Values {
	switch {
	case a.Span == all || h.Clipped:
		return nil
	case a.Span == newest:
		if len(h.Points) < a.Last && a.After.IsZero() {
			return nil
		}
		if len(h.Points) == 0 {
			return nil
		}
		return a.page("before", h.Points[0].TakenAt)
	case a.Span == shift:
		_, began := p.ShiftAt(a.From.Add(-time.Second))
		return betweenValues(began, a.From, p.Location)
	}
	return betweenValues(a.From.Add(-a.To.Sub(a.From)), a.From, p.Location)
}

func (a asked) newer(h plant.History, now time.Time, zone *time.Location) url.Values {
	switch {
	case len(h.Points) > 0 && !h.Points[len(h.Points)-1].TakenAt.Before(h.State.LastTaken):
		return nil
	case a.Span == newest && len(h.Points) > 0:
		return a.page("after", h.Points[len(h.Points)-1].TakenAt)
	case a.Span == newest || !a.To.Before(now.Add(-time.Minute)):
		return nil
	}
	return betweenValues(a.To, a.To.Add(a.To.Sub(a.From)), zone)
}

func (a asked) page(name string, t time.Time) url.Values {
	q := url.Values{name: {t.UTC().Format(time.RFC3339Nano)}}
	if a.Last != LiveStretch {
		q.Set("last", strconv.Itoa(a.Last))
	}
	return q
}

func betweenValues(from, to time.Time, zone *time.Location) url.Values {
	return url.Values{"from": {from.In(zone).Format(fieldTime)}, "to": {to.In(zone).Format(fieldTime)}}
}

// values is the stretch as an address has it.
func (a asked) values() url.Values {
	switch {
	case !a.Before.IsZero():
		return a.page("before", a.Before)
	case !a.After.IsZero():
		return a.page("after", a.After)
	case a.Span == between:
		q := url.Values{"from": {a.FromText}}
		if a.ToText != "" {
			q.Set("to", a.ToText)
		}
		return q
	case a.Span != newest:
		return url.Values{"span": {string(a.Span)}}
	case a.Last != LiveStretch:
		return url.Values{"last": {strconv.Itoa(a.Last)}}
	}
	return url.Values{}
}

// withQuery puts a query behind a path.
func withQuery(path string, q url.Values) string {
	if len(q) == 0 {
		return path
	}
	return path + "?" + q.Encode()
}
