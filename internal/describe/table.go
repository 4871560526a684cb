package describe

import (
	"bytes"
	"encoding/csv"
	"errors"
	"io"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/xuri/excelize/v2"
	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"

	"holdfast/internal/plant"
)

// Bounds of what is read. A plant of thousands of characteristics stays far below.
const (
	MaxFile    = 900 << 10 // bytes
	MaxRows    = 5000      // that hold something
	maxColumns = 200
	maxCell    = 500      // characters
	maxSheet   = 20_000   // rows of a worksheet, empty ones included
	maxUnzip   = 24 << 20 // bytes of a workbook when unpacked
)

// Table is the content of a file before it is understood.
type Table struct {
	rows []row
	xlsx bool
}

// row is one row with its number in the file, from 1.
type row struct {
	number int
	cells  []string
}

// ReadTable reads a CSV or XLSX file; which it is shows in its content. What is wrong
// with the file as a whole is a *plant.Error.
func ReadTable(content []byte) (Table, error) {
	switch {
	case len(content) == 0:
		return Table{}, plant.Invalidf("file", "The file is empty.")
	case len(content) > MaxFile:
		return Table{}, plant.Invalidf("file", "The file has more than %d kilobytes. Split it by lines of the plant.", MaxFile>>10)
	case bytes.HasPrefix(content, []byte("PK\x03\x04")):
		return readXLSX(content)
	case bytes.HasPrefix(content, []byte("\xd0\xcf\x11\xe0")):
		return Table{}, plant.Invalidf("file", "This is a workbook of an old kind, or one with a password. Save it as XLSX without a password.")
	}
	return readCSV(content)
}

// decode turns the bytes of a text file into text.
func decode(content []byte) (string, error) {
	switch {
	case bytes.HasPrefix(content, []byte("\xff\xfe")), bytes.HasPrefix(content, []byte("\xfe\xff")):
		b, err := unicode.UTF16(unicode.LittleEndian, unicode.UseBOM).NewDecoder().Bytes(content)
		return string(b), err
	case utf8.Valid(content):
		return strings.TrimPrefix(string(content), "\ufeff"), nil
	}
	b, err := charmap.Windows1252.NewDecoder().Bytes(content)
	return string(b), err
}

func readCSV(content []byte) (Table, error) {
	text, err := decode(content)
	if err != nil || strings.ContainsRune(text, 0) {
		return Table{}, plant.Invalidf("file", "This is neither a CSV nor an XLSX file.").Because(err)
	}
	r := csv.NewReader(strings.NewReader(text))
	r.Comma, r.FieldsPerRecord = separator(text), -1
	var t Table
	for {
		cells, err := r.Read()
		if errors.Is(err, io.EOF) {
			return t, nil
		}
		if pe, ok := errors.AsType[*csv.ParseError](err); ok {
			return t, plant.Invalidf("file", "Line %d of the file cannot be read: a quotation mark is missing or stands in a wrong place.", pe.Line)
		}
		if err != nil {
			return t, plant.Invalidf("file", "The file cannot be read.").Because(err)
		}
		line, _ := r.FieldPos(0)
		if err := t.add(line, cells); err != nil {
			return t, err
		}
	}
}

// separator is the one under which most names of columns are found in the first row.
func separator(text string) rune {
	first, _, _ := strings.Cut(strings.TrimLeft(text, "\r\n"), "\n")
	best, most := ',', -1
	for _, sep := range []rune{';', ',', '\t'} {
		n := 0
		for _, cell := range strings.Split(first, string(sep)) {
			if columnOf(cell) >= 0 {
				n++
			}
		}
		if n > most {
			best, most = sep, n
		}
	}
	return best
}

func readXLSX(content []byte) (t Table, err error) {
	// The library reads what anybody may have made; one that it stumbles over is broken.
	defer func() {
		if v := recover(); v != nil {
			t, err = Table{}, plant.Invalidf("file", "The workbook is damaged.")
		}
	}()
	f, err := excelize.OpenReader(bytes.NewReader(content), excelize.Options{
		UnzipSizeLimit: maxUnzip, UnzipXMLSizeLimit: maxUnzip, RawCellValue: true,
	})
	if err != nil {
		return t, plant.Invalidf("file", "The workbook cannot be opened. Save it as XLSX without a password.").Because(err)
	}
	defer f.Close()
	sheets := f.GetSheetList()
	if len(sheets) == 0 {
		return t, plant.Invalidf("file", "The workbook has no worksheet.")
	}
	rows, err := f.Rows(sheets[0])
	if err != nil {
		return t, plant.Invalidf("file", "The first worksheet cannot be read.").Because(err)
	}
	defer rows.Close()
	t.xlsx = true
	for n := 1; rows.Next(); n++ {
		if n > maxSheet {
			return t, plant.Invalidf("file", "The worksheet is longer than %d rows.", maxSheet)
		}
		cells, err := rows.Columns()
		if err != nil {
			return t, plant.Invalidf("file", "The first worksheet cannot be read.").Because(err)
		}
		if err := t.add(n, cells); err != nil {
			return t, err
		}
	}
	if err := rows.Error(); err != nil {
		return t, plant.Invalidf("file", "The first worksheet cannot be read.").Because(err)
	}
	return t, nil
}

// add takes a row in, unless nothing stands in it.
func (t *Table) add(number int, cells []string) error {
	empty := true
	for i := range cells {
		cells[i] = unguard(plant.CleanText(cells[i]))
		if utf8.RuneCountInString(cells[i]) > maxCell {
			return plant.Invalidf("file", "A cell in row %d holds more than %d characters.", number, maxCell)
		}
		empty = empty && cells[i] == ""
	}
	for len(cells) > 0 && cells[len(cells)-1] == "" {
		cells = cells[:len(cells)-1]
	}
	switch {
	case empty:
		return nil
	case len(cells) > maxColumns:
		return plant.Invalidf("file", "Row %d has more than %d columns.", number, maxColumns)
	case len(t.rows) > MaxRows:
		return plant.Invalidf("file", "The file has more than %d rows. Split it by lines of the plant.", MaxRows)
	}
	t.rows = append(t.rows, row{number, append([]string(nil), cells...)})
	return nil
}

var exponent = regexp.MustCompile(`^-?[0-9]+(\.[0-9]+)?([eE][-+]?[0-9]{1,3})?$`)

// plainNumber is a number as a person would write it. Workbooks keep binary numbers, in up
// to 17 digits and with exponents: 15 digits are what the program that made the workbook
// shows at most.
func plainNumber(s string) string {
	if !exponent.MatchString(s) {
		return s
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return s
	}
	if v, err = strconv.ParseFloat(strconv.FormatFloat(v, 'g', 15, 64), 64); err != nil {
		return s
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

// Programs for tables take a text that begins with one of these for a formula.
const formulaSigns = "=+-@\t\r"

func guarded(s string) bool {
	rest := strings.TrimLeft(s, "'")
	if rest == "" || !strings.ContainsRune(formulaSigns, rune(rest[0])) {
		return false
	}
	_, err := plant.ParseDecimal(s)
	return err != nil // a negative number is one
}

// guard keeps a text from being taken for a formula, and unguard takes that back.
func guard(s string) string {
	if guarded(s) {
		return "'" + s
	}
	return s
}

func unguard(s string) string {
	if strings.HasPrefix(s, "'") && guarded(s[1:]) {
		return s[1:]
	}
	return s
}
