package calls

import (
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// Text is what a message about a call says.
type Text struct {
	Title string // one line
	Why   string // what stands, without a full stop
	Mail  string // the whole of a plain-text mail
	JSON  string // the body of a webhook
}

// TextOf writes the messages about a call at the format's now. address is how people
// reach the server, "" when it does not know.
func TextOf(f ui.Format, p plant.Plant, c plant.Call, address string) (Text, error) {
	v := saying(f, c)
	t := Text{Title: v.title, Why: v.why}
	link := ""
	if address != "" {
		link = address + linkOf(c)
	}
	t.Mail = mail(f, p, c, v, link)
	var err error
	t.JSON, err = body(f, p, c, v, link)
	return t, err
}

// said is a call in words.
type said struct{ title, why, since string }

func saying(f ui.Format, c plant.Call) said {
	w, station, name := f.Words, c.Station.Name, c.Characteristic.Title()
	age := f.Age(f.Now.Sub(c.Since))
	if c.Kind == plant.RoundCalls {
		return said{title: w.T("calls.title-round", station, name, f.Clock(c.Since), age), why: w.T("calls.why-round"),
			since: w.T("calls.since-round", f.Clock(c.Since), age)}
	}
	return said{title: w.T("calls.title", ui.ConditionWord(w, conditionOf(c.Kind)), station, name, age), why: whyOf(f, c),
		since: w.T("calls.since", f.Clock(c.Since), age)}
}

// conditionOf is the state that calls so.
func conditionOf(k plant.CallKind) plant.Condition {
	switch k {
	case plant.HoldCalls:
		return plant.IsHold
	case plant.RoundCalls:
		return plant.IsLate
	}
	return plant.IsLook
}

// whyOf says what stands of a matter, the gravest first.
func whyOf(f ui.Format, c plant.Call) string {
	var first, rest []string
	for _, l := range c.Matter.Lines {
		switch words := f.Words.Firing(l.Firing, c.Characteristic.Setup); {
		case l.Withdrawn:
		case l.Panel == plant.Reading:
			first = append(first, words)
		default:
			rest = append(rest, words)
		}
	}
	return strings.Join(append(first, rest...), "; ")
}

// linkOf leads to where the call is answered, for whoever opens it.
func linkOf(c plant.Call) string {
	path := "/board/at/" + c.Station.ID.String() + "/" + c.Characteristic.ID.String()
	if c.Matter != nil {
		path += "/" + c.Matter.ID.String()
	}
	return path
}

func mail(f ui.Format, p plant.Plant, c plant.Call, v said, link string) string {
	w := f.Words
	lines := []string{v.title + ".", "", capital(v.why) + ".", v.since, w.T("calls.where", p.Name, c.Line.Name, c.Station.Name, c.Characteristic.Title()), ""}
	if c.Kind == plant.HoldCalls {
		lines = append(lines, w.T("calls.hold-caution"), "")
	}
	if link != "" {
		lines = append(lines, w.T("calls.open"), link, "")
	} else {
		lines = append(lines, w.T("calls.open-without-link"), "")
	}
	ends := w.T("calls.ends")
	if c.Kind == plant.RoundCalls {
		ends = w.T("calls.ends-round")
	}
	return strings.Join(append(lines, ends, w.T("calls.repetition"), ""), "\n")
}

func capital(s string) string {
	for i, r := range s {
		return strings.ToUpper(string(r)) + s[i+len(string(r)):]
	}
	return s
}

// named is something with an id and a name in the body of a webhook.
type named struct {
	ID   uuid.UUID `json:"id"`
	Name string    `json:"name"`
}

type event struct {
	Type      string    `json:"type"`
	Timestamp time.Time `json:"timestamp"`
	Data      eventData `json:"data"`
}

type eventData struct {
	Call           plant.CallKind `json:"call"`
	Step           plant.Step     `json:"step"`
	Since          time.Time      `json:"since"`
	Minutes        int            `json:"minutes"`
	Title          string         `json:"title"`
	Why            string         `json:"why"`
	Plant          named          `json:"plant"`
	Line           named          `json:"line"`
	Station        named          `json:"station"`
	Characteristic named          `json:"characteristic"`
	Matter         *uuid.UUID     `json:"matter,omitempty"`
	OverdueRound   *uuid.UUID     `json:"overdue_round,omitempty"`
	Address        string         `json:"address,omitempty"`
}

func body(f ui.Format, p plant.Plant, c plant.Call, v said, link string) (string, error) {
	e := event{Type: "call.raised", Timestamp: f.Now.UTC().Truncate(time.Second), Data: eventData{
		Call: c.Kind, Step: c.Step, Since: c.Since.UTC().Truncate(time.Second), Minutes: int(f.Now.Sub(c.Since) / time.Minute), Title: v.title, Why: v.why,
		Plant: named{p.ID, p.Name}, Line: named{c.Line.ID, c.Line.Name}, Station: named{c.Station.ID, c.Station.Name},
		Characteristic: named{c.Characteristic.ID, c.Characteristic.Name}, Address: link,
	}}
	if c.Matter != nil {
		e.Data.Matter = &c.Matter.ID
	} else {
		e.Data.OverdueRound = &c.Overdue.ID
	}
	b, err := json.Marshal(e)
	if err != nil {
		return "", fmt.Errorf("encode a call: %w", err)
	}
	return string(b), nil
}

// Test is a message that only tries the way.
func Test(w *words.Printer, now time.Time) Text {
	t := Text{Title: w.T("calls.test-title"), Why: w.T("calls.test")}
	t.Mail = t.Why + "\n"
	b, err := json.Marshal(struct {
		Type      string            `json:"type"`
		Timestamp time.Time         `json:"timestamp"`
		Data      map[string]string `json:"data"`
	}{"call.test", now.UTC().Truncate(time.Second), map[string]string{"title": t.Title, "why": t.Why}})
	if err != nil {
		panic("calls: text is always JSON")
	}
	t.JSON = string(b)
	return t
}
