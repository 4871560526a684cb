package describe

import (
	"strings"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

// Column is one column of the table.
type Column struct {
	Key     string // the name by which the program knows it
	Header  string // the name that stands in the first row
	Hint    string // what goes into it
	example string
	number  bool // written as a number where the file knows numbers
}

// columns in the order in which they are written. The example is from Kestrel Row, an
// invented works.
var columns = []Column{
	{Key: "line", Header: "Line", Hint: "A lane of the board.", example: "Axles"},
	{Key: "station", Header: "Station", Hint: "The place with a tablet where samples are taken.", example: "Turning 1"},
	{Key: "station_family", Header: "Station family", Hint: "Stations of one family share a catalogue of causes.", example: "turning"},
	{Key: "machine", Header: "Machine", Hint: "What makes the parts.", example: "Lathe 11"},
	{Key: "rate", Header: "Parts per hour", Hint: "The machine's rate; empty when it is not known.", example: "230", number: true},
	{Key: "streams", Header: "Streams", Hint: "Spindles, cavities or heads of the machine, with | or commas between them."},
	{Key: "part", Header: "Part", Hint: "The one part that the characteristic is of; empty for a family or for any part."},
	{Key: "part_family", Header: "Part family", Hint: "The family of the part; without a part the characteristic is of the whole family.", example: "axles"},
	{Key: "name", Header: "Characteristic", Hint: "What is measured. Empty in a row that only names a machine, a part or a gauge.", example: "Axle seat diameter"},
	{Key: "unit", Header: "Unit", Hint: "Such as mm.", example: "mm"},
	{Key: "decimals", Header: "Decimals", Hint: "How many decimals are read off the gauge, 0 to 6.", example: "3", number: true},
	{Key: "target", Header: "Target", Hint: "May be empty.", example: "14.991", number: true},
	{Key: "lower", Header: "Lower specification limit", Hint: "May be empty.", example: "14.982", number: true},
	{Key: "upper", Header: "Upper specification limit", Hint: "May be empty.", example: "15.000", number: true},
	{Key: "worse", Header: "Worse direction", Hint: "high or low where only one is worse; else empty."},
	{Key: "size", Header: "Parts per subgroup", Hint: "How many parts are measured each time, 1 to 25.", example: "5", number: true},
	{Key: "chart", Header: "Chart", Hint: "average and range, average and standard deviation, or single readings; empty: chosen by the number of parts.", example: "average and range"},
	{Key: "gauge", Header: "Gauge", Hint: "What it is measured with.", example: "Micrometer M-04"},
	{Key: "resolution", Header: "Gauge resolution", Hint: "The smallest step that the gauge shows.", example: "0.001", number: true},
	{Key: "next_check", Header: "Gauge next check", Hint: "A day, as 2027-01-31.", example: "2027-01-31"},
	{Key: "check_days", Header: "Days between gauge checks", Hint: "From one good check to the next; empty: each check says when the next is.", example: "180", number: true},
	{Key: "minutes", Header: "Sample every minutes", Hint: "Of running time; may be empty.", example: "30", number: true},
	{Key: "parts", Header: "Sample every parts", Hint: "Made since the last sample; may be empty.", number: true},
	{Key: "events", Header: "Sample after", Hint: "start-up, changeover, tool change, an adjustment, first piece, last piece, with | or commas between them.", example: "tool change"},
	{Key: "grace", Header: "Unknown after minutes", Hint: "How late a sample that is not asked for by time may be before the state is unknown; empty: an hour.", number: true},
	{Key: "operation", Header: "Operation", Hint: "Of the control plan.", example: "20 turning"},
	{Key: "drawing", Header: "Drawing", Hint: "Its number.", example: "KR-1100"},
	{Key: "drawing_revision", Header: "Drawing revision", Hint: "", example: "C"},
	{Key: "plan", Header: "Control plan", Hint: "Its reference.", example: "CP-20"},
	{Key: "risk_analysis", Header: "Risk analysis", Hint: "Its reference.", example: "RA-20.3"},
	{Key: "special_mark", Header: "Special characteristic", Hint: "The mark that the customer or the plant uses.", example: "S"},
	{Key: "method", Header: "Method", Hint: "How it is measured.", example: "micrometer, seat centre"},
	{Key: "shift", Header: "Shift", Hint: "A shift of the plant, in a row of its own. The shifts of a file together are the shift calendar of a plant that has none yet."},
	{Key: "shift_starts", Header: "Shift starts", Hint: "A time of the day on the clock of the plant, as 06:00. It ends where the next one starts."},
}

// Columns lists the columns in the order in which they are written.
func Columns() []Column { return append([]Column(nil), columns...) }

// squash makes headers comparable: case, spaces and signs do not count.
func squash(s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z' || r >= '0' && r <= '9':
			return r
		}
		return -1
	}, strings.ToLower(s))
}

// columnOf finds a column by its header, or returns -1.
func columnOf(header string) int {
	h := squash(header)
	for i, c := range columns {
		if h != "" && squash(c.Header) == h {
			return i
		}
	}
	return -1
}

var chartNames = []struct {
	chart limits.Chart
	name  string
}{
	{limits.XBarR, "average and range"},
	{limits.XBarS, "average and standard deviation"},
	{limits.Individuals, "single readings"},
}

func chartName(c limits.Chart) string {
	for _, n := range chartNames {
		if n.chart == c {
			return n.name
		}
	}
	return string(c)
}

var occasionNames = []struct {
	occasion plant.Occasion
	name     string
}{
	{plant.StartUp, "start-up"},
	{plant.Changeover, "changeover"},
	{plant.ToolChange, "tool change"},
	{plant.AfterAdjustment, "an adjustment"},
	{plant.FirstPiece, "first piece"},
	{plant.LastPiece, "last piece"},
}

// Events are the occasions that a sampling plan may name, in their order.
func Events() []plant.Occasion {
	var out []plant.Occasion
	for _, n := range occasionNames {
		out = append(out, n.occasion)
	}
	return out
}

// DefaultChart is the chart for so many parts a time when nothing else is known.
func DefaultChart(size int) limits.Chart {
	switch {
	case size == 1:
		return limits.Individuals
	case size > 8: // the range would waste too much of what the readings tell
		return limits.XBarS
	}
	return limits.XBarR
}
