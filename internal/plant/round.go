package plant

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/watch"
)

// How far a sender's clock may be from ours before a person has to look.
const (
	MaxAhead = 2 * time.Minute
	MaxBack  = 7 * 24 * time.Hour
)

// Round is one visit as it is sent: the subgroups of all characteristics that were
// taken together at a station. Its id comes from the sender, so that sending it
// again is recognised.
type Round struct {
	ID       uuid.UUID
	Station  uuid.UUID
	DueAt    time.Time // zero when nothing was due
	Occasion Occasion
	TakenRaw time.Time     // by the sender's own clock
	Skew     time.Duration // to be added to it, as measured when sending
	Source   string        // "station", "api"
	Person   uuid.UUID
	Device   uuid.UUID // that sent it by itself; Nil: a page did
	Lot      string    // order or lot that the parts are of; "": what the machine runs
	Entries  []Entry
}

// Entry is the subgroup of one characteristic in a round.
type Entry struct {
	Characteristic uuid.UUID
	SetupVersion   int         // that the sender saw
	Readings       []int64     // in the last decimal
	KeyedBy        []uuid.UUID // one for all, or one a reading; empty: the round's person
	Streams        []uuid.UUID // empty, or one a reading
	Retyped        []Retyped
	ShortReason    string // why there are fewer readings than the plan asks
}

// Retyped keeps the first typing of a reading that was looked at and typed again.
type Retyped struct {
	Index int    `json:"index"`
	First string `json:"first"`
}

// TakenAt is when the round was taken by our clock.
func (r Round) TakenAt() time.Time { return CutTime(r.TakenRaw.Add(r.Skew)) }

// SubgroupID is the id of the subgroup of a characteristic in a round. It is derived
// from both, so that a sender cannot reuse one and a repeated round makes the same.
func SubgroupID(round, characteristic uuid.UUID) uuid.UUID {
	return uuid.NewSHA1(round, characteristic[:])
}

// Clean is the round with its text as it is kept and its entries in the order of their
// characteristics. It shares nothing with r that it changes.
func (r Round) Clean() Round {
	r.TakenRaw = CutTime(r.TakenRaw)
	r.Source, r.Occasion = CleanText(r.Source), Occasion(CleanText(string(r.Occasion)))
	r.Lot = CleanText(r.Lot)
	r.Entries = slices.Clone(r.Entries)
	for i := range r.Entries {
		e := &r.Entries[i]
		e.ShortReason = CleanText(e.ShortReason)
		e.Retyped = slices.Clone(e.Retyped)
		for j := range e.Retyped {
			e.Retyped[j].First = CleanText(e.Retyped[j].First)
		}
	}
	slices.SortFunc(r.Entries, func(a, b Entry) int { return bytes.Compare(a.Characteristic[:], b.Characteristic[:]) })
	return r
}

// Digest tells a repeated send from another round under the same id. It covers what
// was measured, not how the message travelled.
func (r Round) Digest() [32]byte {
	b, err := json.Marshal(struct {
		Station  uuid.UUID
		Occasion Occasion
		TakenRaw time.Time
		Entries  []Entry
		Lot      string `json:",omitempty"`
	}{r.Station, r.Occasion, CutTime(r.TakenRaw), r.Entries, r.Lot})
	if err != nil {
		panic(fmt.Sprintf("a round is always JSON: %v", err)) // ids, integers and text only
	}
	return sha256.Sum256(b)
}

// Check reports what in the round cannot be, before anything about the plant is
// known. Whether the sender's clock can be believed is CheckClock's question.
func (r Round) Check() error {
	if r.ID == uuid.Nil {
		return Invalidf("id", "The round has no number.")
	}
	if len(r.Entries) == 0 {
		return Invalidf("", "The round holds no readings.")
	}
	if len(r.Entries) > 50 {
		return Invalidf("", "A round holds at most 50 characteristics.")
	}
	if _, err := CleanTextWithin("lot", r.Lot, MaxName); err != nil {
		return err
	}
	seen := make(map[uuid.UUID]bool, len(r.Entries))
	for _, e := range r.Entries {
		if seen[e.Characteristic] {
			return Invalidf("", "The round holds one characteristic twice.")
		}
		seen[e.Characteristic] = true
	}
	return nil
}

// CheckClock refuses a taken-at that cannot be believed; such a round is set aside.
func (r Round) CheckClock(now time.Time) error {
	switch at := r.TakenAt(); {
	case at.After(now.Add(MaxAhead)):
		return Invalidf("taken_at", "This round was taken in the future, says the clock of the tablet. It was set aside for a person.")
	case at.Before(now.Add(-MaxBack)):
		return Invalidf("taken_at", "This round was taken more than 7 days ago, says the clock of the tablet. It was set aside for a person.")
	}
	return nil
}

// CheckAgainst reports what in the entry does not fit the set-up in force.
func (e Entry) CheckAgainst(s Setup) error {
	n := len(e.Readings)
	switch {
	case n == 0:
		return Invalidf("", "Type at least one reading.")
	case n > s.Size:
		return Invalidf("", "There are %d readings where %d are asked.", n, s.Size)
	case n < s.Size && e.ShortReason == "":
		return Invalidf("short", "Say why there are only %d of %d readings.", n, s.Size)
	case len(e.KeyedBy) > 1 && len(e.KeyedBy) != n, len(e.Streams) != 0 && len(e.Streams) != n:
		return Invalidf("", "There must be one person and one stream for each reading.")
	}
	for _, v := range e.Readings {
		if v >= maxUnits || v <= -maxUnits {
			return Invalidf("", "A reading is too large.")
		}
	}
	return nil
}

// Statistics are what is computed from the readings of one subgroup. Sum and Range
// are exact, in the last decimal; SD is in the unit, with divisor N-1, and 0 for one
// reading.
type Statistics struct {
	N        int
	Sum      int64
	Range    int64
	SD       float64
	Decimals int
}

// Summarise computes the statistics of at least one reading.
func Summarise(readings []int64, decimals int) Statistics {
	s := Statistics{N: len(readings), Decimals: decimals}
	first := readings[0]
	low, high := first, first
	var d, dd float64 // sums of differences from the first reading, which keeps them small
	for _, v := range readings {
		s.Sum += v
		low, high = min(low, v), max(high, v)
		x := float64(v - first)
		d += x
		dd += x * x
	}
	s.Range = high - low
	if n := float64(s.N); s.N > 1 && s.Range > 0 {
		if ss := dd - d*d/n; ss > 0 {
			s.SD = math.Sqrt(ss/(n-1)) / float64(pow10[decimals])
		}
	}
	return s
}

// Mean is the mean in the unit.
func (s Statistics) Mean() float64 {
	return float64(s.Sum) / (float64(s.N) * float64(pow10[s.Decimals]))
}

// RangeFloat is the range in the unit.
func (s Statistics) RangeFloat() float64 { return float64(s.Range) / float64(pow10[s.Decimals]) }

// Watch is the subgroup as the fold takes it.
func (s Statistics) Watch() watch.Subgroup {
	return watch.Subgroup{N: s.N, Mean: s.Mean(), Range: s.RangeFloat(), SD: s.SD}
}

// Correction replaces the readings of a subgroup, or voids it, and says why. It
// names the version that it replaces; when the record has moved on since, it is a
// conflict.
type Correction struct {
	Characteristic uuid.UUID
	Subgroup       uuid.UUID
	TakenAt        time.Time
	Replaces       int
	Readings       []int64
	KeyedBy        []uuid.UUID
	ShortReason    string
	Void           bool
	Reason         string
	Person         uuid.UUID
}

// CorrectionReasons is the short list that a correction's reason comes from.
var CorrectionReasons = []string{"typing slip", "wrong part measured", "gauge misread", "wrong characteristic", "measured again"}
