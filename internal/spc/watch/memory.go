package watch

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"math"
	"slices"

	"holdfast/internal/spc/limits"
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
	previous             float64 // the last individual, where the chart has moving ranges; the last instant of an event
	individual           bool    // there is one
	further
}

// further is what only a few kinds of chart remember.
type further struct {
	Third           State            // three-way: the spread within; group: the lowest stream
	wear            float64          // trend: of the last subgroup
	highest, lowest limits.StreamRun // group: which stream has been extreme, how often in a row
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
// Version 2 is for memories of which something further is not zero. Before the
// checksum it adds:
//
//	1 byte    flags: 1 a last point on the third chart; and four times its last step
//	2 x 8     last point of the third chart, wear
//	          the third chart as the two others
//	4 uvarint highest, then lowest stream: its number and how often in a row
//
// One memory has one spelling: whatever else decodes is refused.
const (
	memoryVersion  = 1
	memoryVersion2 = 2
)

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
	version := byte(memoryVersion)
	if m.further != (further{}) {
		version = memoryVersion2
	}
	b = append(b, version)
	b = binary.AppendUvarint(b, m.Points)
	var flags byte
	for i, set := range [...]bool{m.individual, m.Location.seen, m.Dispersion.seen, m.CUSUM.Started} {
		flags |= byte(bit(set)) << i
	}
	b = append(b, flags, m.Location.step|m.Dispersion.step<<2)
	for _, f := range m.floats() {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(*f))
	}
	b = m.Dispersion.appendRegisters(m.Location.appendRegisters(b))
	if version == memoryVersion2 {
		b = m.further.append(b)
	}
	return binary.LittleEndian.AppendUint32(b, crc32.ChecksumIEEE(b[start:])), nil
}

func (s *State) appendRegisters(b []byte) []byte {
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
	return b
}

func (f *further) append(b []byte) []byte {
	b = append(b, byte(bit(f.Third.seen))|f.Third.step<<2)
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(f.Third.last))
	b = binary.LittleEndian.AppendUint64(b, math.Float64bits(f.wear))
	b = f.Third.appendRegisters(b)
	for _, r := range [...]limits.StreamRun{f.highest, f.lowest} {
		b = binary.AppendUvarint(b, uint64(r.Stream))
		b = binary.AppendUvarint(b, uint64(r.Length))
	}
	return b
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
	if data[0] != memoryVersion && data[0] != memoryVersion2 {
		return fmt.Errorf("%w: its version is %d, this program reads versions %d and %d", ErrMemory, data[0], memoryVersion, memoryVersion2)
	}
	damaged := fmt.Errorf("%w: it is damaged", ErrMemory)
	body := len(data) - 4
	if body < 1 || binary.LittleEndian.Uint32(data[body:]) != crc32.ChecksumIEEE(data[:body]) {
		return damaged
	}
	out, ok := decodeMemory(data[0], data[1:body])
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
func decodeMemory(version byte, b []byte) (m Memory, ok bool) {
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
	if b, ok = m.Location.cutRegisters(b); !ok {
		return m, false
	}
	if b, ok = m.Dispersion.cutRegisters(b); !ok {
		return m, false
	}
	if version == memoryVersion2 {
		if b, ok = m.further.cut(b); !ok {
			return m, false
		}
	}
	return m, len(b) == 0
}

func (s *State) cutRegisters(b []byte) (rest []byte, ok bool) {
	for i := range s.runs {
		if s.runs[i], b, ok = cutUvarint(b); !ok {
			return nil, false
		}
	}
	if len(b) == 0 || int(b[0]) > 2*len(s.windows) {
		return nil, false
	}
	count := int(b[0])
	b = b[1:]
	for i := range count {
		if s.windows[i/2][i%2], b, ok = cutUvarint(b); !ok {
			return nil, false
		}
	}
	return b, true
}

func (f *further) cut(b []byte) (rest []byte, ok bool) {
	if len(b) < 17 {
		return nil, false
	}
	f.Third.seen, f.Third.step = b[0]&1 != 0, b[0]>>2
	f.Third.last = math.Float64frombits(binary.LittleEndian.Uint64(b[1:]))
	f.wear = math.Float64frombits(binary.LittleEndian.Uint64(b[9:]))
	if f.Third.step > stepDown || math.IsNaN(f.Third.last) || math.IsInf(f.Third.last, 0) || limits.CheckWear(f.wear) != nil {
		return nil, false
	}
	if b, ok = f.Third.cutRegisters(b[17:]); !ok {
		return nil, false
	}
	for _, r := range [...]*limits.StreamRun{&f.highest, &f.lowest} {
		var stream, length uint64
		if stream, b, ok = cutUvarint(b); !ok {
			return nil, false
		}
		if length, b, ok = cutUvarint(b); !ok {
			return nil, false
		}
		if stream >= MaxStreams || length > MaxWindow || length == 0 && stream != 0 {
			return nil, false
		}
		*r = limits.StreamRun{Stream: int(stream), Length: int(length)}
	}
	return b, true
}

func cutUvarint(b []byte) (v uint64, rest []byte, ok bool) {
	v, n := binary.Uvarint(b)
	if n <= 0 {
		return 0, nil, false
	}
	return v, b[n:], true
}
