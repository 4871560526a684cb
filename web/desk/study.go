package desk

import (
	"context"
	"errors"
	"fmt"
	"net/http"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
)

// studied is a study that was computed, with all that its pages show.
type studied struct {
	state  studyState
	h      plant.History
	f      ui.Format
	causes []plant.Cause

	trial plant.Study
	err   error        // why there are no trial limits, nil when there are
	whole *plant.Study // with nothing left out; nil where that gives none
	lost  int          // exclusions that lie outside of the stretch
	basis basisCheck
}

// basisCheck is the two-sample comparison with the basis of the revision in force.
type basisCheck struct {
	Result  limits.Comparison
	Done    bool
	Overlap bool // both rest on some of the same subgroups, so they are not two samples
}

// compute reads the stretch and runs the study; problems that a person can mend are in
// state.problems and err.
func (d *Desk) compute(ctx context.Context, f ui.Format, id uuid.UUID, state studyState) (*studied, error) {
	stretch := state.stretch()
	if state.problems["from"] != "" || state.problems["to"] != "" || state.problems["last"] != "" {
		stretch = plant.Stretch{Last: LiveStretch}
	}
	h, err := d.store.History(ctx, id, stretch)
	if err != nil {
		return nil, err
	}
	if !h.Clipped {
		state.pin(h.Points)
	}
	state.complete(h)
	s := &studied{state: state, h: h, f: f}
	if s.causes, err = d.store.Causes(ctx, h.Station.Family); err != nil {
		return nil, err
	}
	return s, nil
}

// run computes the trial limits.
func (s *studied) run() error {
	if s.h.Clipped {
		s.err = plant.Invalidf("from", "%s", s.f.Words.T("desk.study.too-long", len(s.h.Points)))
		return nil
	}
	if len(s.h.Points) == 0 {
		s.err = plant.Invalidf("from", "%s", s.f.Words.T("desk.study.nothing"))
		return nil
	}
	s.trial = s.study(s.leftOut())
	if err := s.trial.Run(s.h.Course); err != nil {
		if _, ok := errors.AsType[*plant.Error](err); !ok {
			return fmt.Errorf("run a limit study: %w", err)
		}
		s.err = err
		return nil
	}
	if len(s.trial.LeftOut) > 0 {
		if whole := s.study(nil); whole.Run(s.h.Course) == nil && whole.CanFreeze() {
			s.whole = &whole
		}
	}
	return nil
}

func (s *studied) study(out []plant.LeftOut) plant.Study {
	return plant.Study{Setup: s.h.State.Setup, Points: s.h.Points, LeftOut: out,
		Estimator: s.state.Estimator, Multiple: s.state.Multiple, Rules: s.state.Rules}
}

// leftOut are the exclusions within the stretch.
func (s *studied) leftOut() []plant.LeftOut {
	s.lost = len(s.state.Out)
	var out []plant.LeftOut
	for _, p := range s.h.Points {
		if cause := s.state.cause(p.Subgroup); cause != "" {
			out = append(out, plant.LeftOut{Subgroup: p.Subgroup, TakenAt: p.TakenAt, Cause: cause})
			s.lost--
		}
	}
	return out
}

// ready reports whether there are trial limits to show.
func (s *studied) ready() bool { return s.err == nil && s.trial.CanFreeze() }

// compareBasis compares the trial with the subgroups that the revision in force was
// computed from, by studying those again as they were studied then.
func (d *Desk) compareBasis(ctx context.Context, s *studied) error {
	rev := s.h.State.Revision
	if rev == nil || rev.Basis.Given || !s.ready() || rev.Chart != s.h.State.Setup.Chart {
		return nil
	}
	first, last := s.h.Points[0].TakenAt, s.h.Points[len(s.h.Points)-1].TakenAt
	if !rev.Basis.From.After(last) && !rev.Basis.To.Before(first) {
		s.basis.Overlap = true
		return nil
	}
	h, err := d.store.History(ctx, s.h.State.ID, plant.Stretch{From: rev.Basis.From, To: rev.Basis.To})
	if err != nil {
		return err
	}
	old := plant.Study{Setup: s.h.State.Setup, Points: h.Points, Estimator: rev.Estimator, Multiple: rev.Multiple, Rules: rev.Rules, LeftOut: rev.Basis.LeftOut}
	if h.Clipped || old.Run(h.Course) != nil || !old.CanFreeze() {
		return nil // the basis was corrected since, or is of another set-up: nothing to compare with
	}
	c, err := limits.Compare(old.Result.Estimated, s.trial.Result.Estimated)
	if err == nil {
		s.basis.Result, s.basis.Done = c, true
	}
	return nil
}

// showStudy shows a limit study; its buttons come back here with what they do.
func (d *Desk) showStudy(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	fr := ui.FrameOf(r)
	f := fr.Format()
	state := readStudy(r.URL.Query(), f)
	s, err := d.compute(r.Context(), f, id, state)
	if err != nil {
		return err
	}
	if changed := s.state.act(f, s.h); changed && len(s.state.problems) == 0 {
		// A step that is done must not be done again when the page is reloaded.
		if to := withQuery(address(id, "study"), s.state.values(f.Zone)); ui.LocalPath(to) != "/" {
			ui.Redirect(w, r, to)
			return nil
		}
		s.state.typed.Del("no")
		s.state.typed.Del("own")
	}
	if err := s.run(); err != nil {
		return err
	}
	if err := d.compareBasis(r.Context(), s); err != nil {
		return err
	}
	status := http.StatusOK
	if len(s.state.problems) > 0 || s.err != nil && s.state.asked() {
		status = http.StatusUnprocessableEntity
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("desk.study.title-of", s.h.State.Name))
	shell.Bar = bar(f.Words, id, true, "study")
	shell.Scripts = []string{"js/points.js", "js/desk-study.js"}
	return ui.Render(w, r, status, studyPage(shell, newStudyView(shell, s)))
}
