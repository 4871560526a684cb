package describe

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"github.com/google/uuid"
	"github.com/xuri/excelize/v2"

	"holdfast/internal/plant"
)

// Sheet is a table that is to be written, by the keys of the columns.
type Sheet []map[string]string

// Example is the content of the template: rows of an invented works, one of a
// characteristic, one of a part alone and two of the shifts.
func Example() Sheet {
	first := map[string]string{}
	for _, c := range columns {
		first[c.Key] = c.example
	}
	return Sheet{first, {"part": "Axle 100", "part_family": "axles"},
		{"shift": "early", "shift_starts": "06:00"}, {"shift": "late", "shift_starts": "18:00"}}
}

// Present is the set-up of now. What is retired is left out.
func Present(o plant.Outline) Sheet {
	var s Sheet
	used := map[uuid.UUID]bool{} // parts and gauges that stand in the row of a characteristic
	for _, l := range o.Lines {
		if l.Retired {
			continue
		}
		stations := 0
		for _, st := range o.Stations {
			if st.Retired || st.LineID != l.ID {
				continue
			}
			stations++
			machines := 0
			for _, m := range o.Machines {
				if m.Retired || m.StationID != st.ID {
					continue
				}
				machines++
				s = append(s, machineRows(o, l, st, m, used)...)
			}
			if machines == 0 {
				s = append(s, map[string]string{"line": l.Name, "station": st.Name, "station_family": st.Family})
			}
		}
		if stations == 0 {
			s = append(s, map[string]string{"line": l.Name})
		}
	}
	for _, p := range o.Parts {
		if !p.Retired && !used[p.ID] {
			s = append(s, map[string]string{"part": p.Name, "part_family": p.Family})
		}
	}
	for _, g := range o.Gauges {
		if !g.Retired && !used[g.ID] {
			row := map[string]string{}
			gaugeCells(row, g)
			s = append(s, row)
		}
	}
	for _, sh := range o.Plant.Shifts {
		s = append(s, map[string]string{"shift": sh.Name, "shift_starts": fmt.Sprintf("%02d:%02d", int(sh.Starts.Hours()), int(sh.Starts.Minutes())%60)})
	}
	return s
}

// machineRows are the rows of one machine: one for each characteristic, or one that
// names the machine alone.
func machineRows(o plant.Outline, l plant.Line, st plant.Station, m plant.Machine, used map[uuid.UUID]bool) []map[string]string {
	var out []map[string]string
	base := func() map[string]string {
		row := map[string]string{"line": l.Name, "station": st.Name, "station_family": st.Family, "machine": m.Name}
		if m.PartsPerHour > 0 {
			row["rate"] = strconv.FormatFloat(m.PartsPerHour, 'f', -1, 64)
		}
		var streams []string
		for _, t := range m.Streams {
			if !t.Retired {
				streams = append(streams, t.Name)
			}
		}
		row["streams"] = joined(streams)
		return row
	}
	for _, c := range o.Characteristics {
		if c.Retired || c.MachineID != m.ID {
			continue
		}
		row := base()
		row["part_family"] = c.Family
		if c.PartID != uuid.Nil {
			p := o.Part(c.PartID)
			row["part"], row["part_family"] = p.Name, p.Family
			used[p.ID] = true
		}
		if g := o.Gauge(c.Setup.GaugeID); g.ID != uuid.Nil {
			gaugeCells(row, g)
			used[g.ID] = true
		}
		setupCells(row, c)
		out = append(out, row)
	}
	if out == nil {
		out = append(out, base())
	}
	return out
}

func gaugeCells(row map[string]string, g plant.Gauge) {
	row["gauge"], row["resolution"] = g.Name, decimalText(g.Resolution)
	if !g.NextCheck.IsZero() {
		row["next_check"] = g.NextCheck.Format("2006-01-02")
	}
	if g.CheckDays > 0 {
		row["check_days"] = strconv.Itoa(g.CheckDays)
	}
}

func setupCells(row map[string]string, c plant.Described) {
	v := c.Setup
	count := func(n int) string {
		if n == 0 {
			return ""
		}
		return strconv.Itoa(n)
	}
	var events []string
	for _, n := range occasionNames {
		if slices.Contains(v.Plan.Events, n.occasion) {
			events = append(events, n.name)
		}
	}
	for key, text := range map[string]string{
		"name": c.Name, "unit": v.Unit, "decimals": strconv.Itoa(v.Decimals), "target": decimalText(v.Target),
		"lower": decimalText(v.Lower), "upper": decimalText(v.Upper), "worse": string(v.Worse), "size": strconv.Itoa(v.Size),
		"chart": chartName(v.Chart), "minutes": count(v.Plan.EveryMinutes), "parts": count(v.Plan.EveryParts),
		"events": strings.Join(events, " | "), "grace": count(v.Plan.GraceMinutes),
		"operation": v.ControlPlan.Operation, "drawing": v.ControlPlan.Drawing, "drawing_revision": v.ControlPlan.DrawingRevision,
		"plan": v.ControlPlan.Plan, "risk_analysis": v.ControlPlan.RiskAnalysis, "special_mark": v.ControlPlan.SpecialMark, "method": v.ControlPlan.Method,
	} {
		row[key] = text
	}
}

func decimalText(d *plant.Decimal) string {
	if d == nil {
		return ""
	}
	return d.String()
}

// CSV writes the sheet for programs of all kinds: comma, UTF-8 with a byte order mark.
func (s Sheet) CSV() ([]byte, error) {
	var b bytes.Buffer
	b.WriteString("\ufeff")
	w := csv.NewWriter(&b)
	w.UseCRLF = true
	var cells []string
	for _, c := range columns {
		cells = append(cells, c.Header)
	}
	_ = w.Write(cells)
	for _, row := range s {
		cells = cells[:0]
		for _, c := range columns {
			cells = append(cells, guard(row[c.Key]))
		}
		_ = w.Write(cells)
	}
	w.Flush()
	if err := w.Error(); err != nil {
		return nil, fmt.Errorf("write CSV: %w", err)
	}
	return b.Bytes(), nil
}

// XLSX writes the sheet as a workbook, with a second worksheet that explains the columns.
// table and explained name the two.
func (s Sheet) XLSX(table, explained string) ([]byte, error) {
	f := excelize.NewFile()
	defer f.Close()
	head, err := f.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true}, Alignment: &excelize.Alignment{WrapText: true, Vertical: "top"}})
	if err != nil {
		return nil, fmt.Errorf("make a style: %w", err)
	}
	if err := f.SetSheetName("Sheet1", table); err != nil {
		return nil, fmt.Errorf("name a worksheet: %w", err)
	}
	styles := map[int]int{}
	set := func(sheet string, column, row int, value any) {
		cell, cellErr := excelize.CoordinatesToCellName(column, row)
		if cellErr == nil {
			cellErr = f.SetCellValue(sheet, cell, value)
		}
		if err == nil {
			err = cellErr
		}
	}
	for i, c := range columns {
		set(table, i+1, 1, c.Header)
		for j, row := range s {
			text := row[c.Key]
			if text == "" {
				continue
			}
			d, notNumber := plant.ParseDecimal(text)
			if !c.number || notNumber != nil {
				set(table, i+1, j+2, guard(text))
				continue
			}
			set(table, i+1, j+2, d.Float())
			if err == nil {
				err = f.SetCellStyle(table, cellName(i+1, j+2), cellName(i+1, j+2), decimalStyle(f, styles, d.Decimals))
			}
		}
	}
	if err == nil {
		err = f.SetRowStyle(table, 1, 1, head)
	}
	if err == nil {
		err = f.SetColWidth(table, "A", cellColumn(len(columns)), 18)
	}
	if err == nil {
		err = f.SetPanes(table, &excelize.Panes{Freeze: true, YSplit: 1, TopLeftCell: "A2", ActivePane: "bottomLeft"})
	}
	if err != nil {
		return nil, fmt.Errorf("write a worksheet: %w", err)
	}
	if _, err := f.NewSheet(explained); err != nil {
		return nil, fmt.Errorf("add a worksheet: %w", err)
	}
	for i, c := range columns {
		set(explained, 1, i+1, c.Header)
		set(explained, 2, i+1, c.Hint)
	}
	if err == nil {
		err = f.SetColWidth(explained, "A", "A", 28)
	}
	if err == nil {
		err = f.SetColWidth(explained, "B", "B", 110)
	}
	if err != nil {
		return nil, fmt.Errorf("explain the columns: %w", err)
	}
	b, err := f.WriteToBuffer()
	if err != nil {
		return nil, fmt.Errorf("write a workbook: %w", err)
	}
	return b.Bytes(), nil
}

func cellName(column, row int) string { return cellColumn(column) + strconv.Itoa(row) }

func cellColumn(n int) string {
	name, _ := excelize.ColumnNumberToName(n) // fails only beyond 16,384
	return name
}

// decimalStyle shows a number with its decimals: 15.000 and not 15.
func decimalStyle(f *excelize.File, known map[int]int, decimals int) int {
	if id, ok := known[decimals]; ok {
		return id
	}
	format := "0"
	if decimals > 0 {
		format += "." + strings.Repeat("0", decimals)
	}
	id, err := f.NewStyle(&excelize.Style{CustomNumFmt: &format})
	if err != nil {
		return 0
	}
	known[decimals] = id
	return id
}
