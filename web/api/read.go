package api

import (
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"net/http"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// maxText is the most of something unreadable that is kept.
const maxText = 2000

func problemOf(err error) *plant.Error {
	pe, _ := errors.AsType[*plant.Error](err)
	return pe
}

// read decodes the body into v, strictly: a name that is not known is refused, because
// it may be a slip in one that matters. It returns the body, too.
func read(r *http.Request, v any) ([]byte, error) {
	body, err := io.ReadAll(r.Body)
	if err != nil {
		return nil, err
	}
	dec := json.NewDecoder(bytes.NewReader(body))
	dec.DisallowUnknownFields()
	err = dec.Decode(v)
	if err == nil && dec.More() {
		return body, plant.Invalidf("", "Send one JSON value at a time.")
	}
	if err == nil {
		return body, nil
	}
	if wrong, ok := errors.AsType[*json.UnmarshalTypeError](err); ok {
		return body, plant.Invalidf(wrong.Field, "%q is not of the kind that is described at /api/v1. Readings are text.", wrong.Field).Because(err)
	}
	if field, ok := strings.CutPrefix(err.Error(), "json: unknown field "); ok {
		field = strings.Trim(field, `"`)
		field = short(field)
		return body, plant.Invalidf(field, "%q is not described at /api/v1.", field).Because(err)
	}
	return body, plant.Invalidf("", "What was sent is not JSON as it is described at /api/v1.").Because(err)
}

// asText is what is kept of a body that could not be read.
func asText(body []byte) map[string]string {
	text := strings.ReplaceAll(strings.ToValidUTF8(string(body), "\uFFFD"), "\x00", "\uFFFD")
	if len(text) > maxText {
		text = strings.ToValidUTF8(text[:maxText], "")
	}
	return map[string]string{"text": text}
}

// numbered demands the number under which something is sent.
func numbered(id uuid.UUID) error {
	if id == uuid.Nil || id.Version() != 7 {
		return plant.Invalidf("id", "Send a number of your own, a UUID of version 7, and the same one when you send again.")
	}
	return nil
}

// skewOf is how far the sender's clock is behind ours, as told by when it sent.
func skewOf(sent, now time.Time) time.Duration {
	if sent.IsZero() {
		return 0
	}
	return now.Sub(sent).Round(time.Millisecond)
}
