package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/relay"
)

// measured knows how a characteristic is measured, from what the server says of the station.
type measured struct {
	sending
	station, characteristic string
	client                  *http.Client
	decimals                int       // below 0: not known
	failed                  time.Time // when the server was last asked in vain
}

// asked is what the server says of one characteristic.
type asked struct {
	ID, Name, Machine, Unit string
	Decimals, Size          int
}

// measuring is what relay.Source asks of each number; one sender has one for each
// characteristic, since it remembers what the server said.
func (c sending) measuring(ctx context.Context, client *http.Client, station, characteristic string) func(number string) error {
	m := &measured{sending: c, station: station, characteristic: characteristic, client: client, decimals: -1}
	return func(number string) error { return m.fits(ctx, number) }
}

const (
	askLimit = 3 * time.Second // lines wait meanwhile
	askAgain = 10 * time.Second
)

// fits says why a number can be no reading. The server is asked before a number is
// refused, since the set-up may have changed; while it is silent, what it said last holds,
// and everything fits as long as it has said nothing.
func (m *measured) fits(ctx context.Context, number string) error {
	if m.decimals >= 0 && m.is(number) {
		return nil
	}
	if time.Since(m.failed) > askAgain {
		if c, err := m.ask(ctx); err == nil {
			m.decimals = c.Decimals
		} else {
			m.failed = time.Now()
		}
	}
	if m.decimals < 0 || m.is(number) {
		return nil
	}
	if at := strings.IndexAny(number, ".,"); at >= 0 && len(number)-at-1 > m.decimals {
		return relay.ErrDecimals
	}
	return relay.ErrNumber
}

func (m *measured) is(number string) bool {
	_, err := plant.ParseReading(number, m.decimals)
	return err == nil
}

// errOther is a sender that is told to send something else than the station measures.
var errOther = errors.New("every subgroup would be refused")

// agrees holds what the sender is told against what the server says. An error that is not
// errOther means that the server did not say anything.
func (m *measured) agrees(ctx context.Context, unit string, size int) error {
	c, err := m.ask(ctx)
	switch {
	case err != nil:
		return err
	case c.Unit != unit:
		return fmt.Errorf("%s is measured in %s, and --unit says %s: %w", c.Name, c.Unit, unit, errOther)
	case c.Size != size:
		return fmt.Errorf("%d readings of %s are asked each time, and --size says %d: %w", c.Size, c.Name, size, errOther)
	}
	return nil
}

// ask reads the characteristic from the station.
func (m *measured) ask(ctx context.Context) (asked, error) {
	var none asked
	ctx, cancel := context.WithTimeout(ctx, askLimit)
	defer cancel()
	at := strings.TrimRight(m.Server, "/") + "/api/v1/station"
	if m.station != "" {
		at += "?" + url.Values{"station": {m.station}}.Encode()
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, at, nil)
	if err != nil {
		return none, err
	}
	token, err := readSecret(m.TokenFile)
	if err != nil {
		return none, err
	}
	req.Header.Set("Authorization", "Bearer "+token)
	res, err := m.client.Do(req)
	if err != nil {
		return none, err
	}
	defer res.Body.Close()
	if res.StatusCode != http.StatusOK {
		return none, fmt.Errorf("the server answers %s", res.Status)
	}
	var st struct {
		Machines        []struct{ ID, Name string }
		Characteristics []asked
	}
	if err := json.NewDecoder(res.Body).Decode(&st); err != nil {
		return none, fmt.Errorf("read the station: %w", err)
	}
	machines := map[string]string{}
	for _, one := range st.Machines {
		machines[one.ID] = one.Name
	}
	var found []asked
	var names []string
	for _, c := range st.Characteristics {
		whole := machines[c.Machine] + " / " + c.Name
		names = append(names, whole)
		switch m.characteristic {
		case c.ID, c.Name, whole:
			found = append(found, c)
		}
	}
	switch len(found) {
	case 0:
		return none, fmt.Errorf("the station measures no %q, only %s: %w", m.characteristic, strings.Join(names, ", "), errOther)
	case 1:
		return found[0], nil
	}
	return none, fmt.Errorf("the station measures %q more than once: name it with its machine, of %s: %w", m.characteristic, strings.Join(names, ", "), errOther)
}
