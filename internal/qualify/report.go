package qualify

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"runtime/debug"
	"time"
)

// Result is one case with what this machine obtained.
type Result struct {
	Group      string  `json:"group"`
	Name       string  `json:"name"`
	Source     string  `json:"source"`
	Status     Status  `json:"status"`
	Expected   float64 `json:"expected"`
	Obtained   float64 `json:"obtained"`
	Difference float64 `json:"difference"`
	Allowance  float64 `json:"allowance"`
	Basis      string  `json:"basis"`
	Passed     bool    `json:"passed"`
	// Problem tells why there is no obtained value, when there is none.
	Problem string `json:"problem,omitempty"`
}

// GroupTotal sums up one group.
type GroupTotal struct {
	Name    string  `json:"name"`
	Passed  int     `json:"passed"`
	Failed  int     `json:"failed"`
	Seconds float64 `json:"seconds"`
}

// Record is a finished qualification: plain data for a print-out or a page.
type Record struct {
	Program  string       `json:"program"`
	Version  string       `json:"version"`
	Revision string       `json:"revision"`
	Modified bool         `json:"modified"`
	Go       string       `json:"go"`
	OS       string       `json:"os"`
	Arch     string       `json:"arch"`
	CPUs     int          `json:"cpus"`
	Began    time.Time    `json:"began"`
	Seconds  float64      `json:"seconds"`
	Passed   int          `json:"passed"`
	Failed   int          `json:"failed"`
	Groups   []GroupTotal `json:"groups"`
	Results  []Result     `json:"results"`
}

// Options of a Report. The zero value runs everything in silence.
type Options struct {
	// Begin is told the record before anything is computed, Each every result as it
	// comes, and Group every group as it ends.
	Begin func(Record)
	Each  func(Result)
	Group func(GroupTotal)
}

// Report recomputes every case on this machine. A failed case is no error; an error is
// a file of cases that cannot be read, or a context that has ended.
func Report(ctx context.Context, opt Options) (Record, error) {
	began := time.Now()
	r := Record{
		Program: "holdfast", Go: runtime.Version(), OS: runtime.GOOS, Arch: runtime.GOARCH, CPUs: runtime.NumCPU(),
		Began: began.UTC().Truncate(time.Second), Version: "unknown",
	}
	if info, ok := debug.ReadBuildInfo(); ok {
		r.Version = info.Main.Version
		for _, s := range info.Settings {
			switch s.Key {
			case "vcs.revision":
				r.Revision = s.Value
			case "vcs.modified":
				r.Modified = s.Value == "true"
			}
		}
	}
	if opt.Begin != nil {
		opt.Begin(r)
	}
	for _, g := range groups {
		cases, err := g.cases()
		if err != nil {
			return r, err
		}
		total, start := GroupTotal{Name: g.name}, time.Now()
		for _, c := range cases {
			if err := ctx.Err(); err != nil {
				return r, err
			}
			result := c.run()
			if result.Passed {
				total.Passed++
			} else {
				total.Failed++
			}
			r.Results = append(r.Results, result)
			if opt.Each != nil {
				opt.Each(result)
			}
		}
		total.Seconds = time.Since(start).Seconds()
		r.Groups = append(r.Groups, total)
		r.Passed += total.Passed
		r.Failed += total.Failed
		if opt.Group != nil {
			opt.Group(total)
		}
	}
	r.Seconds = time.Since(began).Seconds()
	return r, nil
}

// run recomputes one case.
func (c Case) run() Result {
	r := Result{
		Group: c.Group, Name: c.Name, Source: c.Source, Status: c.Status,
		Expected: c.Expected, Allowance: c.Allowance, Basis: c.Basis,
	}
	value, se, err := c.obtain()
	if err == nil && (math.IsNaN(value) || math.IsInf(value, 0) || math.IsNaN(se) || math.IsInf(se, 0)) {
		err = errors.New("the value is not a finite number")
	}
	if err != nil {
		r.Problem = err.Error()
		return r
	}
	r.Obtained = value
	r.Difference = value - c.Expected
	r.Allowance += 4 * math.Hypot(se, c.SE)
	r.Passed = math.Abs(r.Difference) <= r.Allowance
	return r
}

// group is one theme of cases.
type group struct {
	name  string
	build func() ([]Case, error)
}

func (g group) cases() ([]Case, error) {
	cases, err := g.build()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", g.name, err)
	}
	for i := range cases {
		cases[i].Group = g.name
	}
	return cases, nil
}
