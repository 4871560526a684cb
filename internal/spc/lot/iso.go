package lot

import (
	"fmt"
	"slices"
)

// The single sampling tables of ISO 2859-1 as recalled: code letters, sample sizes, and
// acceptance numbers of normal and tightened inspection for AQL 0.010 to 10 percent.
// They are quoted from memory. Confirm an entry against a copy of the standard before
// relying on it.
//
// The acceptance numbers run along the diagonals of the table: from one letter to the
// next, and from one AQL to the next, the sample or the AQL grows by the fifth root of
// ten, so equal products have equal numbers.

// Level is a general inspection level; LevelII is the usual one.
type Level int

const (
	LevelI Level = 1 + iota
	LevelII
	LevelIII
)

// codeLetters are the letters, without I and O.
const codeLetters = "ABCDEFGHJKLMNPQR"

var (
	isoSamples  = [len(codeLetters)]int{2, 3, 5, 8, 13, 20, 32, 50, 80, 125, 200, 315, 500, 800, 1250, 2000}
	isoReduced  = [len(codeLetters)]int{2, 2, 2, 3, 5, 8, 13, 20, 32, 50, 80, 125, 200, 315, 500, 800}
	isoLots     = [...]int{8, 15, 25, 50, 90, 150, 280, 500, 1200, 3200, 10000, 35000, 150000, 500000}
	isoByLevel  = [...]string{LevelI: "AABCCDEFGHJKLMN", LevelII: "ABCDEFGHJKLMNPQ", LevelIII: "BCDEFGHJKLMNPQR"}
	isoAQL      = [...]float64{0.010, 0.015, 0.025, 0.040, 0.065, 0.10, 0.15, 0.25, 0.40, 0.65, 1.0, 1.5, 2.5, 4.0, 6.5, 10}
	isoNormal   = [...]int{0, up, down, 1, 2, 3, 5, 7, 10, 14, 21}
	isoTightens = [...]int{0, down, down, 1, 2, 3, 5, 8, 12, 18}
)

// Arrows of the table: take the first plan below or above, with its sample.
const (
	down = -1
	up   = -2
)

// Where the first acceptance number stands: letter plus AQL, both counted from 0.
const (
	normalDiagonal    = 14
	tightenedDiagonal = 15
)

// AQLs lists the AQL columns in percent.
func AQLs() []float64 { return slices.Clone(isoAQL[:]) }

// CodeLetter returns the code letter of a lot of at least two units.
//
// Source: ISO 2859-1, table 1 (from memory).
func CodeLetter(lot int, level Level) (string, error) {
	if lot < 2 {
		return "", invalid("the lot must hold at least 2 units, got %d", lot)
	}
	if level < LevelI || level > LevelIII {
		return "", invalid("the inspection level must be I, II or III, got %d", int(level))
	}
	row := 0
	for row < len(isoLots) && lot > isoLots[row] {
		row++
	}
	return isoByLevel[level][row : row+1], nil
}

// ReducedSample returns the sample of reduced inspection of a code letter. Its
// acceptance numbers are not held here: take them from the standard.
//
// Source: ISO 2859-1, table 2-C (from memory).
func ReducedSample(letter string) (int, error) {
	i, err := letterIndex(letter)
	if err != nil {
		return 0, err
	}
	return isoReduced[i], nil
}

// ISOPlan returns the single sampling plan of a code letter and an AQL in percent for
// normal or tightened inspection. Where the table has an arrow it is the plan that the
// arrow leads to, with its own sample. The caller compares the sample with the lot: one
// as large as the lot means that every unit is inspected.
//
// Source: ISO 2859-1, tables 2-A and 2-B (from memory).
func ISOPlan(letter string, aql float64, s Severity) (Plan, error) {
	i, err := letterIndex(letter)
	if err != nil {
		return Plan{}, err
	}
	column := slices.Index(isoAQL[:], aql)
	if column < 0 {
		return Plan{}, invalid("there is no AQL column %g %%; the columns are %v", aql, isoAQL)
	}
	numbers, first := isoNormal[:], normalDiagonal
	switch s {
	case NormalInspection, "":
	case TightenedInspection:
		numbers, first = isoTightens[:], tightenedDiagonal
	case ReducedInspection:
		return Plan{}, invalid("the acceptance numbers of reduced inspection are not held here: take them from the standard")
	default:
		return Plan{}, invalid("there are no plans for inspection that is %s", s)
	}
	place := i + column - first
	switch {
	case place < 0:
		place = 0
	case place >= len(numbers):
		place = len(numbers) - 1
	case numbers[place] == up && first-column > 0:
		place--
	case numbers[place] == up:
		// Nothing stands above the first letter.
		place++
	}
	for numbers[place] == down {
		place++
	}
	row := place + first - column
	if row < 0 || row >= len(codeLetters) {
		return Plan{}, fmt.Errorf("%w: the recalled table has no plan for letter %s at an AQL of %g %%", ErrNoPlan, letter, aql)
	}
	return Plan{isoSamples[row], numbers[place]}, nil
}

// ISOTighter returns the acceptance number of the same letter one AQL step tighter, by
// which the switching score judges plans with an acceptance number of 2 or more.
//
// Source: ISO 2859-1, switching score (from memory).
func ISOTighter(letter string, aql float64) (int, error) {
	i, err := letterIndex(letter)
	if err != nil {
		return 0, err
	}
	column := slices.Index(isoAQL[:], aql)
	place := i + column - normalDiagonal
	if column < 1 || place < 1 || place >= len(isoNormal) || isoNormal[place] < 2 {
		return 0, invalid("the score of letter %s at an AQL of %g %% does not ask for a tighter plan", letter, aql)
	}
	return isoNormal[place-1], nil
}

func letterIndex(letter string) (int, error) {
	for i := range codeLetters {
		if letter == codeLetters[i:i+1] {
			return i, nil
		}
	}
	return 0, invalid("there is no code letter %q", letter)
}
