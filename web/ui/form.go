package ui

import (
	"encoding/json"
	"errors"
	"io"
	"mime"
	"net/http"
)

// MaxBody is the most that a request may send, in bytes, unless its route says
// otherwise.
const MaxBody = 1 << 20

// LimitBody refuses bodies of more than limit bytes: at once when the sender says
// how long it is, else when reading goes beyond.
func LimitBody(limit int64) func(http.Handler) http.Handler {
	return func(next http.Handler) http.Handler {
		return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
			if r.ContentLength > limit {
				// The rest is not read; keeping the connection would mean to.
				w.Header().Set("Connection", "close")
				answer(w, r, tooLarge(r))
				return
			}
			if r.Body != nil {
				r.Body = http.MaxBytesReader(w, r.Body, limit)
			}
			next.ServeHTTP(w, r)
		})
	}
}

func tooLarge(r *http.Request) problem {
	t := FrameOf(r).Words
	return problem{Status: http.StatusRequestEntityTooLarge, Kind: "too-large",
		Title: t.T("ui.problem.too-large"), Message: t.T("ui.problem-text.too-large")}
}

func badRequest(r *http.Request, cause error) error {
	if big, ok := errors.AsType[*http.MaxBytesError](cause); ok {
		return &HTTPError{Status: http.StatusRequestEntityTooLarge, Message: FrameOf(r).Words.T("ui.problem-text.too-large"), Err: big}
	}
	return &HTTPError{Status: http.StatusBadRequest, Message: FrameOf(r).Words.T("ui.problem-text.bad-request"), Err: cause}
}

// ParseForm reads the form of a post into r.PostForm, both of the kind that a plain
// form and that a script with FormData sends. A body that is too large or broken is
// an *HTTPError that Handle answers with 413 or 400.
func ParseForm(w http.ResponseWriter, r *http.Request) error {
	kind, _, err := mime.ParseMediaType(r.Header.Get("Content-Type"))
	if err == nil && kind == "multipart/form-data" {
		err = r.ParseMultipartForm(MaxBody)
	} else {
		err = r.ParseForm()
	}
	if err != nil {
		return badRequest(r, err)
	}
	return nil
}

// DecodeJSON reads one JSON value into v, which must be a pointer. Unknown names,
// trailing text and other content types are refused like a broken form.
func DecodeJSON(w http.ResponseWriter, r *http.Request, v any) error {
	if kind, _, err := mime.ParseMediaType(r.Header.Get("Content-Type")); err != nil || kind != "application/json" {
		return &HTTPError{Status: http.StatusUnsupportedMediaType, Message: FrameOf(r).Words.T("ui.problem-text.bad-request"), Err: err}
	}
	dec := json.NewDecoder(r.Body)
	dec.DisallowUnknownFields()
	if err := dec.Decode(v); err != nil {
		return badRequest(r, err)
	}
	if _, err := dec.Token(); err != io.EOF {
		return badRequest(r, errors.New("more than one JSON value"))
	}
	return nil
}
