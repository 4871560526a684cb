package watch

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"math"
	"slices"
)

// Memory is everything the fold of one characteristic remembers. The zero Memory
// is the state just after a boundary: registers empty, the EWMA at the centre, the
// CUSUM at zero or at its head start, no individual to take a moving range from.
// It belongs to the Judge that made it; another standard begins with another zero.
type Memory struct {
	Location, Dispersion State
	EWMA                 EWMAState
	CUSUM                CUSUMState
	Points               uint64  // subgroups judged since the boundary
	previous             float64 // the last individual, where the chart has moving ranges
	individual           bool    // there is one
}

// SameFuture reports whether two memories of one Judge will judge everything to
// come alike. It is == but for the count of points, which a late or a voided
// sample moves for good. What folds behind such a sample can stop here and shift
// the counts.
func (m Memory) SameFuture(o Memory) bool {
	o.Points = m.Points
	return m == o
}

// The bytes of a Memory, version 1:
//
//	1 byte    version
//	uvarint   points since the boundary
//	1 byte    flags: 1 individual kept, 2 and 4 a last point on the location and
//	          the dispersion chart, 8 the CUSUM has started
//	1 byte    last step of the location, and four times that of the dispersion
//	          chart: 1 up, 2 down, 0 neither
//	7 x 8     little-endian IEEE 754: previous individual, last point of the
//	          location and of the dispersion chart, EWMA deviation and variance,
//	          CUSUM high and low
//	twice     for the location, then the dispersion chart: the six words of run
//	          lengths, then one byte how many of the window registers follow (up to
//	          the last that is not zero), all as uvarints
//	4 bytes   little-endian CRC-32 (IEEE) of all before
//
// One memory has one spelling: whatever else decodes is refused.
const memoryVersion = 1

// ErrMemory marks bytes that are no memory of this program.
var ErrMemory = errors.New("stored fold state")

const (
	flagIndividual = 1 << iota
	flagLocation
	flagDispersion
	flagStarted
)

// MarshalBinary writes the memory as versioned bytes, 70 to 100 as a rule.
func (m Memory) MarshalBinary() ([]byte, error) { return m.AppendBinary(nil) }

// AppendBinary appends the memory as versioned bytes.
func (m Memory) AppendBinary(b []byte) ([]byte, error) {
	start := len(b)
	b = append(b, memoryVersion)
	b = binary.AppendUvarint(b, m.Points)
	var flags byte
	for i, set := range [...]bool{m.individual, m.Location.seen, m.Dispersion.seen, m.CUSUM.Started} {
		flags |= byte(bit(set)) << i
	}
	b = append(b, flags, m.Location.step|m.Dispersion.step<<2)
	for _, f := range m.floats() {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(*f))
	}
	for _, s := range [...]*State{&m.Location, &m.Dispersion} {
		for _, word := range s.runs {
			b = binary.AppendUvarint(b, word)
		}
		n := 2 * len(s.windows)
		for n > 0 && s.windows[(n-1)/2][(n-1)%2] == 0 {
			n--
		}
		b = append(b, byte(n))
		for i := range n {
			b = binary.AppendUvarint(b, s.windows[i/2][i%2])
		}
	}
	return binary.LittleEndian.AppendUint32(b, crc32.ChecksumIEEE(b[start:])), nil
}

func (m *Memory) floats() [7]*float64 {
	return [...]*float64{&m.previous, &m.Location.last, &m.Dispersion.last,
		&m.EWMA.Deviation, &m.EWMA.Variance, &m.CUSUM.High, &m.CUSUM.Low}
}

// UnmarshalBinary reads what MarshalBinary wrote, to the last bit. An unknown
// version, damage, and numbers no fold can hold are ErrMemory; the memory is then
// left as it was.
func (m *Memory) UnmarshalBinary(data []byte) error {
	if len(data) == 0 {
		return fmt.Errorf("%w: it is empty", ErrMemory)
	}
	if data[0] != memoryVersion {
		return fmt.Errorf("%w: its version is %d, this program reads version %d", ErrMemory, data[0], memoryVersion)
	}
	damaged := fmt.Errorf("%w: it is damaged", ErrMemory)
	body := len(data) - 4
	if body < 1 || binary.LittleEndian.Uint32(data[body:]) != crc32.ChecksumIEEE(data[:body]) {
		return damaged
	}
	out, ok := decodeMemory(data[1:body])
	if !ok {
		return damaged
	}
	again, err := out.AppendBinary(make([]byte, 0, len(data)))
	if err != nil || !bytes.Equal(again, data) {
		return damaged
	}
	*m = out
	return nil
}

// decodeMemory reads the part between version and checksum.
func decodeMemory(b []byte) (m Memory, ok bool) {
	points, n := binary.Uvarint(b)
	if n <= 0 || len(b) < n+2 {
		return m, false
	}
	flags, steps := b[n], b[n+1]
	b = b[n+2:]
	m.Points = points
	m.individual = flags&flagIndividual != 0
	m.Location.seen = flags&flagLocation != 0
	m.Dispersion.seen = flags&flagDispersion != 0
	m.CUSUM.Started = flags&flagStarted != 0
	m.Location.step, m.Dispersion.step = steps&3, steps>>2&3
	if m.Location.step > stepDown || m.Dispersion.step > stepDown {
		return m, false
	}
	floats := m.floats()
	if len(b) < 8*len(floats) {
		return m, false
	}
	for i, f := range floats {
		*f = math.Float64frombits(binary.LittleEndian.Uint64(b[8*i:]))
	}
	b = b[8*len(floats):]
	if slices.ContainsFunc(floats[:], func(f *float64) bool { return math.IsNaN(*f) || math.IsInf(*f, 0) }) {
		return m, false
	}
	for _, s := range [...]*State{&m.Location, &m.Dispersion} {
		for i := range s.runs {
			if s.runs[i], b, ok = cutUvarint(b); !ok {
				return m, false
			}
		}
		if len(b) == 0 || int(b[0]) > 2*len(s.windows) {
			return m, false
		}
		count := int(b[0])
		b = b[1:]
		for i := range count {
			if s.windows[i/2][i%2], b, ok = cutUvarint(b); !ok {
				return m, false
			}
		}
	}
	return m, len(b) == 0
}

func cutUvarint(b []byte) (v uint64, rest []byte, ok bool) {
	v, n := binary.Uvarint(b)
	if n <= 0 {
		return 0, nil, false
	}
	return v, b[n:], true
}
