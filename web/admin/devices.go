package admin

import (
	"errors"
	"net"
	"net/http"
	"net/netip"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// devicesView is the page of tablets, wall screens and senders.
type devicesView struct {
	Codes     []codeView
	Devices   []deviceView
	Revoked   []deviceView
	New       newDevice
	Lines     []placeView
	Stations  []placeView
	EnrolAt   string
	Languages []ui.Language // that a tablet can speak
	Trust     string        // page of the server's own authority; "" where it has none
	Done      string
}

type codeView struct {
	ID, Code, Name, Kind, Until string
	At                          string // the address at which it is typed
	Curl                        string // what fetches the token of a sender, "" for what has a browser
	QR                          qrView // of that address with the code
	OnlyHere                    string // what lets other machines reach the server, where none does
	Trust, TrustPage            string // of the server's own authority, in full and from here; "" where it has none
}

type deviceView struct {
	ID, Name, Kind, Where, Contact, Revoked string
	IsTablet, IsWall                        bool
	Lock, Language                          string
	Place                                   string // id of its station or line
	Problem                                 string
}

type newDevice struct {
	Kind, Name, Station, Line, Lock string
	Problem                         string
}

type placeView struct{ ID, Name string }

func (a *Admin) devices(w http.ResponseWriter, r *http.Request) error {
	return a.showDevices(w, r, http.StatusOK, newDevice{Kind: string(plant.Tablet), Lock: minutes(plant.DefaultLock)}, uuid.Nil, "")
}

func minutes(d time.Duration) string { return strconv.Itoa(int(d / time.Minute)) }

// showDevices is the page, with what is wrong about a new device or about one of them.
func (a *Admin) showDevices(w http.ResponseWriter, r *http.Request, status int, add newDevice, about uuid.UUID, problem string) error {
	ctx := r.Context()
	all, err := a.staff.Store.Devices(ctx)
	if err != nil {
		return err
	}
	codes, err := a.staff.Store.DeviceCodes(ctx)
	if err != nil {
		return err
	}
	lines, stations, err := a.staff.Store.Places(ctx)
	if err != nil {
		return err
	}
	s := staffShell(r, "staff.devices")
	t := s.Words
	v := devicesView{New: add, Languages: ui.Languages()}
	names := map[uuid.UUID]string{}
	for _, l := range lines {
		names[l.ID] = l.Name
		v.Lines = append(v.Lines, placeView{l.ID.String(), l.Name})
	}
	for _, st := range stations {
		names[st.ID] = st.Name
		v.Stations = append(v.Stations, placeView{st.ID.String(), t.T("staff.station-of", st.Name, names[st.LineID])})
	}
	for _, c := range codes {
		v.Codes = append(v.Codes, a.codeOf(r, s, c))
	}
	if len(v.Codes) > 0 {
		s.Scripts = []string{"js/admin-codes.js"} // the list shows by itself that a device came in
	}
	for _, d := range all {
		one := deviceView{ID: d.ID.String(), Name: d.Name, Kind: t.T("staff.kind." + string(d.Kind)),
			IsTablet: d.Kind == plant.Tablet, IsWall: d.Kind == plant.Wall, Lock: minutes(d.LockAfter), Language: d.Language, Contact: s.Format.Clock(d.LastContact)}
		switch {
		case d.Station != uuid.Nil:
			one.Where, one.Place = names[d.Station], d.Station.String()
		case d.Line != uuid.Nil:
			one.Where, one.Place = names[d.Line], d.Line.String()
		default:
			one.Where = t.T("staff.whole-plant")
		}
		if d.ID == about {
			one.Problem = problem
		}
		if d.Active() {
			v.Devices = append(v.Devices, one)
		} else {
			one.Revoked = s.Format.Clock(d.RevokedAt)
			v.Revoked = append(v.Revoked, one)
		}
	}
	return ui.Render(w, r, status, devicesPage(s, v))
}

// codeOf is a code that waits, with how it is used.
func (a *Admin) codeOf(r *http.Request, s ui.Shell, c plant.DeviceCode) codeView {
	base, onlyHere := a.reachedAt(r)
	one := codeView{ID: c.ID.String(), Code: c.Code[:4] + " " + c.Code[4:], Name: c.Device.Name, Kind: s.Words.T("staff.kind." + string(c.Device.Kind)),
		Until: s.Format.Time(c.ExpiresAt), At: base + "/enrol", TrustPage: a.staff.AuthorityAt}
	if one.TrustPage != "" {
		one.Trust = base + one.TrustPage
	}
	if c.Device.Kind == plant.Sender {
		one.Curl = enrolByCurl(one.At, c.Code, one.Trust != "")
		return one
	}
	switch {
	case !onlyHere:
		one.QR = qrOf(one.At + "?code=" + c.Code)
	case ui.FrameOf(r).Secure: // only the address keeps others away
		one.OnlyHere = s.Words.T("staff.only-here-addr")
	default:
		one.OnlyHere = s.Words.T("staff.only-here")
	}
	return one
}

// reachedAt is the address at which devices reach the server: that of this request, unless
// it leads to this machine only and the server has another. onlyHere means that it has none.
func (a *Admin) reachedAt(r *http.Request) (base string, onlyHere bool) {
	scheme := "http://"
	if ui.FrameOf(r).Secure {
		scheme = "https://"
	}
	host := r.Host
	if name, _, err := net.SplitHostPort(host); err == nil {
		host = name
	}
	ip, err := netip.ParseAddr(strings.Trim(host, "[]"))
	if host != "localhost" && (err != nil || !ip.IsLoopback()) {
		return scheme + r.Host, false
	}
	if a.staff.Outside != nil {
		if at := a.staff.Outside(); at != "" {
			return at, false
		}
	}
	return scheme + r.Host, true
}

// enrolByCurl is the line that lets a sender in, which has no browser.
func enrolByCurl(at, code string, ownAuthority bool) string {
	trust := ""
	if ownAuthority {
		trust = "--cacert authority.pem "
	}
	return "curl " + trust + "-X POST " + at + " -H 'Accept: application/json' -d code=" + code
}

// posted reads a device from a form. A place that cannot be read is none, and the device
// is refused where it needs one.
func posted(r *http.Request) plant.Device {
	d := plant.Device{Kind: plant.DeviceKind(r.PostForm.Get("kind")), Name: r.PostForm.Get("name")}
	d.Station, _ = uuid.Parse(r.PostForm.Get("station"))
	d.Line, _ = uuid.Parse(r.PostForm.Get("line"))
	n, err := strconv.Atoi(r.PostForm.Get("lock"))
	if err != nil && r.PostForm.Get("lock") != "" || n < 0 || n > 1000 {
		n = 1000 // refused as out of bounds
	}
	d.LockAfter = time.Duration(n) * time.Minute
	return d
}

func (a *Admin) makeCode(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	_, err := a.staff.Store.MakeDeviceCode(r.Context(), posted(r), f.Person.ID)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		add := newDevice{Kind: r.PostForm.Get("kind"), Name: plant.CleanText(r.PostForm.Get("name")), Station: r.PostForm.Get("station"),
			Line: r.PostForm.Get("line"), Lock: r.PostForm.Get("lock"), Problem: f.Words.Problem(pe)}
		return a.showDevices(w, r, ui.StatusOf(pe.Kind), add, uuid.Nil, "")
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, backOr(r, devicesAddress))
	return nil
}

// backOr is the page that a form was on, if it says which, else another.
func backOr(r *http.Request, otherwise string) string {
	if !r.PostForm.Has("to") {
		return otherwise
	}
	return ui.LocalPath(r.PostForm.Get("to"))
}

func (a *Admin) withdrawCode(w http.ResponseWriter, r *http.Request) error {
	id, err := staffID(r, "code")
	if err != nil {
		return err
	}
	if err := a.staff.Store.WithdrawDeviceCode(r.Context(), id); err != nil {
		return err
	}
	ui.Redirect(w, r, backOr(r, devicesAddress))
	return nil
}

func (a *Admin) changeDevice(w http.ResponseWriter, r *http.Request) error {
	id, err := staffID(r, "device")
	if err != nil {
		return err
	}
	d := posted(r)
	d.ID, d.Language = id, r.PostForm.Get("language")
	if _, known := words.Known(d.Language); d.Language != "" && !known {
		return a.deviceDone(w, r, id, plant.Invalidf("language", "There is no such language here. Pick one from the list."))
	}
	return a.deviceDone(w, r, id, a.staff.Store.ChangeDevice(r.Context(), d, ui.FrameOf(r).Person.ID))
}

func (a *Admin) revokeDevice(w http.ResponseWriter, r *http.Request) error {
	id, err := staffID(r, "device")
	if err != nil {
		return err
	}
	return a.deviceDone(w, r, id, a.staff.Store.RevokeDevice(r.Context(), id, ui.FrameOf(r).Person.ID))
}

func (a *Admin) deviceDone(w http.ResponseWriter, r *http.Request, id uuid.UUID, err error) error {
	a.staff.DeviceChanged(id)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind != plant.NotFound {
		return a.showDevices(w, r, ui.StatusOf(pe.Kind), newDevice{Kind: string(plant.Tablet), Lock: minutes(plant.DefaultLock)}, id, ui.FrameOf(r).Words.Problem(pe))
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, devicesAddress)
	return nil
}
