package watch_test

import (
	"bytes"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"hash/crc32"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// worn is a memory after a while, and its bytes.
func worn(t testing.TB) (watch.Memory, []byte) {
	t.Helper()
	j := judgeOf(t, fullStandard(limits.Individuals, ruleZoo()[:watch.MaxRules]))
	var m watch.Memory
	for _, g := range history(rand.New(rand.NewPCG(71, 72)), limits.Individuals, 300) {
		j.Step(&m, g)
	}
	raw, err := m.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	return m, raw
}

// wornFurther is a memory of version 2, and its bytes.
func wornFurther(t testing.TB) (watch.Memory, []byte) {
	t.Helper()
	k := kindNamed(t, "group")
	k.standard.LocationRules = ruleZoo()[:watch.MaxRules]
	j := judgeOf(t, k.standard)
	var m watch.Memory
	for _, g := range k.draw(rand.New(rand.NewPCG(73, 74)), 303) {
		j.Step(&m, g)
	}
	raw, err := m.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	return m, raw
}

// Bytes written when there was only version 1, over 40 subgroups of a seeded history:
// they are read, judge on as their history does, and are written again alike.
func TestMemoriesOfVersion1AreStillRead(t *testing.T) {
	t.Parallel()
	for chart, stored := range map[limits.Chart]string{
		limits.XBarR:       "01280e060000000000000000408673ce39e7dc3fc000000000001240cf53585bbebbe33ff2568ca46dc8943f7f33f0adac593040000000000000000082809080801080808080800182808080801000000003010007808080808008060000000003000002ef385a22",
		limits.Individuals: "01280f0900000000000029400000000000000000e00500000000e03fb7e7d4a73f21c73fc1410314c771bc3f000000000000000000000000000000000480808080800880808080800100000000808098808008000000000003000006eb689e24",
	} {
		raw, err := hex.DecodeString(stored)
		if err != nil {
			t.Fatal(err)
		}
		var m, now watch.Memory
		if err := m.UnmarshalBinary(raw); err != nil {
			t.Fatal(err)
		}
		if again, err := m.MarshalBinary(); err != nil || !bytes.Equal(again, raw) {
			t.Errorf("%s: written again as %x, %v", chart, again, err)
		}
		j := judgeOf(t, fullStandard(chart, watch.Nelson()))
		hist := history(rand.New(rand.NewPCG(91, 92)), chart, 40)
		for _, g := range hist {
			j.Step(&now, g)
		}
		if m != now {
			t.Errorf("%s: stored %+v, judged now %+v", chart, m, now)
		}
	}
}

func TestZeroMemoryRoundTrips(t *testing.T) {
	t.Parallel()
	raw, err := watch.Memory{}.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	m, _ := worn(t)
	if err := m.UnmarshalBinary(raw); err != nil || m != (watch.Memory{}) {
		t.Errorf("%v, %+v", err, m)
	}
	if len(raw) > 100 {
		t.Errorf("a fresh memory takes %d bytes", len(raw))
	}
}

func TestAnyDamageIsRefused(t *testing.T) {
	t.Parallel()
	for _, worn := range []func(testing.TB) (watch.Memory, []byte){worn, wornFurther} {
		m, raw := worn(t)
		refused := func(what string, data []byte) {
			got := m
			if err := got.UnmarshalBinary(data); !errors.Is(err, watch.ErrMemory) || got != m {
				t.Errorf("%s: error %v, memory changed %v", what, err, got != m)
			}
		}
		for i := range raw {
			for b := range 8 {
				data := append([]byte(nil), raw...)
				data[i] ^= 1 << b
				refused("a flipped bit", data)
			}
			refused("a cut end", raw[:i])
		}
		refused("a byte too many", append(append([]byte(nil), raw...), 0))
		refused("nothing", nil)
	}
}

// resealed puts a fresh checksum on changed bytes.
func resealed(raw []byte, change func([]byte) []byte) []byte {
	body := change(append([]byte(nil), raw[:len(raw)-4]...))
	return binary.LittleEndian.AppendUint32(body, crc32.ChecksumIEEE(body))
}

func TestNumbersNoFoldCanHoldAreRefused(t *testing.T) {
	t.Parallel()
	_, raw := worn(t)
	points := 1 // bytes of the count, 300 takes two
	for raw[points]&0x80 != 0 {
		points++
	}
	flags := points + 1
	for what, change := range map[string]func([]byte) []byte{
		"an unknown version":             func(b []byte) []byte { b[0] = 3; return b },
		"version 2 without what it adds": func(b []byte) []byte { b[0] = 2; return b },
		"version 2 with nothing to add": func(b []byte) []byte {
			b[0] = 2
			return append(b, make([]byte, 17+6+1+4)...)
		},
		"an unknown flag":    func(b []byte) []byte { b[flags] |= 16; return b },
		"an impossible step": func(b []byte) []byte { b[flags+1] |= 3; return b },
		"a NaN": func(b []byte) []byte {
			binary.LittleEndian.PutUint64(b[flags+2:], math.Float64bits(math.NaN()))
			return b
		},
		"an infinity": func(b []byte) []byte {
			binary.LittleEndian.PutUint64(b[flags+2:], math.Float64bits(math.Inf(-1)))
			return b
		},
		"a longer spelling":     func(b []byte) []byte { return append(append(b[:points:points], b[points]|0x80, 0), b[flags:]...) },
		"bytes after the end":   func(b []byte) []byte { return append(b, 7) },
		"too many registers":    func(b []byte) []byte { b[len(b)-1] = 255; return b },
		"nothing but a version": func(b []byte) []byte { return b[:1] },
	} {
		var m watch.Memory
		if err := m.UnmarshalBinary(resealed(raw, change)); !errors.Is(err, watch.ErrMemory) || m != (watch.Memory{}) {
			t.Errorf("%s: error %v, memory %+v", what, err, m)
		}
	}
	var m watch.Memory
	if err := m.UnmarshalBinary(resealed(raw, func(b []byte) []byte { return b })); err != nil {
		t.Errorf("resealing alone spoils the bytes: %v", err)
	}

	// The last four numbers of version 2: the highest stream and its run, the lowest
	// and its run; here each takes one byte.
	_, raw = wornFurther(t)
	end := len(raw) - 4
	for what, change := range map[string]func([]byte) []byte{
		"version 1 with more": func(b []byte) []byte { b[0] = 1; return b },
		"stream 64":           func(b []byte) []byte { b[end-4] = 64; return b },
		"a run of 64":         func(b []byte) []byte { b[end-3] = 64; return b },
		"a stream without run": func(b []byte) []byte {
			b[end-2], b[end-1] = 3, 0
			return b
		},
		"a cut run": func(b []byte) []byte { return b[:end-1] },
	} {
		var m watch.Memory
		if err := m.UnmarshalBinary(resealed(raw, change)); !errors.Is(err, watch.ErrMemory) || m != (watch.Memory{}) {
			t.Errorf("%s: error %v, memory %+v", what, err, m)
		}
	}
}

func TestWearNoFoldCanHoldIsRefused(t *testing.T) {
	t.Parallel()
	k := kindNamed(t, "trend")
	j := judgeOf(t, k.standard)
	var m watch.Memory
	j.Step(&m, watch.Subgroup{N: 5, Mean: 12.5, Wear: 1234.5})
	raw, err := m.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	at := bytes.Index(raw, binary.LittleEndian.AppendUint64(nil, math.Float64bits(1234.5)))
	if at < 0 {
		t.Fatalf("no wear in %x", raw)
	}
	for _, wear := range []float64{math.NaN(), math.Inf(1), -1, 1e16} {
		var back watch.Memory
		if err := back.UnmarshalBinary(resealed(raw, func(b []byte) []byte {
			binary.LittleEndian.PutUint64(b[at:], math.Float64bits(wear))
			return b
		})); !errors.Is(err, watch.ErrMemory) {
			t.Errorf("a wear of %v: %v, %+v", wear, err, back)
		}
	}
}

func FuzzMemory(f *testing.F) {
	_, raw := worn(f)
	f.Add(raw)
	fresh, err := watch.Memory{}.MarshalBinary()
	if err != nil {
		f.Fatal(err)
	}
	f.Add(fresh)
	_, further := wornFurther(f)
	f.Add(further)
	j := judgeOf(f, fullStandard(limits.Individuals, ruleZoo()[:watch.MaxRules]))
	f.Fuzz(func(t *testing.T, data []byte) {
		for _, b := range [][]byte{data, binary.LittleEndian.AppendUint32(data[:len(data):len(data)], crc32.ChecksumIEEE(data))} {
			var m watch.Memory
			if m.UnmarshalBinary(b) != nil {
				continue
			}
			again, err := m.MarshalBinary()
			if err != nil || string(again) != string(b) {
				t.Fatalf("%x read and written again is %x, %v", b, again, err)
			}
			// Whatever was read can be gone on from.
			if d := j.Step(&m, watch.Subgroup{N: 1, Mean: 12.5}); d.Err == nil && math.IsNaN(d.Location.Z+d.EWMA.Value+d.CUSUM.High) {
				t.Fatalf("NaN after restoring %x: %+v", b, d)
			}
		}
	})
}

// FuzzStep judges any series at all: no panic, no NaN without an error, the
// registers agree with the naive windows, and the memory survives its bytes.
func FuzzStep(f *testing.F) {
	f.Add([]byte("Kestrel Row, axle seat diameter, a few hundred hubs"), uint8(0))
	f.Add([]byte{0, 255, 0, 255, 0, 255, 1, 1, 1, 128, 128, 128, 127, 129, 127, 129, 127, 129}, uint8(3))
	zoo := ruleZoo()
	judges := map[limits.Chart]*watch.Judge{}
	for _, c := range charts {
		judges[c] = judgeOf(f, fullStandard(c, zoo[:watch.MaxRules]))
	}
	sets := []*watch.Rules{compile(f, zoo[:watch.MaxRules]...), compile(f, zoo[len(zoo)-watch.MaxRules:]...)}
	f.Fuzz(func(t *testing.T, data []byte, which uint8) {
		data = data[:min(len(data), 400)]
		chart := charts[int(which)%len(charts)]
		j := judges[chart]
		var m watch.Memory
		states := make([]watch.State, len(sets))
		var pts []watch.Point
		for i, b := range data {
			z := float64(int(b)-128) / 32
			pts = append(pts, watch.Point{Z: z, X: z})
			for k, r := range sets {
				fired := r.Step(&states[k], pts[i])
				for at := range r.Len() {
					if want, side := naive(r.Rule(at), pts, i); fired.Has(at) != want || fired.Side(at) != side {
						t.Fatalf("point %d, %s: fired %v, naive window says %v", i, r.Rule(at), fired.Has(at), want)
					}
				}
			}
			n := 1
			if chart != limits.Individuals {
				n = 1 + int(b>>5)
			}
			mean := 12.5 + z*0.004
			if i >= 8 && b == data[0] { // now and then any bits at all
				mean = math.Float64frombits(binary.LittleEndian.Uint64(data[i-8:]))
			}
			d := j.Step(&m, watch.Subgroup{N: n, Mean: mean, Range: float64(b) / 1e4, SD: float64(b) / 2e4})
			if d.Err != nil {
				continue
			}
			for _, v := range []float64{d.Location.Z, d.Dispersion.Z, d.EWMA.Value, d.EWMA.Upper, d.CUSUM.High, d.CUSUM.Low} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("point %d: %+v", i, d)
				}
			}
		}
		raw, err := m.MarshalBinary()
		if err != nil {
			t.Fatal(err)
		}
		var back watch.Memory
		if err := back.UnmarshalBinary(raw); err != nil || back != m {
			t.Fatalf("restored %+v, %v; want %+v", back, err, m)
		}
	})
}
