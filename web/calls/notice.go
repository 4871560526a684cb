package calls

import (
	"bytes"
	"context"
	"fmt"
	"strings"

	"github.com/a-h/templ"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// noticeView is what stands on every page of who is called.
type noticeView struct {
	List []callView // oldest first
	More int
	Say  string // for a screen reader; without ages, so that it changes only when the calls do
}

type callView struct {
	Tone, Symbol, Word, Station, Age, Link string
}

// noticeShown is how many calls the notice names.
const noticeShown = 4

func newNotice(f ui.Format, open []plant.OpenCall) noticeView {
	var v noticeView
	var names []string
	for _, o := range open {
		if !o.Calling() {
			continue
		}
		condition := conditionOf(o.Kind)
		c := callView{Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Word: ui.ConditionWord(f.Words, condition),
			Station: o.Station.Name, Age: f.Since(o.Stands()), Link: linkOf(o.Call)}
		names = append(names, f.Words.T("notice.say-one", c.Station, c.Word))
		if len(v.List) < noticeShown {
			v.List = append(v.List, c)
		} else {
			v.More++
		}
	}
	if len(names) > 0 {
		v.Say = f.Words.T("notice.say", strings.Join(names, ", "))
	}
	return v
}

// Fragments renders what the live hub pushes to whoever is called: the notice, the words
// for a screen reader, the link with its count, and the list that is counted.
func Fragments(f ui.Format, open []plant.OpenCall) ([]live.Fragment, error) {
	v := newNotice(f, open)
	var out []live.Fragment
	for _, part := range []struct {
		id string
		templ.Component
	}{
		{"calls-notice", notice(f.Words, v)}, {"calls-say", say(v)}, {"calls-link", ui.CallsLink(f.Words, plant.Waiting(open), true)},
		{openID, openPart(f.Words, newOpenList(f, open))}, // for the page of calls, so that its number is that of the link
	} {
		var b bytes.Buffer
		if err := part.Render(context.Background(), &b); err != nil {
			return nil, fmt.Errorf("render %s: %w", part.id, err)
		}
		out = append(out, live.Fragment{ID: part.id, HTML: b.Bytes()})
	}
	return out, nil
}
