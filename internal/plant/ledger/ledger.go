// Package ledger is the record that proves itself: entries of one chain, each
// bound by SHA-256 to the one before it. Every characteristic has a chain and the
// plant has one for everything else. The package seals and verifies; it knows no
// database, and where the heads are kept is not its business.
//
// # Encoding 1
//
// The body is one JSON object in UTF-8 without insignificant white space, its
// keys in the order in which the body types of this package list them, absent
// values left out. Ids are lower-case UUIDs. Times are RFC 3339 in UTC, always
// with six decimals, cut to the microsecond (Postgres keeps no more). Whole numbers
// are JSON numbers; all others are strings in shortest form, so that no reader
// rounds them. Text is in Unicode normalisation form C.
//
// The hash of an entry is SHA-256 over, in this order,
//
//	"holdfast ledger"  15 bytes
//	encoding            2 bytes, big endian
//	chain              16 bytes
//	sequence number     8 bytes, big endian, from 1
//	length of kind      4 bytes, big endian, then the kind in UTF-8
//	length of body      4 bytes, big endian, then the body
//	previous hash      32 bytes, zero for the first entry
//
// An auditor needs nothing but this and a SHA-256 to verify an export. A chain
// proves tampering only against a head that was kept elsewhere: see Root.
package ledger

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"sort"

	"github.com/google/uuid"
)

// Encoding is the number of the encoding that Seal writes.
const Encoding = 1

// Size is the length of a hash in bytes.
const Size = sha256.Size

// Head is where a chain stands: the number and hash of its last entry. The zero
// value is an empty chain.
type Head struct {
	Seq  int64
	Hash [Size]byte
}

// Entry is one link of a chain.
type Entry struct {
	Chain    uuid.UUID
	Seq      int64
	Kind     string
	Encoding int
	Body     []byte
	Previous [Size]byte
	Hash     [Size]byte
}

// Body is the content of an entry; its Kind is stored beside it.
type Body interface{ Kind() string }

// Seal encodes body as the entry after head and returns it with the new head.
func Seal(chain uuid.UUID, head Head, body Body) (Entry, Head, error) {
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(body); err != nil {
		return Entry{}, head, fmt.Errorf("encode ledger body %s: %w", body.Kind(), err)
	}
	e := Entry{
		Chain: chain, Seq: head.Seq + 1, Kind: body.Kind(), Encoding: Encoding,
		Body: bytes.TrimRight(buf.Bytes(), "\n"), Previous: head.Hash,
	}
	e.Hash = e.Digest()
	return e, Head{Seq: e.Seq, Hash: e.Hash}, nil
}

// Digest computes the hash over everything else in the entry.
func (e Entry) Digest() [Size]byte {
	buf := make([]byte, 0, 96+len(e.Kind)+len(e.Body))
	buf = append(buf, "holdfast ledger"...)
	buf = binary.BigEndian.AppendUint16(buf, uint16(e.Encoding))
	buf = append(buf, e.Chain[:]...)
	buf = binary.BigEndian.AppendUint64(buf, uint64(e.Seq))
	buf = binary.BigEndian.AppendUint32(buf, uint32(len(e.Kind)))
	buf = append(buf, e.Kind...)
	buf = binary.BigEndian.AppendUint32(buf, uint32(len(e.Body)))
	buf = append(buf, e.Body...)
	buf = append(buf, e.Previous[:]...)
	return sha256.Sum256(buf)
}

// A Break says where a chain does not hold and how.
type Break struct {
	Chain uuid.UUID
	Seq   int64
	What  string
}

func (b *Break) Error() string {
	return fmt.Sprintf("chain %s breaks at entry %d: %s", b.Chain, b.Seq, b.What)
}

// Verifier walks one chain entry by entry.
type Verifier struct {
	Chain uuid.UUID
	Head  Head
}

// Next checks e against the entries before it. It returns a *Break for the first
// entry that does not hold.
func (v *Verifier) Next(e Entry) error {
	switch {
	case e.Chain != v.Chain:
		return &Break{v.Chain, v.Head.Seq + 1, "an entry of another chain stands here"}
	case e.Seq != v.Head.Seq+1:
		return &Break{v.Chain, v.Head.Seq + 1, fmt.Sprintf("entry %d stands where entry %d belongs", e.Seq, v.Head.Seq+1)}
	case e.Previous != v.Head.Hash:
		return &Break{v.Chain, e.Seq, "it is not bound to the entry before it"}
	case e.Digest() != e.Hash:
		return &Break{v.Chain, e.Seq, "its content does not match its hash"}
	}
	v.Head = Head{Seq: e.Seq, Hash: e.Hash}
	return nil
}

// Root is one hash over all heads of a plant, to be kept outside the box (print,
// mail, backup): SHA-256 over the chains in the order of their ids, each with its
// sequence number (8 bytes, big endian) and hash.
func Root(heads map[uuid.UUID]Head) [Size]byte {
	ids := make([]uuid.UUID, 0, len(heads))
	for id := range heads {
		ids = append(ids, id)
	}
	sort.Slice(ids, func(i, j int) bool { return bytes.Compare(ids[i][:], ids[j][:]) < 0 })
	h := sha256.New()
	h.Write([]byte("holdfast root 1"))
	for _, id := range ids {
		head := heads[id]
		h.Write(id[:])
		var seq [8]byte
		binary.BigEndian.PutUint64(seq[:], uint64(head.Seq))
		h.Write(seq[:])
		h.Write(head.Hash[:])
	}
	return [Size]byte(h.Sum(nil))
}
