package ui

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"mime/multipart"
	"net/http"
	"net/http/httptest"
	"regexp"
	"strings"
	"testing"

	"github.com/a-h/templ"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

func rendered(t *testing.T, c templ.Component) string {
	t.Helper()
	var b bytes.Buffer
	if err := c.Render(t.Context(), &b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func mustContain(t *testing.T, text string, parts ...string) {
	t.Helper()
	for _, p := range parts {
		if !strings.Contains(text, p) {
			t.Errorf("%q is not in:\n%.2000s", p, text)
		}
	}
}

func mustNotContain(t *testing.T, text string, parts ...string) {
	t.Helper()
	for _, p := range parts {
		if strings.Contains(text, p) {
			t.Errorf("%q is in:\n%.2000s", p, text)
		}
	}
}

// try runs one handler through Handle and returns its answer and what was logged.
func try(r *http.Request, f func(w http.ResponseWriter, r *http.Request) error) (*httptest.ResponseRecorder, string) {
	var log bytes.Buffer
	w := httptest.NewRecorder()
	Handle(slog.New(slog.NewTextHandler(&log, nil)), f)(w, r)
	return w, log.String()
}

func TestErrorsBecomeTheirAnswers(t *testing.T) {
	t.Parallel()
	hidden := errors.New("select from person: connection refused")
	for _, tc := range []struct {
		err    error
		status int
		says   string
	}{
		{plant.Invalidf("reading", "Reading 3 is not a number."), 422, "Reading 3 is not a number."},
		{&plant.Error{Kind: plant.NotFound, Message: "There is no such station.", Err: hidden}, 404, "There is no such station."},
		{fmt.Errorf("close: %w", &plant.Error{Kind: plant.Conflict, Message: "Somebody has closed this already."}), 409, "Somebody has closed this already."},
		{&plant.Error{Kind: plant.Forbidden, Message: "Not yours."}, 403, "Not yours."},
		{&HTTPError{Status: 415, Message: "Not this kind.", Err: hidden}, 415, "Not this kind."},
	} {
		w, log := try(httptest.NewRequest("GET", "/x", nil), func(http.ResponseWriter, *http.Request) error { return tc.err })
		if w.Code != tc.status {
			t.Errorf("%v: status %d, want %d", tc.err, w.Code, tc.status)
		}
		mustContain(t, w.Body.String(), tc.says, `data-testid="problem"`, "<!doctype html>")
		mustNotContain(t, w.Body.String(), "connection refused")
		if log != "" {
			t.Errorf("%v: what a person can mend was logged as a fault: %s", tc.err, log)
		}
	}
}

func TestFaultsShowAReferenceThatStandsInTheLog(t *testing.T) {
	t.Parallel()
	for _, err := range []error{errors.New("password=hunter2 in a driver's error"), &plant.Error{Kind: 99, Message: "of no kind"}, &HTTPError{Status: 503, Message: "inner"}} {
		r := httptest.NewRequest("GET", "/x?secret=1", nil)
		w, log := try(WithFrame(r, Frame{RequestID: "REQ7"}), func(http.ResponseWriter, *http.Request) error { return err })
		if w.Code != 500 {
			t.Fatalf("status %d", w.Code)
		}
		ref := regexp.MustCompile(`ref ([0-9A-Z]{5})`).FindStringSubmatch(w.Body.String())
		if ref == nil {
			t.Fatalf("no reference in %s", w.Body)
		}
		mustContain(t, log, "ref="+ref[1], "request=REQ7", "path=/x", "level=ERROR")
		mustNotContain(t, log, "secret=1")
		mustNotContain(t, w.Body.String(), "hunter2", "driver", "of no kind", "inner")
		if strings.Count(log, "\n") != 1 {
			t.Errorf("%d lines in the log, want 1", strings.Count(log, "\n"))
		}
	}
}

func TestWhoIsGoneIsNoFault(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	_, log := try(httptest.NewRequest("GET", "/x", nil).WithContext(ctx), func(http.ResponseWriter, *http.Request) error {
		return fmt.Errorf("read: %w", context.Canceled)
	})
	if log != "" {
		t.Errorf("logged: %s", log)
	}
}

func TestScriptsAndProgramsGetTheMessageAlone(t *testing.T) {
	t.Parallel()
	fail := func(http.ResponseWriter, *http.Request) error { return plant.Invalidf("size", "Say how far <b>.") }
	r := httptest.NewRequest("POST", "/x", nil)
	r.Header.Set("Sec-Fetch-Dest", "empty")
	w, _ := try(r, fail)
	if got := w.Body.String(); got != `<p class="message" role="alert">Say how far &lt;b&gt;.</p>` {
		t.Errorf("a script gets %q", got)
	}
	r = httptest.NewRequest("POST", "/x", nil)
	r.Header.Set("Accept", "application/json")
	w, _ = try(r, fail)
	var got struct {
		Error struct{ Kind, Message, Field, Ref string }
	}
	if err := json.Unmarshal(w.Body.Bytes(), &got); err != nil || w.Code != 422 || got.Error.Kind != "invalid" || got.Error.Field != "size" || got.Error.Message != "Say how far <b>." {
		t.Errorf("a program gets %d %s (%v)", w.Code, w.Body, err)
	}
}

func TestAPageThatCannotBeRenderedIsWhollyAFault(t *testing.T) {
	t.Parallel()
	half := templ.ComponentFunc(func(_ context.Context, w io.Writer) error {
		_, _ = io.WriteString(w, "<p>half a page")
		return errors.New("ran out")
	})
	w, log := try(httptest.NewRequest("GET", "/x", nil), func(w http.ResponseWriter, r *http.Request) error {
		return Render(w, r, http.StatusOK, half)
	})
	if w.Code != 500 {
		t.Errorf("status %d", w.Code)
	}
	mustNotContain(t, w.Body.String(), "half a page")
	mustContain(t, log, "ran out")
}

func TestFormsThatAreTooLargeOrBroken(t *testing.T) {
	t.Parallel()
	parse := func(w http.ResponseWriter, r *http.Request) error {
		if err := ParseForm(w, r); err != nil {
			return err
		}
		_, err := io.WriteString(w, r.PostForm.Get("reading"))
		return err
	}
	var parts bytes.Buffer
	mw := multipart.NewWriter(&parts)
	_ = mw.WriteField("reading", "14,99")
	_ = mw.Close()
	const form = "application/x-www-form-urlencoded"
	for _, tc := range []struct {
		name, kind, body string
		known            bool // the length is told beforehand
		status           int
	}{
		{"a form", form, "reading=14,99", true, 200},
		{"a form by script", mw.FormDataContentType(), parts.String(), true, 200},
		{"broken escapes", form, "reading=%zz", true, 400},
		{"parts without a boundary", "multipart/form-data", "x", true, 400},
		{"parts cut short", mw.FormDataContentType(), parts.String()[:40], true, 400},
		{"10 MB", form, "reading=" + strings.Repeat("1", 10<<20), true, 413},
		{"10 MB in pieces", form, "reading=" + strings.Repeat("1", 10<<20), false, 413},
		{"10 MB of parts", mw.FormDataContentType(), strings.Replace(parts.String(), "14,99", strings.Repeat("1", 10<<20), 1), false, 413},
	} {
		r := httptest.NewRequest("POST", "/x", strings.NewReader(tc.body))
		r.Header.Set("Content-Type", tc.kind)
		if !tc.known {
			r.ContentLength = -1
		}
		w := httptest.NewRecorder()
		LimitBody(MaxBody)(Handle(slog.New(slog.DiscardHandler), parse)).ServeHTTP(w, r)
		if w.Code != tc.status || tc.status == 200 && w.Body.String() != "14,99" {
			t.Errorf("%s: %d %.80s, want %d", tc.name, w.Code, w.Body, tc.status)
		}
	}
}

func TestJSONIsReadStrictly(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		kind, body string
		status     int
	}{
		{"application/json; charset=utf-8", `{"a":1}`, 200},
		{"application/json", `{"a":1} {}`, 400},
		{"application/json", `{"b":1}`, 400},
		{"application/json", `{"a":1e400}`, 400},
		{"application/json", `{"a":NaN}`, 400},
		{"application/json", ``, 400},
		{"text/plain", `{"a":1}`, 415},
	} {
		r := httptest.NewRequest("POST", "/x", strings.NewReader(tc.body))
		r.Header.Set("Content-Type", tc.kind)
		w, _ := try(r, func(w http.ResponseWriter, r *http.Request) error {
			var v struct{ A float64 }
			return DecodeJSON(w, r, &v)
		})
		if w.Code != tc.status {
			t.Errorf("%s %s: %d, want %d", tc.kind, tc.body, w.Code, tc.status)
		}
	}
}

func TestProblemOfAField(t *testing.T) {
	t.Parallel()
	err := fmt.Errorf("close: %w", plant.Invalidf("cause", "Say what the cause was."))
	w := words.For("en")
	if got := ProblemOf(w, err, "cause"); got != "Say what the cause was." {
		t.Errorf("got %q", got)
	}
	if got := ProblemOf(w, err, "action") + ProblemOf(w, nil, "") + ProblemOf(w, errors.New("x"), ""); got != "" {
		t.Errorf("got %q", got)
	}
}
