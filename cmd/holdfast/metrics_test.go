package main

import (
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestMetricsAreForTheMonitorOnly(t *testing.T) {
	t.Parallel()
	const token = "a token of some length"
	file := filepath.Join(t.TempDir(), "token")
	if err := os.WriteFile(file, []byte(token+"\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	short := filepath.Join(t.TempDir(), "short")
	if err := os.WriteFile(short, []byte("short\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	for name, bad := range map[string]monitor{
		"open to the network": {MetricsAddr: "0.0.0.0:0"},
		"no such token":       {MetricsToken: file + ".not"},
		"a short token":       {MetricsToken: short},
	} {
		if w, err := bad.prepare(); err == nil {
			w.listener.Close()
			t.Errorf("%s: accepted", name)
		}
	}
	own, err := monitor{MetricsAddr: "127.0.0.1:0", MetricsToken: file}.prepare()
	if err != nil {
		t.Fatal(err)
	}
	r := serveWith(t, func(s *settings) { s.Metrics = own })
	r.MustRecord(t, r.Diameter, 14990, 14991, 14992, 14990, 14991) // by another way: it is not this store's
	for _, url := range []string{r.url, "http://" + own.listener.Addr().String()} {
		if res, body := fetch(t, http.DefaultClient, url+"/metrics"); res.StatusCode != http.StatusUnauthorized || strings.Contains(body, "holdfast_") {
			t.Errorf("%s without a token: %s", url, res.Status)
		}
		req, err := http.NewRequest(http.MethodGet, url+"/metrics", nil)
		if err != nil {
			t.Fatal(err)
		}
		req.Header.Set("Authorization", "Bearer "+token)
		res, err := http.DefaultClient.Do(req)
		if err != nil {
			t.Fatal(err)
		}
		res.Body.Close()
		if res.StatusCode != http.StatusOK {
			t.Errorf("%s with the token: %s", url, res.Status)
		}
	}
	plain := serve(t)
	if res, _ := fetch(t, http.DefaultClient, plain.url+"/metrics"); res.StatusCode != http.StatusNotFound {
		t.Errorf("metrics that nobody asked for: %s", res.Status)
	}
}
