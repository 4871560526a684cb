package describe

import (
	"bytes"
	"fmt"
	"slices"
	"strings"
	"testing"

	"github.com/google/uuid"
	"github.com/xuri/excelize/v2"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

const header = "Line,Station,Station family,Machine,Parts per hour,Part family,Characteristic,Unit,Decimals,Target,Lower specification limit,Upper specification limit,Parts per subgroup,Gauge,Sample every minutes,Sample after\n"

const good = header +
	"Axles,Turning 1,turning,Lathe 11,230,axles,Axle seat diameter,mm,3,14.991,14.982,15.000,5,Micrometer M-04,30,tool change | start-up\n" +
	"Axles,Turning 1,,Lathe 11,,axles,Shoulder length,mm,2,,9.90,10.10,3,,60,\n" +
	"\n" +
	"Assembly,Greasing,,Dispenser 4,150,,Grease mass,g,2,1.2,0.95,1.45,1,,30,an adjustment\n"

func read(t *testing.T, content string, o plant.Outline) Plan {
	t.Helper()
	table, err := ReadTable([]byte(content))
	if err != nil {
		t.Fatal(err)
	}
	return Read(table, o)
}

// with is a plant as it is after something was added.
func with(o plant.Outline, a plant.Addition) plant.Outline {
	o.Lines, o.Stations, o.Machines = append(o.Lines, a.Lines...), append(o.Stations, a.Stations...), append(o.Machines, a.Machines...)
	o.Parts, o.Gauges, o.Characteristics = append(o.Parts, a.Parts...), append(o.Gauges, a.Gauges...), append(o.Characteristics, a.Characteristics...)
	if len(a.Shifts) > 0 {
		o.Plant.Shifts = a.Shifts
	}
	return o
}

func TestAFileDescribesAPlant(t *testing.T) {
	t.Parallel()
	p := read(t, good, plant.Outline{})
	if !p.Ready() || p.Rows != 3 {
		t.Fatalf("%d rows, %+v", p.Rows, p.Problems)
	}
	a := p.Add
	if len(a.Lines) != 2 || len(a.Stations) != 2 || len(a.Machines) != 2 || len(a.Gauges) != 1 || len(a.Characteristics) != 3 || len(a.Parts) != 0 {
		t.Fatalf("adds %+v", a)
	}
	c := a.Characteristics[0]
	if c.MachineID != a.Machines[0].ID || c.StationID != a.Stations[0].ID || c.Family != "axles" || c.Setup.GaugeID != a.Gauges[0].ID ||
		c.Setup.Chart != limits.XBarR || c.Setup.Lower.String() != "14.982" || c.Setup.Plan.EveryMinutes != 30 ||
		len(c.Setup.Plan.Events) != 2 || c.Setup.Plan.Events[0] != plant.StartUp {
		t.Errorf("the first: %+v", c)
	}
	if a.Stations[0].Family != "turning" || a.Machines[0].PartsPerHour != 230 || a.Lines[1].Position != 1 || a.Characteristics[1].Position != 1 {
		t.Errorf("order and rates: %+v", a)
	}
	if a.Characteristics[2].Setup.Chart != limits.Individuals {
		t.Errorf("one part a time is on %s", a.Characteristics[2].Setup.Chart)
	}
}

func TestTheSameFileAgainAddsNothing(t *testing.T) {
	t.Parallel()
	p := read(t, good, plant.Outline{})
	again := read(t, good, with(plant.Outline{}, p.Add))
	if !again.Add.Empty() || len(again.Problems) > 0 || again.Ready() {
		t.Errorf("adds %+v, %+v", again.Add, again.Problems)
	}
	for _, f := range again.Found {
		if len(f.Differs) > 0 {
			t.Errorf("%s differs in %v", f.Name, f.Differs)
		}
	}
	other := read(t, strings.Replace(strings.Replace(good, "15.000", "15.010", 1), "Lathe 11,230", "Lathe 11,240", 1), with(plant.Outline{}, p.Add))
	var differs []string
	for _, f := range other.Found {
		differs = append(differs, f.Differs...)
	}
	if got := strings.Join(differs, "; "); got != "Parts per hour; Upper specification limit" {
		t.Errorf("differs in %s", got)
	}
	if p.Digest() != read(t, good, plant.Outline{}).Digest() || p.Digest() == other.Digest() {
		t.Error("a digest names what would be added, whatever the ids")
	}
}

func TestSeparatorsSignsAndEncodings(t *testing.T) {
	t.Parallel()
	want := read(t, good, plant.Outline{}).Digest()
	comma := strings.NewReplacer("14.991", "14,991", "14.982", "14,982", "15.000", "15,000")
	semicolon := comma.Replace(strings.ReplaceAll(good, ",", ";"))
	latin := []byte(strings.ReplaceAll(semicolon, "Turning 1", "Dreh\xfcngen"))
	utf16 := []byte{0xff, 0xfe}
	for _, r := range strings.ReplaceAll(good, ",", "\t") {
		utf16 = append(utf16, byte(r), byte(r>>8))
	}
	for name, content := range map[string]string{
		"semicolon and decimal comma": semicolon, "tabulator": strings.ReplaceAll(good, ",", "\t"), "byte order mark": "\ufeff" + good,
		"UTF-16": string(utf16), "line ends of another system": strings.ReplaceAll(good, "\n", "\r\n"),
	} {
		if p := read(t, content, plant.Outline{}); p.Digest() != want {
			t.Errorf("%s: %+v", name, p.Problems)
		}
	}
	if p := read(t, string(latin), plant.Outline{}); !p.Ready() || p.Add.Stations[0].Name != "Drehüngen" {
		t.Errorf("Windows-1252: %+v", p.Add.Stations)
	}
}

// TestProblemsHaveRowAndColumn: each file has one thing wrong.
func TestProblemsHaveRowAndColumn(t *testing.T) {
	t.Parallel()
	row := "Axles,Turning 1,turning,Lathe 11,230,axles,Axle seat diameter,mm,3,14.991,14.982,15.000,5,,30,\n"
	change := func(old, new string) string { return header + strings.Replace(row, old, new, 1) }
	for name, tc := range map[string]struct {
		content string
		row     int
		column  string
		says    string
	}{
		"no unit":               {change(",mm,", ",,"), 2, "Unit", "needs a unit"},
		"no decimals":           {change(",3,14.991", ",,14.991"), 2, "Decimals", "needed"},
		"not a number":          {change("14.982", "about 15"), 2, "Lower specification limit", "about 15 is not a number"},
		"mark for thousands":    {change(",230,", `,"1,200",`), 2, "Parts per hour", "two ways"},
		"too many decimals":     {change("14.982", "14.9825"), 2, "Lower specification limit", "more decimals"},
		"limits the wrong way":  {change("15.000", "14.000"), 2, "Upper specification limit", "above the lower"},
		"no machine":            {change(",Lathe 11,230,", ",,,"), 2, "Machine", "Name the machine"},
		"no line":               {change("Axles,Turning", ",Turning"), 2, "Line", "Name the line"},
		"no station":            {change("Turning 1,turning", ","), 2, "Station", "Name the station"},
		"unknown occasion":      {change(",30,\n", ",30,full moon\n"), 2, "Sample after", "full moon"},
		"26 parts":              {change("15.000,5,", "15.000,26,"), 2, "Parts per subgroup", "26 is not a whole number from 1 to 25."},
		"no parts":              {change("15.000,5,", "15.000,0,"), 2, "Parts per subgroup", "0 is not a whole number from 1 to 25."},
		"twice":                 {header + row + row, 3, "Characteristic", "Row 2"},
		"two families":          {header + row + strings.Replace(strings.Replace(row, "turning,Lathe 11", "milling,Lathe 12", 1), "Axle seat", "Axle end", 1), 3, "Station family", "Of Turning 1, row 2 says turning; here it says milling."},
		"two lines":             {header + row + strings.Replace(strings.Replace(row, "Axles,", "Hubs,", 1), "Axle seat", "Axle end", 1), 3, "Line", "Station Turning 1 stands on Axles in row 2; here it is on Hubs."},
		"two stations":          {header + row + strings.Replace(strings.Replace(row, "Turning 1", "Turning 2", 1), "Axle seat", "Axle end", 1), 3, "Station", "Machine Lathe 11 stands at Turning 1 in row 2; here it is at Turning 2."},
		"name too long":         {change("Lathe 11", strings.Repeat("x", 81)), 2, "Machine", "at most 80"},
		"measured and no name":  {change("Axle seat diameter", ""), 2, "Characteristic", "not what"},
		"beyond the columns":    {header + strings.TrimRight(row, "\n") + ",,more\n", 2, "", "names no column"},
		"unknown column":        {strings.Replace(header, "Gauge,", "Gage,", 1) + row, 1, "Gage", "no column of this name"},
		"column twice":          {strings.Replace(header, "Gauge,", "Unit,", 1) + row, 1, "Unit", "twice"},
		"no names of columns":   {row + row, 1, "", "names of the columns"},
		"nothing but the names": {header, 0, "", "nothing stands"},
	} {
		p := read(t, tc.content, plant.Outline{})
		if len(p.Problems) == 0 || p.Ready() {
			t.Errorf("%s: no problem", name)
			continue
		}
		got := p.Problems[0]
		if got.Row != tc.row || got.Column != tc.column || !strings.Contains(got.Message, tc.says) {
			t.Errorf("%s: row %d, %q: %s", name, got.Row, got.Column, got.Message)
		}
	}
	o := plant.Outline{Lines: []plant.Line{{ID: uuid.New(), Name: "Axles", Retired: true}}}
	if p := read(t, header+row, o); len(p.Problems) == 0 || !strings.Contains(p.Problems[0].Message, "retired") {
		t.Errorf("a retired line: %+v", p.Problems)
	}
}

// TestEveryMistakeIsSaidAtOnce: a column that is not found hides no other mistake, and makes
// none of what would have stood in it.
func TestEveryMistakeIsSaidAtOnce(t *testing.T) {
	t.Parallel()
	row := "Axles,Turning 1,turning,Lathe 11,230,axles,Axle seat diameter,mm,3,14.991,14.982,15.000,5,,30,\n"
	content := strings.NewReplacer("Unit,", "Units,", "Target,", "Decimals,").Replace(header) +
		strings.Replace(row, "14.982", "about 15", 1) + strings.Replace(strings.Replace(row, "Axle seat", "Axle end", 1), "15.000,5,", "15.000,30,", 1)
	p := read(t, content, plant.Outline{})
	var got []string
	for _, one := range p.Problems {
		got = append(got, fmt.Sprintf("%d %s", one.Row, one.Column))
	}
	if want := "1 Units; 1 Decimals; 2 Lower specification limit; 3 Parts per subgroup"; strings.Join(got, "; ") != want || p.Rows != 2 || p.Ready() {
		t.Errorf("%d rows, %s; want %s", p.Rows, strings.Join(got, "; "), want)
	}
}

func TestFilesThatAreNoneOfOurs(t *testing.T) {
	t.Parallel()
	var bomb bytes.Buffer
	f := excelize.NewFile()
	for i := 1; i <= MaxRows+5; i++ {
		if err := f.SetCellValue("Sheet1", fmt.Sprintf("A%d", i), "Line"); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Write(&bomb); err != nil {
		t.Fatal(err)
	}
	for name, content := range map[string]string{
		"empty": "", "too large": strings.Repeat("x", MaxFile+1), "a picture": "\x89PNG\r\n\x1a\n\x00\x00\x00", "zip that is no workbook": "PK\x03\x04 and nothing",
		"an old workbook": "\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "an open quotation mark": header + `"Axles`, "too many rows": header + strings.Repeat("Axles\n", MaxRows+2),
		"a workbook of too many rows": bomb.String(), "a cell without end": header + strings.Repeat("a", maxCell+1) + "\n",
	} {
		if _, err := ReadTable([]byte(content)); !plant.IsKind(err, plant.Invalid) {
			t.Errorf("%s: %v, want words about it", name, err)
		}
	}
}

// TestWhatIsWrittenReadsBackTheSame writes a plant with names that programs for tables
// would take for formulas.
func TestWhatIsWrittenReadsBackTheSame(t *testing.T) {
	t.Parallel()
	nasty := strings.NewReplacer("Axles", "=1+1", "Turning 1", "@SUM(A1)", "Lathe 11", "-cmd", "Micrometer M-04", "'=x", "Greasing", "+49 Greasing")
	p := read(t, nasty.Replace(good), plant.Outline{})
	p.Add.Parts = []plant.Part{{ID: uuid.New(), Name: "Axle 100", Family: "axles"}}
	p.Add.Machines[0].Streams = []plant.Stream{{ID: uuid.New(), Name: "spindle 1"}, {ID: uuid.New(), Name: "spindle 2"}}
	o := with(plant.Outline{}, p.Add)
	for form, write := range map[string]func(Sheet) ([]byte, error){
		"CSV":  Sheet.CSV,
		"XLSX": func(s Sheet) ([]byte, error) { return s.XLSX("Characteristics", "Columns") },
	} {
		content, err := write(Present(o))
		if err != nil {
			t.Fatal(err)
		}
		if form == "CSV" {
			for _, cell := range strings.FieldsFunc(string(content), func(r rune) bool { return r == ',' || r == '\n' || r == '"' }) {
				if strings.ContainsRune("=+@-", rune(cell[0])) {
					t.Errorf("the cell %q would be computed", cell)
				}
			}
		}
		back := read(t, string(content), plant.Outline{})
		if back.Digest() != p.Digest() {
			t.Errorf("%s: %+v\n%+v, want\n%+v", form, back.Problems, back.Add, p.Add)
		}
		there := read(t, string(content), o)
		if !there.Add.Empty() || len(there.Problems) > 0 {
			t.Errorf("%s read into its own plant: %+v %+v", form, there.Add, there.Problems)
		}
		for _, f := range there.Found {
			if len(f.Differs) > 0 {
				t.Errorf("%s: %s differs in %v", form, f.Name, f.Differs)
			}
		}
	}
}

func TestTheTemplateIsAFileOfOurs(t *testing.T) {
	t.Parallel()
	for _, write := range []func() ([]byte, error){Example().CSV, func() ([]byte, error) { return Example().XLSX("Characteristics", "Columns") }} {
		content, err := write()
		if err != nil {
			t.Fatal(err)
		}
		if p := read(t, string(content), plant.Outline{}); !p.Ready() || len(p.Add.Characteristics) != 1 || len(p.Add.Parts) != 1 {
			t.Errorf("%+v", p.Problems)
		}
	}
}

func TestNumbersAndDaysOfAWorkbook(t *testing.T) {
	t.Parallel()
	f := excelize.NewFile()
	for cell, v := range map[string]any{
		"A1": "Gauge", "B1": "Gauge resolution", "C1": "Gauge next check", "A2": "M-04", "B2": 0.1 + 0.2 - 0.3 + 0.001, "C2": 46387,
	} {
		if err := f.SetCellValue("Sheet1", cell, v); err != nil {
			t.Fatal(err)
		}
	}
	var b bytes.Buffer
	if err := f.Write(&b); err != nil {
		t.Fatal(err)
	}
	p := read(t, b.String(), plant.Outline{})
	if len(p.Problems) > 0 || p.Add.Gauges[0].Resolution.String() != "0.001" || p.Add.Gauges[0].NextCheck.Format("2006-01-02") != "2026-12-31" {
		t.Errorf("%+v %+v", p.Problems, p.Add.Gauges)
	}
}

// FuzzRead: whatever comes is either read or refused in words, and what was read once
// adds nothing when it is read again.
func FuzzRead(f *testing.F) {
	f.Add([]byte(good))
	f.Add([]byte(header))
	f.Add([]byte(strings.ReplaceAll(good, ",", ";")))
	f.Add([]byte("Line;Line\n=1;@"))
	f.Add([]byte("Part,Part family,Gauge,Gauge next check\nA,b,c,31.1.2027\n"))
	if content, err := Example().XLSX("a", "b"); err == nil {
		f.Add(content)
	}
	f.Fuzz(func(t *testing.T, content []byte) {
		table, err := ReadTable(content)
		if err != nil {
			if !plant.IsKind(err, plant.Invalid) {
				t.Fatal(err)
			}
			return
		}
		p := Read(table, plant.Outline{})
		for _, e := range p.Problems {
			if e.Message == "" {
				t.Fatal("a problem without words")
			}
		}
		if len(p.Problems) > 0 {
			return
		}
		o := with(plant.Outline{}, p.Add)
		if again := Read(table, o); !again.Add.Empty() || len(again.Problems) > 0 {
			t.Fatalf("read again it adds %+v, %+v", again.Add, again.Problems)
		}
		written, err := Present(o).CSV()
		if err != nil {
			t.Fatal(err)
		}
		back, err := ReadTable(written)
		if err != nil {
			t.Fatal(err)
		}
		if there := Read(back, o); !there.Add.Empty() || len(there.Problems) > 0 {
			t.Fatalf("what was written adds %+v, %+v", there.Add, there.Problems)
		}
	})
}

// TestStreamsAreSeparatedByAnyOfTheirSigns: a comma between streams is one where no other
// sign stands, and part of a name beside one.
func TestStreamsAreSeparatedByAnyOfTheirSigns(t *testing.T) {
	t.Parallel()
	for cell, want := range map[string][]string{
		"A | B | C": {"A", "B", "C"}, "A, B,C": {"A", "B", "C"}, "A;B": {"A", "B"}, "A, upper | B": {"A, upper", "B"},
		"A, upper |": {"A, upper"}, "A": {"A"}, " , ": nil, "": nil,
	} {
		if got := list(cell); !slices.Equal(got, want) {
			t.Errorf("%q is read as %q, want %q", cell, got, want)
		}
		if got := list(joined(want)); !slices.Equal(got, want) {
			t.Errorf("%q is written as %q", want, joined(want))
		}
	}
}
