package station

import (
	"net/http"
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/web/ui"
)

// keyedWithin is how long ago somebody may have signed in at a tablet and still have
// keyed readings of a round that is saved now.
const keyedWithin = 24 * time.Hour

// keyedBy is who keyed the readings, one for all where it was one. It is empty when the
// form does not say, and then it was whoever sends.
func (e draftEntry) keyedBy(sender uuid.UUID) []uuid.UUID {
	var out []uuid.UUID
	said := false
	for _, r := range e.Readings {
		if !r.OK {
			continue
		}
		who := r.Keyed
		if who == uuid.Nil {
			who = sender
		} else {
			said = true
		}
		out = append(out, who)
	}
	if !said {
		return nil
	}
	if one := slices.Compact(slices.Clone(out)); len(one) == 1 {
		return one
	}
	return out
}

// strangers marks the readings that are said to be keyed by somebody who was not signed
// in at this tablet, and reports whether there are any. Away from a tablet nobody keys
// but who is signed in.
func (s *Surface) strangers(r *http.Request, d *draft) (bool, error) {
	f := ui.FrameOf(r)
	here := []uuid.UUID{uuid.Nil, f.Person.ID}
	asked, found := false, false
	for i := range d.Entries {
		for j := range d.Entries[i].Readings {
			reading := &d.Entries[i].Readings[j]
			if slices.Contains(here, reading.Keyed) {
				continue
			}
			if !asked && f.OnTablet() {
				asked = true
				present, err := s.store.Present(r.Context(), f.Device.ID, f.Now.Add(-keyedWithin))
				if err != nil {
					return false, err
				}
				if here = append(here, present...); slices.Contains(here, reading.Keyed) {
					continue
				}
			}
			reading.Raw, reading.OK, reading.Keyed = "", false, uuid.Nil
			reading.Problem = f.Words.T("devices.keyed-elsewhere")
			found = true
		}
	}
	return found, nil
}

// draftView is what the script needs to keep what is typed in this browser.
type draftView struct {
	Station string
	Person  string
	Tablet  bool // several people may key one round here
}
