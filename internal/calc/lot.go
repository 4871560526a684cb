package calc

import (
	"errors"
	"fmt"

	"holdfast/internal/spc/lot"
)

var lots = []Topic{
	topic("lot", "A single sampling plan: chance of acceptance, outgoing quality, total inspection.",
		`{"n": 89, "c": 2, "lot": 10000, "fractions": [0.01, 0.02, 0.05], "model": "binomial"}`, lotSingle),
	topic("lot-double", "A double sampling plan: chance of acceptance and average sample number.",
		`{"n1": 50, "c1": 1, "r1": 4, "n2": 100, "c2": 3, "fractions": [0.01, 0.05], "model": "binomial"}`, lotDouble),
	topic("lot-sequential", "An item by item plan for two risks, with its decision numbers.",
		`{"p1": 0.01, "alpha": 0.05, "p2": 0.06, "beta": 0.1, "n": [20, 50, 100]}`, lotSequential),
	topic("lot-plan", "The smallest sample that keeps two risks.",
		`{"p1": 0.01, "alpha": 0.05, "p2": 0.06, "beta": 0.1, "model": "binomial"}`, lotPlan),
	topic("lot-least", "The plan of least total inspection for a bad fraction (ltpd) or a bound on outgoing quality (aoql).",
		`{"ltpd": 0.05, "beta": 0.1, "average": 0.005, "model": "binomial", "lot": 2000}`, lotLeast),
	topic("lot-standard", "The single sampling plan of ISO 2859-1 for a lot or a code letter (from memory: confirm it in the standard).",
		`{"lot": 1500, "level": 2, "aql": 1.0, "severity": "normal"}`, lotStandard),
	topic("lot-switching", "Normal, tightened and reduced inspection by the switching rules of ISO 2859-1 (from memory).",
		`{"lots": [{"accepted": true, "acceptance_number": 1, "accepted_tighter": true}, {"accepted": false, "acceptance_number": 1, "accepted_tighter": false}]}`, lotSwitching),
}

// maxFractions bounds the points of a curve.
const maxFractions = 2000

func checkModel(m lot.Model, size *int) error {
	switch {
	case m != lot.Binomial && m != lot.Poisson && m != lot.Hypergeometric:
		return fmt.Errorf("model must be binomial, poisson or hypergeometric, not %q", m)
	case m == lot.Hypergeometric && size == nil:
		return errors.New("the hypergeometric model needs the size of the lot")
	case size != nil && *size < 1:
		return fmt.Errorf("lot must have at least 1 unit, not %d; null is an endless one", *size)
	}
	return nil
}

func checkFractions(f []float64) error {
	if len(f) > maxFractions {
		return fmt.Errorf("at most %d fractions are taken", maxFractions)
	}
	return nil
}

func sizeOf(lot *int) int {
	if lot == nil {
		return 0
	}
	return *lot
}

type lotIn struct {
	N           int       `json:"n"`
	C           int       `json:"c"`
	Lot         *int      `json:"lot"`
	Fractions   []float64 `json:"fractions"`
	Model       lot.Model `json:"model"`
	FalseReject float64   `json:"false_reject,omitempty"`
	Miss        float64   `json:"miss,omitempty"`
}

type lotOut struct {
	Accept []float64 `json:"accept"`
	AOQ    []float64 `json:"aoq"`
	ATI    []float64 `json:"ati"`
	AOQL   float64   `json:"aoql"`
	AOQLAt float64   `json:"aoql_at"`
	// AcceptsFound remarks on a plan that accepts lots in which nonconforming units were
	// found: some customers demand an acceptance number of zero.
	AcceptsFound bool `json:"accepts_found"`
}

func lotSingle(in lotIn) (lotOut, error) {
	if err := errors.Join(checkModel(in.Model, in.Lot), checkFractions(in.Fractions)); err != nil {
		return lotOut{}, err
	}
	i := lot.Inspection{Plan: lot.Plan{N: in.N, C: in.C}, Model: in.Model, Lot: sizeOf(in.Lot), Errors: lot.Errors{FalseReject: in.FalseReject, Miss: in.Miss}}
	out := lotOut{Accept: []float64{}, AOQ: []float64{}, AcceptsFound: i.Plan.AcceptsFound()}
	for k, p := range in.Fractions {
		where := func(err error) error { return fmt.Errorf("fractions[%d]: %w", k, err) }
		a, err := i.Accept(p)
		if err != nil {
			return lotOut{}, where(err)
		}
		q, err := i.AOQ(p)
		if err != nil {
			return lotOut{}, where(err)
		}
		out.Accept, out.AOQ = append(out.Accept, plain(a)), append(out.AOQ, plain(q))
		if in.Lot != nil {
			t, err := i.ATI(p)
			if err != nil {
				return lotOut{}, where(err)
			}
			out.ATI = append(out.ATI, t)
		}
	}
	if in.Lot != nil {
		out.ATI = list(out.ATI)
	}
	var err error
	out.AOQL, out.AOQLAt, err = i.AOQL()
	return out, err
}

type lotDoubleIn struct {
	N1          int       `json:"n1"`
	C1          int       `json:"c1"`
	R1          int       `json:"r1"`
	N2          int       `json:"n2"`
	C2          int       `json:"c2"`
	Lot         *int      `json:"lot"`
	Fractions   []float64 `json:"fractions"`
	Model       lot.Model `json:"model"`
	FalseReject float64   `json:"false_reject,omitempty"`
	Miss        float64   `json:"miss,omitempty"`
}

type lotDoubleOut struct {
	Accept       []float64 `json:"accept"`
	ASN          []float64 `json:"asn"`
	AcceptFirst  []float64 `json:"accept_first"`
	RejectFirst  []float64 `json:"reject_first"`
	ASNCurtailed []float64 `json:"asn_curtailed"`
}

func lotDouble(in lotDoubleIn) (lotDoubleOut, error) {
	if err := errors.Join(checkModel(in.Model, in.Lot), checkFractions(in.Fractions)); err != nil {
		return lotDoubleOut{}, err
	}
	i := lot.DoubleInspection{
		Plan: lot.DoublePlan{N1: in.N1, C1: in.C1, R1: in.R1, N2: in.N2, C2: in.C2}, Model: in.Model, Lot: sizeOf(in.Lot),
		Errors: lot.Errors{FalseReject: in.FalseReject, Miss: in.Miss},
	}
	out := lotDoubleOut{Accept: []float64{}, ASN: []float64{}, AcceptFirst: []float64{}, RejectFirst: []float64{}, ASNCurtailed: []float64{}}
	for k, p := range in.Fractions {
		c, err := i.At(p)
		if err != nil {
			return lotDoubleOut{}, fmt.Errorf("fractions[%d]: %w", k, err)
		}
		out.Accept, out.ASN = append(out.Accept, plain(c.Accept)), append(out.ASN, c.ASN)
		out.AcceptFirst, out.RejectFirst = append(out.AcceptFirst, plain(c.AcceptFirst)), append(out.RejectFirst, plain(c.RejectFirst))
		out.ASNCurtailed = append(out.ASNCurtailed, c.ASNCurtailed)
	}
	return out, nil
}

type lotSequentialIn struct {
	P1    float64 `json:"p1"`
	Alpha float64 `json:"alpha"`
	P2    float64 `json:"p2"`
	Beta  float64 `json:"beta"`
	N     []int   `json:"n,omitempty"`
}

type lotSequentialOut struct {
	H1            float64 `json:"h1"`
	H2            float64 `json:"h2"`
	Slope         float64 `json:"slope"`
	AcceptAtMost  []*int  `json:"accept_at_most"`
	RejectAtLeast []*int  `json:"reject_at_least"`
}

func lotSequential(in lotSequentialIn) (lotSequentialOut, error) {
	s, err := lot.NewSequential(lot.Risks{P1: in.P1, Alpha: in.Alpha, P2: in.P2, Beta: in.Beta})
	if err != nil {
		return lotSequentialOut{}, err
	}
	out := lotSequentialOut{H1: s.H1, H2: s.H2, Slope: s.Slope, AcceptAtMost: []*int{}, RejectAtLeast: []*int{}}
	for k, n := range in.N {
		step, err := s.At(n)
		if err != nil {
			return lotSequentialOut{}, fmt.Errorf("n[%d]: %w", k, err)
		}
		out.AcceptAtMost, out.RejectAtLeast = append(out.AcceptAtMost, step.AcceptAtMost), append(out.RejectAtLeast, step.RejectAtLeast)
	}
	return out, nil
}

type lotPlanIn struct {
	P1          float64   `json:"p1"`
	Alpha       float64   `json:"alpha"`
	P2          float64   `json:"p2"`
	Beta        float64   `json:"beta"`
	Model       lot.Model `json:"model"`
	Lot         *int      `json:"lot"`
	FalseReject float64   `json:"false_reject,omitempty"`
	Miss        float64   `json:"miss,omitempty"`
}

type lotPlanOut struct {
	N            int     `json:"n"`
	C            int     `json:"c"`
	Alpha        float64 `json:"alpha"`
	Beta         float64 `json:"beta"`
	AcceptsFound bool    `json:"accepts_found"`
}

func lotPlan(in lotPlanIn) (lotPlanOut, error) {
	if err := checkModel(in.Model, in.Lot); err != nil {
		return lotPlanOut{}, err
	}
	f, err := lot.Smallest(lot.Risks{P1: in.P1, Alpha: in.Alpha, P2: in.P2, Beta: in.Beta}, in.Model, sizeOf(in.Lot),
		lot.Errors{FalseReject: in.FalseReject, Miss: in.Miss})
	return lotPlanOut{N: f.Plan.N, C: f.Plan.C, Alpha: plain(f.Alpha), Beta: plain(f.Beta), AcceptsFound: f.Plan.AcceptsFound()}, err
}

type lotLeastIn struct {
	LTPD        number    `json:"ltpd"`
	AOQL        number    `json:"aoql"`
	Beta        number    `json:"beta"`
	Average     float64   `json:"average"`
	Model       lot.Model `json:"model"`
	Lot         int       `json:"lot"`
	FalseReject float64   `json:"false_reject,omitempty"`
	Miss        float64   `json:"miss,omitempty"`
}

type lotLeastOut struct {
	N      int     `json:"n"`
	C      int     `json:"c"`
	ATI    float64 `json:"ati"`
	AOQL   float64 `json:"aoql"`
	AtLTPD number  `json:"accept_at_ltpd"`
}

func lotLeast(in lotLeastIn) (lotLeastOut, error) {
	switch {
	case (in.LTPD == nil) == (in.AOQL == nil):
		return lotLeastOut{}, errors.New("give either ltpd or aoql")
	case in.AOQL != nil && in.Beta != nil:
		return lotLeastOut{}, errors.New("beta belongs to ltpd")
	}
	if err := checkModel(in.Model, &in.Lot); err != nil {
		return lotLeastOut{}, err
	}
	e := lot.Errors{FalseReject: in.FalseReject, Miss: in.Miss}
	var r lot.Rectifying
	var err error
	if in.LTPD != nil {
		r, err = lot.LeastForLTPD(*in.LTPD, orDefault(in.Beta, 0.1), in.Average, in.Model, in.Lot, e)
	} else {
		r, err = lot.LeastForAOQL(*in.AOQL, in.Average, in.Model, in.Lot, e)
	}
	return lotLeastOut{N: r.Plan.N, C: r.Plan.C, ATI: r.ATI, AOQL: r.AOQL, AtLTPD: r.AtLTPD}, err
}

type lotStandardIn struct {
	Lot      *int         `json:"lot"`
	Level    int          `json:"level,omitempty"`
	Letter   string       `json:"letter,omitempty"`
	AQL      float64      `json:"aql"`
	Severity lot.Severity `json:"severity,omitempty"`
}

type lotStandardOut struct {
	Letter string `json:"letter"`
	N      int    `json:"n"`
	C      int    `json:"c"`
	// ReducedN is the sample of reduced inspection.
	ReducedN int `json:"reduced_n"`
	// TighterC is the acceptance number one AQL step tighter, for the switching score;
	// null where there is none.
	TighterC *int `json:"tighter_c"`
}

func lotStandard(in lotStandardIn) (lotStandardOut, error) {
	if (in.Lot == nil) == (in.Letter == "") {
		return lotStandardOut{}, errors.New("give either lot, the number of units, or letter, the code letter")
	}
	out := lotStandardOut{Letter: in.Letter}
	if in.Lot != nil {
		level := in.Level
		if level == 0 {
			level = int(lot.LevelII)
		}
		letter, err := lot.CodeLetter(*in.Lot, lot.Level(level))
		if err != nil {
			return lotStandardOut{}, err
		}
		out.Letter = letter
	} else if in.Level != 0 {
		return lotStandardOut{}, errors.New("level belongs to lot; the letter is given")
	}
	severity := in.Severity
	if severity == "" {
		severity = lot.NormalInspection
	}
	plan, err := lot.ISOPlan(out.Letter, in.AQL, severity)
	if err != nil {
		return lotStandardOut{}, err
	}
	out.N, out.C = plan.N, plan.C
	if out.ReducedN, err = lot.ReducedSample(out.Letter); err != nil {
		return lotStandardOut{}, err
	}
	if c, err := lot.ISOTighter(out.Letter, in.AQL); err == nil {
		out.TighterC = &c
	}
	return out, nil
}

type lotSwitchingIn struct {
	Start lot.Severity  `json:"start,omitempty"`
	Lots  []lotResultIn `json:"lots"`
}

type lotResultIn struct {
	Accepted         bool `json:"accepted"`
	AcceptanceNumber int  `json:"acceptance_number"`
	AcceptedTighter  bool `json:"accepted_tighter"`
	Irregular        bool `json:"irregular,omitempty"`
	ReducedAllowed   bool `json:"reduced_allowed,omitempty"`
}

type lotSwitchingOut struct {
	// After holds the severity for the lot that follows each one, and Reason why it
	// changed there, null where it did not.
	After  []lot.Severity `json:"after"`
	Reason []*lot.Reason  `json:"reason"`
	Score  []int          `json:"score"`
}

func lotSwitching(in lotSwitchingIn) (lotSwitchingOut, error) {
	out := lotSwitchingOut{After: []lot.Severity{}, Reason: []*lot.Reason{}, Score: []int{}}
	s := lot.Switching{Severity: in.Start}
	for i, r := range in.Lots {
		next, reason, err := s.Next(lot.Result(r))
		if err != nil {
			return lotSwitchingOut{}, fmt.Errorf("lots[%d]: %w", i, err)
		}
		s = next
		severity := s.Severity
		if severity == "" {
			severity = lot.NormalInspection
		}
		out.After, out.Score = append(out.After, severity), append(out.Score, s.Score)
		if reason == lot.NoChange {
			out.Reason = append(out.Reason, nil)
		} else {
			out.Reason = append(out.Reason, &reason)
		}
	}
	return out, nil
}
