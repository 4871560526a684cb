package relay

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"strconv"
	"strings"
	"time"
)

// Poster sends what waits in a spool to the server.
type Poster struct {
	Spool  *Spool
	Server string                 // https://host:port
	Token  func() (string, error) // asked for each message, so that a new one counts at once
	HTTP   *http.Client
	Now    func() time.Time
	Log    *slog.Logger
	Pause  time.Duration // after the first failure; it doubles up to a minute

	later  map[string]putOff
	inARow int // messages that were put off one after another
}

// putOff is a message that the server does not take now, while it may take others.
type putOff struct {
	until time.Time
	pause time.Duration
}

const (
	longestPause = time.Minute
	longestAsked = 10 * time.Minute // that a server may ask us to wait
	// mostPutOff is how many messages in a row are put off before the server itself is
	// believed to be in trouble.
	mostPutOff = 3
)

// outcome is what became of one attempt.
type outcome int

const (
	taken   outcome = iota
	never           // the server will not take this, however often it is sent
	notThis         // not this message, now
	nothing         // nothing at all, now
)

// Run sends until ctx ends.
func (p *Poster) Run(ctx context.Context) {
	p.later = map[string]putOff{}
	pause := p.Pause
	for ctx.Err() == nil {
		m, ok := p.next()
		if !ok {
			p.wait(ctx)
			continue
		}
		a := p.post(ctx, m)
		if ctx.Err() != nil {
			return
		}
		if a.outcome == never {
			a = p.putAside(m, a)
		}
		switch a.outcome {
		case taken, never:
			if a.outcome == taken {
				p.Spool.Done(m.ID)
			}
			delete(p.later, m.ID)
			pause, p.inARow = p.Pause, 0
			continue
		case notThis:
			l := p.later[m.ID]
			l.pause = min(max(2*l.pause, p.Pause), longestPause)
			l.until = time.Now().Add(l.pause)
			p.later[m.ID] = l
			p.Log.Warn("the server does not take this now; it is kept and sent again, and the rest goes on", "id", m.ID, "status", a.Status, "says", a.Says, "again in", l.pause)
			if p.inARow++; p.inARow < mostPutOff {
				continue
			}
		case nothing:
			told, level := "the server could not be given what waits; it is kept and sent again", slog.LevelWarn
			if a.Status == http.StatusUnauthorized {
				told, level = "the token of this sender is worth nothing: enrol it again and put the new token into its file; what waits is kept", slog.LevelError
			}
			p.Log.Log(ctx, level, told, "waiting", p.Spool.Len(), "again in", max(pause, a.wait), "status", a.Status, "says", a.Says)
		}
		select {
		case <-ctx.Done():
		case <-time.After(max(pause, a.wait)):
		}
		pause = min(2*pause, longestPause)
	}
}

// next is what is sent next: what was not tried yet before what was put off, or that would
// hold up the rest; of that, the one whose time came first.
func (p *Poster) next() (Message, bool) {
	if m, ok := p.Spool.Next(func(id string) bool { _, was := p.later[id]; return was }); ok {
		return m, true
	}
	first, ok := p.firstPutOff()
	if !ok || time.Now().Before(p.later[first].until) {
		return Message{}, false
	}
	return p.Spool.Next(func(id string) bool { return id != first })
}

func (p *Poster) firstPutOff() (first string, ok bool) {
	for id, l := range p.later {
		if !ok || l.until.Before(p.later[first].until) {
			first, ok = id, true
		}
	}
	return first, ok
}

// wait waits for something to send: new, or put off until now.
func (p *Poster) wait(ctx context.Context) {
	var due <-chan time.Time
	if first, ok := p.firstPutOff(); ok {
		due = time.After(time.Until(p.later[first].until))
	}
	select {
	case <-ctx.Done():
	case <-p.Spool.More():
	case <-due:
	}
}

// answer is what an attempt came to.
type answer struct {
	outcome
	Refusal
	kept string        // what the server says that it kept
	wait time.Duration // that the server asks for
}

// putAside keeps for a person what the server will never take, and tells the station of
// what the server did not keep itself.
func (p *Poster) putAside(m Message, a answer) answer {
	var instead *Message
	if a.kept == "" && m.Path != "lines" {
		instead = p.lineAbout(m, a.Refusal)
	}
	if err := p.Spool.Refuse(m, a.Refusal, p.Now(), instead); err != nil {
		p.Log.Error("what the server refused could not be put aside; it stays in the spool", "id", m.ID, "error", err)
		a.outcome = notThis
		return a
	}
	p.Log.Error("refused; it is put aside for a person", "id", m.ID, "status", a.Status, "says", a.Says, "file", p.Spool.RefusedFile(),
		"the station is told", a.kept == "station" || instead != nil)
	return a
}

// lineAbout is what the station is shown of a message that was refused. It goes to the
// station that the message names; one that there is not cannot be told.
func (p *Poster) lineAbout(m Message, why Refusal) *Message {
	var of struct {
		Station string `json:"station"`
	}
	_ = json.Unmarshal(m.Body, &of) // one that names none is of the sender's own
	line, body := newNumber(), map[string]any{"why": "refused", "line": fmt.Sprintf("%s %s: %d %s", m.Path, m.ID, why.Status, why.Says), "at": p.Now().Format(time.RFC3339Nano)}
	body["id"] = line
	if of.Station != "" {
		body["station"] = of.Station
	}
	b, err := json.Marshal(body)
	if err != nil {
		return nil
	}
	return &Message{ID: line, Path: "lines", Body: b}
}

// post sends one message.
func (p *Poster) post(ctx context.Context, m Message) answer {
	failed := func(err error) answer { return answer{outcome: nothing, Refusal: Refusal{Says: err.Error()}} }
	body := []byte(m.Body)
	if m.Path == "rounds" { // what our clock says at the moment of sending tells the server how wrong it is
		var fields map[string]json.RawMessage
		if err := json.Unmarshal(body, &fields); err == nil && fields != nil {
			fields["sent_at"], _ = json.Marshal(p.Now().Format(time.RFC3339Nano))
			body, _ = json.Marshal(fields)
		}
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, strings.TrimRight(p.Server, "/")+"/api/v1/"+m.Path, bytes.NewReader(body))
	if err != nil {
		return failed(err)
	}
	token := ""
	if p.Token != nil {
		if token, err = p.Token(); err != nil {
			return failed(err)
		}
	}
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set("Authorization", "Bearer "+token)
	res, err := p.HTTP.Do(req)
	if err != nil {
		return failed(err)
	}
	defer res.Body.Close()
	said, err := io.ReadAll(io.LimitReader(res.Body, 64<<10))
	if err != nil {
		return failed(err)
	}
	a := answer{Refusal: Refusal{Status: res.StatusCode, Says: res.Status}, kept: res.Header.Get("Holdfast-Kept")}
	var told struct {
		Verdict string
		Error   struct{ Kind, Message string }
	}
	_ = json.Unmarshal(said, &told) // of a proxy it is something else
	if told.Error.Message != "" {
		a.Says = told.Error.Message
	}
	if s, err := strconv.Atoi(res.Header.Get("Retry-After")); err == nil && s > 0 {
		a.wait = min(time.Duration(s)*time.Second, longestAsked)
	}
	a.outcome = mean(res.StatusCode, told.Error.Kind != "")
	if a.outcome == taken {
		p.sayTaken(m, told.Verdict)
	}
	return a
}

// sayTaken says what the server took: a line that is no reading is on no chart.
func (p *Poster) sayTaken(m Message, verdict string) {
	var of struct{ Line, Why string }
	switch {
	case m.Path != "lines":
		p.Log.Info("taken", "id", m.ID, "verdict", verdict)
	case json.Unmarshal(m.Body, &of) == nil && of.Why == errRefused.Error():
		p.Log.Info("the station is told what was refused", "line", of.Line)
	default:
		p.Log.Warn("not a reading; the station is told", "line", of.Line, "why", of.Why)
	}
}

// mean says what a status means for the message. ours tells an answer of Holdfast from one
// of something before it: that a proxy finds nothing at an address says nothing about what
// was sent there.
func mean(status int, ours bool) outcome {
	switch {
	case status == http.StatusOK:
		return taken
	case status == http.StatusRequestEntityTooLarge: // whoever says so will go on saying so
		return never
	case status == http.StatusUnauthorized, status == http.StatusRequestTimeout, status == http.StatusMisdirectedRequest,
		status == http.StatusTooEarly, status == http.StatusTooManyRequests, status == http.StatusProxyAuthRequired:
		return nothing
	case status == http.StatusForbidden, status == http.StatusInternalServerError:
		return notThis
	case status >= 400 && status < 500 && ours:
		return never
	case status >= 400 && status < 500:
		return notThis
	}
	return nothing
}
