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
)

// measured knows with how many decimals a characteristic is measured, from what the server
// says of the station.
type measured struct {
	sending
	station, characteristic string
	client                  *http.Client
	decimals                int       // below 0: not known
	failed                  time.Time // when the server was last asked in vain
}

// measuring is what relay.Source asks of each number; one sender has one for each
// characteristic, since it remembers what the server said.
func (c sending) measuring(ctx context.Context, client *http.Client, station, characteristic string) func(number string) bool {
	m := &measured{sending: c, station: station, characteristic: characteristic, client: client, decimals: -1}
	return func(number string) bool { return m.fits(ctx, number) }
}

const (
	askLimit = 3 * time.Second // lines wait meanwhile
	askAgain = 10 * time.Second
)

// fits reports whether a number can be a reading. The server is asked before a number is
// refused, since the set-up may have changed; while it is silent, what it said last holds,
// and everything fits as long as it has said nothing.
func (m *measured) fits(ctx context.Context, number string) bool {
	if m.decimals >= 0 && m.is(number) {
		return true
	}
	if time.Since(m.failed) > askAgain {
		if n, err := m.ask(ctx); err == nil {
			m.decimals = n
		} else {
			m.failed = time.Now()
		}
	}
	return m.decimals < 0 || m.is(number)
}

func (m *measured) is(number string) bool {
	_, err := plant.ParseReading(number, m.decimals)
	return err == nil
}

// ask reads the decimals from the station.
func (m *measured) ask(ctx context.Context) (int, error) {
	ctx, cancel := context.WithTimeout(ctx, askLimit)
	defer cancel()
	at := strings.TrimRight(m.Server, "/") + "/api/v1/station"
	if m.station != "" {
		at += "?" + url.Values{"station": {m.station}}.Encode()
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, at, nil)
	if err != nil {
		return 0, err
	}
	token, err := readSecret(m.TokenFile)
	if err != nil {
		return 0, err
	}
	req.Header.Set("Authorization", "Bearer "+token)
	res, err := m.client.Do(req)
	if err != nil {
		return 0, err
	}
	defer res.Body.Close()
	if res.StatusCode != http.StatusOK {
		return 0, fmt.Errorf("the server answers %s", res.Status)
	}
	var st struct {
		Machines        []struct{ ID, Name string }
		Characteristics []struct {
			ID, Name, Machine string
			Decimals          int
		}
	}
	if err := json.NewDecoder(res.Body).Decode(&st); err != nil {
		return 0, fmt.Errorf("read the station: %w", err)
	}
	machines := map[string]string{}
	for _, one := range st.Machines {
		machines[one.ID] = one.Name
	}
	var found []int
	for _, c := range st.Characteristics {
		switch m.characteristic {
		case c.ID, c.Name, machines[c.Machine] + " / " + c.Name:
			found = append(found, c.Decimals)
		}
	}
	if len(found) != 1 {
		return 0, errors.New("the station does not measure this, or more than once")
	}
	return found[0], nil
}
