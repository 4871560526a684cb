package relay

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"strings"
	"time"
)

// Poster sends what waits in a spool to the server.
type Poster struct {
	Spool  *Spool
	Server string // https://host:port
	Token  string
	HTTP   *http.Client
	Now    func() time.Time
	Log    *slog.Logger
	Pause  time.Duration // after the first failure; it doubles up to a minute
}

const longestPause = time.Minute

// Run sends until ctx ends.
func (p *Poster) Run(ctx context.Context) {
	pause := p.Pause
	for {
		m, ok := p.Spool.Next()
		if !ok {
			select {
			case <-ctx.Done():
				return
			case <-p.Spool.More():
			}
			continue
		}
		err := p.post(ctx, m)
		if err == nil {
			p.Spool.Done(m.ID)
			pause = p.Pause
			continue
		}
		if ctx.Err() != nil {
			return
		}
		p.Log.Warn("the server could not be given what waits; it is kept and sent again", "waiting", p.Spool.Len(), "again in", pause, "error", err)
		select {
		case <-ctx.Done():
			return
		case <-time.After(pause):
		}
		pause = min(2*pause, longestPause)
	}
}

// post sends one message; nil means that it is done: taken, or refused and kept by the
// server for a person.
func (p *Poster) post(ctx context.Context, m Message) error {
	body := []byte(m.Body)
	if m.Path == "rounds" { // what our clock says at the moment of sending tells the server how wrong it is
		var fields map[string]json.RawMessage
		if err := json.Unmarshal(body, &fields); err == nil {
			fields["sent_at"], _ = json.Marshal(p.Now().Format(time.RFC3339Nano))
			body, _ = json.Marshal(fields)
		}
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, strings.TrimRight(p.Server, "/")+"/api/v1/"+m.Path, bytes.NewReader(body))
	if err != nil {
		return err
	}
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set("Authorization", "Bearer "+p.Token)
	res, err := p.HTTP.Do(req)
	if err != nil {
		return err
	}
	defer res.Body.Close()
	told, err := io.ReadAll(io.LimitReader(res.Body, 64<<10))
	if err != nil {
		return err
	}
	var answer struct {
		Verdict string
		Error   struct{ Message string }
	}
	_ = json.Unmarshal(told, &answer) // of a proxy it is something else
	switch {
	case res.StatusCode == http.StatusOK:
		p.Log.Info("taken", "id", m.ID, "verdict", answer.Verdict)
		return nil
	case res.StatusCode == http.StatusConflict || res.StatusCode == http.StatusUnprocessableEntity:
		p.Log.Warn("refused; the server keeps it and the station shows it", "id", m.ID, "says", answer.Error.Message)
		return nil
	}
	return fmt.Errorf("the server answers %s: %s", res.Status, answer.Error.Message)
}
