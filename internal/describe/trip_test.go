package describe

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/xuri/excelize/v2"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

// some makes a plant of everything that a description can say, by chance.
func some(rng *rand.Rand) plant.Outline {
	var o plant.Outline
	n := 0
	name := func(kind string) string {
		n++
		marks := []string{"", " ", ";", ",", `"`, "ü", "=", "'", "+", "漢", "  x"}
		return fmt.Sprintf("%s%s %d", []string{"", "=", "'", "-a", "@"}[rng.IntN(5)], kind+marks[rng.IntN(len(marks))], n)
	}
	maybe := func(s string) string {
		if rng.IntN(2) == 0 {
			return ""
		}
		return s
	}
	for i := range 1 + rng.IntN(3) {
		l := plant.Line{ID: newID(), Name: name("line"), Position: i}
		o.Lines = append(o.Lines, l)
		for j := range rng.IntN(3) {
			s := plant.Station{ID: newID(), LineID: l.ID, Name: name("station"), Family: maybe("turning"), Position: j}
			o.Stations = append(o.Stations, s)
			for k := range rng.IntN(3) {
				m := plant.Machine{ID: newID(), StationID: s.ID, Name: name("machine"), Position: k, PartsPerHour: float64(rng.IntN(3)) * 112.5}
				for range rng.IntN(4) {
					m.Streams = append(m.Streams, plant.Stream{ID: newID(), Name: strings.NewReplacer(";", "", "|", "").Replace(name("stream"))})
				}
				o.Machines = append(o.Machines, m)
			}
		}
	}
	for range rng.IntN(3) {
		o.Parts = append(o.Parts, plant.Part{ID: newID(), Name: name("part"), Family: maybe("axles")})
	}
	for range rng.IntN(4) {
		g := plant.Gauge{ID: newID(), Name: name("gauge"), CheckDays: rng.IntN(3) * 90}
		if rng.IntN(2) == 0 {
			g.Resolution = &plant.Decimal{Units: 1 + rng.Int64N(9), Decimals: rng.IntN(5)}
		}
		if rng.IntN(2) == 0 {
			g.NextCheck = time.Date(2027, 1, 1+rng.IntN(300), 0, 0, 0, 0, time.UTC)
		}
		o.Gauges = append(o.Gauges, g)
	}
	charts := map[int]limits.Chart{1: limits.Individuals, 5: limits.XBarR, 9: limits.XBarS}
	for range rng.IntN(5) {
		if len(o.Machines) == 0 {
			break
		}
		m := o.Machines[rng.IntN(len(o.Machines))]
		size := []int{1, 5, 9}[rng.IntN(3)]
		d := plant.Described{Characteristic: plant.Characteristic{ID: newID(), MachineID: m.ID, StationID: m.StationID, Name: name("characteristic")},
			Setup: plant.Setup{Unit: "mm", Decimals: 3, Chart: charts[size], Size: size, Lower: &plant.Decimal{Units: -1500, Decimals: 3}, Upper: &plant.Decimal{Units: 14000, Decimals: 3}}}
		d.Setup.Plan = plant.SamplingPlan{EveryMinutes: 30 + rng.IntN(2), EveryParts: rng.IntN(2) * 200, GraceMinutes: rng.IntN(2) * 20}
		d.Setup.ControlPlan.Method = maybe(name("method"))
		if rng.IntN(2) == 0 {
			d.Setup.Plan.Events = []plant.Occasion{plant.StartUp, plant.ToolChange}
		}
		switch {
		case rng.IntN(2) == 0 && len(o.Parts) > 0:
			d.PartID = o.Parts[rng.IntN(len(o.Parts))].ID
		default:
			d.Family = maybe("axles")
		}
		if rng.IntN(2) == 0 && len(o.Gauges) > 0 {
			d.Setup.GaugeID = o.Gauges[rng.IntN(len(o.Gauges))].ID
		}
		for _, c := range o.Characteristics {
			if c.StationID == d.StationID {
				d.Position++
			}
		}
		o.Characteristics = append(o.Characteristics, d)
	}
	if rng.IntN(2) == 0 {
		o.Plant.Shifts = []plant.Shift{{ID: newID(), Name: name("early"), Starts: 6 * time.Hour}, {ID: newID(), Name: name("late"), Starts: 14*time.Hour + 30*time.Minute}}
	}
	return o
}

// TestAnyPlantWrittenReadsBackTheSame: what is written of a plant, read into an empty one,
// makes a plant of which the same is written; read into its own it changes nothing.
func TestAnyPlantWrittenReadsBackTheSame(t *testing.T) {
	t.Parallel()
	for seed := range uint64(150) {
		o := some(rand.New(rand.NewPCG(seed, 1)))
		for form, write := range map[string]func(Sheet) ([]byte, error){
			"CSV":  Sheet.CSV,
			"XLSX": func(s Sheet) ([]byte, error) { return s.XLSX("Characteristics", "Columns") },
		} {
			content, err := write(Present(o))
			if err != nil {
				t.Fatal(err)
			}
			p := read(t, string(content), plant.Outline{})
			if len(p.Problems) > 0 {
				t.Fatalf("seed %d, %s: %+v", seed, form, p.Problems)
			}
			back := with(plant.Outline{}, p.Add)
			want, _ := Present(o).CSV()
			got, err := Present(back).CSV()
			if err != nil || !bytes.Equal(sorted(got), sorted(want)) {
				t.Fatalf("seed %d, %s, %v: written again\n%s\nwas\n%s", seed, form, err, got, want)
			}
			own := read(t, string(content), o)
			if !own.Add.Empty() || len(own.Problems) > 0 {
				t.Fatalf("seed %d, %s: read into its own plant: %+v %+v", seed, form, own.Add, own.Problems)
			}
			for _, f := range own.Found {
				if len(f.Differs) > 0 {
					t.Fatalf("seed %d, %s: %s differs in %v", seed, form, f.Name, f.Differs)
				}
			}
		}
	}
}

// sorted puts the lines of a file in order: parts and gauges alone stand in that of their
// first mention.
func sorted(content []byte) []byte {
	lines := strings.Split(string(content), "\r\n")
	for i := range lines {
		for j := i; j > 0 && lines[j] < lines[j-1]; j-- {
			lines[j], lines[j-1] = lines[j-1], lines[j]
		}
	}
	return []byte(strings.Join(lines, "\n"))
}

func TestShiftsAndDaysBetweenChecks(t *testing.T) {
	t.Parallel()
	const head = "Shift,Shift starts,Gauge,Days between gauge checks\n"
	p := read(t, head+"late,14:00,,\nearly,6:00,,\n,,M-04,180\n", plant.Outline{})
	if !p.Ready() || len(p.Add.Shifts) != 2 || p.Add.Shifts[0].Name != "early" || p.Add.Shifts[0].Starts != 6*time.Hour || p.Add.Gauges[0].CheckDays != 180 {
		t.Fatalf("%+v %+v", p.Problems, p.Add)
	}
	there := with(plant.Outline{}, p.Add)
	other := read(t, head+"late,14:30,,\nearly,6:00,,\nnight,22:00,,\n,,M-04,90\n", there)
	var differs []string
	for _, f := range other.Found {
		for _, d := range f.Differs {
			differs = append(differs, f.Name+" "+d)
		}
	}
	if got := strings.Join(differs, "; "); !other.Add.Empty() || got != "late Shift starts; night Shift; M-04 Days between gauge checks" {
		t.Errorf("adds %+v, differs in %s", other.Add, got)
	}
	for content, want := range map[string]string{
		head + "early,,,\n":                                  "2 Shift starts Say when",
		head + ",06:00,,\n":                                  "2 Shift Name the shift",
		head + "early,6 am,,\n":                              "2 Shift starts 6 am is not",
		head + "early,25:00,,\n":                             "2 Shift starts 25:00 is not",
		head + "early,06:00,,\nlate,06:00,,\n":               "3 Shift starts 06:00 is taken by the shift in row 2",
		head + "early,06:00,,\nlate,14:00,,\nearly,7:00,,\n": "4 Shift starts Of early, row 2 says 06:00; here it says 7:00.",
		head + "early,06:00,,\n":                             "2 Shift One shift alone",
		head + ",,M-04,many\n":                               "2 Days between gauge checks many is not",
		head + ",,,90\n":                                     "2 Gauge Name the gauge",
	} {
		p := read(t, content, plant.Outline{})
		if len(p.Problems) == 0 {
			t.Errorf("no problem in %q", content)
			continue
		}
		e := p.Problems[0]
		if got := fmt.Sprintf("%d %s %s", e.Row, e.Column, e.Message); !strings.HasPrefix(got, want) {
			t.Errorf("%q: %s; want %s", content, got, want)
		}
	}
	// A workbook keeps a time of the day as a part of a day.
	f := excelize.NewFile()
	for cell, v := range map[string]any{"A1": "Shift", "B1": "Shift starts", "A2": "early", "B2": 0.25, "A3": "late", "B3": 14.5 / 24} {
		if err := f.SetCellValue("Sheet1", cell, v); err != nil {
			t.Fatal(err)
		}
	}
	var b bytes.Buffer
	if err := f.Write(&b); err != nil {
		t.Fatal(err)
	}
	if p := read(t, b.String(), plant.Outline{}); len(p.Problems) > 0 || p.Add.Shifts[0].Starts != 6*time.Hour || p.Add.Shifts[1].Starts != 14*time.Hour+30*time.Minute {
		t.Errorf("%+v %+v", p.Problems, p.Add.Shifts)
	}
}

// A machine that stands elsewhere is not moved by a file.
func TestAFileMovesNoMachine(t *testing.T) {
	t.Parallel()
	p := read(t, good, plant.Outline{})
	o := with(plant.Outline{}, p.Add)
	o.Stations = append(o.Stations, plant.Station{ID: uuid.New(), LineID: o.Lines[0].ID, Name: "Turning 2", Position: 1})
	other := read(t, strings.ReplaceAll(good, "Turning 1", "Turning 2"), o)
	if len(other.Problems) == 0 || other.Problems[0].Column != "Station" || !strings.Contains(other.Problems[0].Message, "stands at Turning 1. Move it") {
		t.Errorf("%+v", other.Problems)
	}
}
