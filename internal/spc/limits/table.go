package limits

import "holdfast/internal/spc/factor"

// Table gives the bands of one standard for any size and keeps each once it has
// been asked for. It serves one goroutine; make one per goroutine or per replay.
type Table struct {
	standard Standard
	rows     []row
}

type row struct {
	location, dispersion Band
	known                bool
}

// Table returns an empty table of the standard, or the error of Check.
func (s Standard) Table() (*Table, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	return &Table{standard: s}, nil
}

// Bands is Standard.Bands, computed at the first call for a size only.
func (t *Table) Bands(n int) (location, dispersion Band, err error) {
	if n >= 1 && n < len(t.rows) && t.rows[n].known {
		return t.rows[n].location, t.rows[n].dispersion, nil
	}
	location, dispersion, err = t.standard.Bands(n)
	if err != nil {
		return location, dispersion, err
	}
	if n >= len(t.rows) {
		rows := make([]row, min(2*n, factor.MaxSize)+1)
		copy(rows, t.rows)
		t.rows = rows
	}
	t.rows[n] = row{location, dispersion, true}
	return location, dispersion, nil
}
