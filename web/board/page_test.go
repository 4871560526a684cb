package board

import (
	"bytes"
	"context"
	"errors"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"net/url"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"
	"golang.org/x/net/html"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
	"holdfast/web/ui"
	"holdfast/web/words"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

func get(h http.Handler, path string) *httptest.ResponseRecorder {
	w := httptest.NewRecorder()
	h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, path, nil))
	return w
}

func attr(n *html.Node, name string) (string, bool) {
	for _, a := range n.Attr {
		if a.Key == name {
			return a.Val, true
		}
	}
	return "", false
}

// all returns the nodes for which an attribute has this value.
func all(t *testing.T, page []byte, name, value string) []*html.Node {
	t.Helper()
	root, err := html.Parse(bytes.NewReader(page))
	if err != nil {
		t.Fatal(err)
	}
	var out []*html.Node
	for n := range root.Descendants() {
		if v, ok := attr(n, name); ok && v == value {
			out = append(out, n)
		}
	}
	return out
}

func text(n *html.Node) string {
	var b strings.Builder
	for d := range n.Descendants() {
		if d.Type == html.TextNode {
			b.WriteString(d.Data + " ")
		}
	}
	return strings.Join(strings.Fields(b.String()), " ")
}

func visible(nodes []*html.Node) []*html.Node {
	var out []*html.Node
	for _, n := range nodes {
		if _, hidden := attr(n, "hidden"); !hidden {
			out = append(out, n)
		}
	}
	return out
}

func TestBoardOfARealPlant(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "not a secret")
	ctx := context.Background()
	for i := range 25 {
		d := int64(i % 3)
		p.MustRecord(t, p.Diameter, 14990+d, 14991, 14992-d, 14991, 14990)
		p.MustRecord(t, p.Length, 1000+d, 1001-d, 999)
		p.Clock.Advance(10 * time.Minute)
	}
	p.MustFreeze(t, p.Diameter)
	p.MustFreeze(t, p.Length)
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Diameter, 15010, 15011, 15010, 15012, 15011)
	p.Clock.Advance(4 * time.Minute)

	works, err := p.Plant(ctx)
	if err != nil {
		t.Fatal(err)
	}
	s := newSite(t, p, works, p.Clock.Now)
	client := signedIn(t, s, plant.Supervisor)
	page := read(t, client, s.URL+"/board", http.StatusOK)

	cards := all(t, page, "data-testid", "card")
	if len(cards) != 2 {
		t.Fatalf("%d cards of 2 stations", len(cards))
	}
	first := text(cards[0])
	for _, want := range []string{"Turning 1", "Axle seat diameter", "15.0108\u00a0mm", "Hold", "4 min", "owner: station", "Press force", "Grease mass"} {
		if !strings.Contains(first, strings.ReplaceAll(want, "\u00a0", " ")) && !strings.Contains(first, want) {
			t.Errorf("the card lacks %q: %s", want, first)
		}
	}
	if second := text(cards[1]); !strings.Contains(second, "Shoulder length") || !strings.Contains(second, "Leave") {
		t.Errorf("the other card: %s", second)
	}
	needed := ""
	for _, n := range all(t, page, "data-testid", "need") {
		needed += text(n) + "\n"
	}
	if !strings.Contains(needed, "Hold, Axle seat diameter (Lathe 1): outside specification, above the upper limit, at 15.012") || !strings.Contains(needed, "Nobody yet") {
		t.Errorf("needs a person:\n%s", needed)
	}
	engineering := all(t, page, "data-testid", "with-engineering")
	if len(engineering) != 1 || !strings.Contains(text(engineering[0]), "Press force") {
		t.Error("what has no limits is not with engineering")
	}

	// Taking the matter shows; the card leads to where it is worked at.
	states, err := p.StationStates(ctx, 25)
	if err != nil {
		t.Fatal(err)
	}
	matter := states[0].Characteristics[0].Matter
	if err := p.TakeMatter(ctx, matter.ID, matter.Version, p.Operator.ID); err != nil {
		t.Fatal(err)
	}
	page = read(t, client, s.URL+"/board", http.StatusOK)
	if !strings.Contains(string(page), "Operator 1 took it ") {
		t.Error("who took it is not said")
	}
	res, err := client.Get(s.URL + matterAddress(p.Station.ID, p.Diameter.ID, matter.ID))
	if err != nil {
		t.Fatal(err)
	}
	res.Body.Close()
	if want := "/station/" + p.Station.ID.String() + "/matter/" + matter.ID.String(); res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != want {
		t.Errorf("the matter leads to %d %s", res.StatusCode, res.Header.Get("Location"))
	}
}

func signedIn(t *testing.T, s *site, role plant.Role) *http.Client {
	t.Helper()
	client := s.Client()
	client.CheckRedirect = func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }
	res, err := client.PostForm(s.URL+"/sign-in", url.Values{"login": {string(role)}, "password": {"right"}})
	if err != nil {
		t.Fatal(err)
	}
	res.Body.Close()
	cookies := res.Cookies()
	if len(cookies) == 0 {
		t.Fatalf("signing in: %d", res.StatusCode)
	}
	inner := client.Transport
	client.Transport = roundTrip(func(r *http.Request) (*http.Response, error) {
		for _, c := range cookies {
			r.AddCookie(c)
		}
		return inner.RoundTrip(r)
	})
	return client
}

type roundTrip func(*http.Request) (*http.Response, error)

func (f roundTrip) RoundTrip(r *http.Request) (*http.Response, error) { return f(r) }

func read(t *testing.T, client *http.Client, address string, status int) []byte {
	t.Helper()
	res, err := client.Get(address)
	if err != nil {
		t.Fatal(err)
	}
	defer res.Body.Close()
	var b bytes.Buffer
	if _, err := b.ReadFrom(res.Body); err != nil {
		t.Fatal(err)
	}
	if res.StatusCode != status {
		t.Fatalf("%s: %d\n%s", address, res.StatusCode, b.String())
	}
	return b.Bytes()
}

// What is pushed is what the page has, byte for byte.
func TestPageAndPushAreTheSame(t *testing.T) {
	t.Parallel()
	record := &floorNow{states: twelve()}
	page := get(alone(New(Deps{Store: record, Log: slog.New(slog.DiscardHandler)}), kestrelRow, plant.Supervisor), "/board/").Body.String()
	fragments, err := Fragments(format(), kestrelRow, twelve())
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, f := range fragments {
		if seen[f.ID] {
			t.Errorf("%s twice", f.ID)
		}
		seen[f.ID] = true
		if !strings.Contains(page, string(f.HTML)) {
			t.Errorf("%s is not in the page as it is pushed:\n%s", f.ID, f.HTML)
		}
		if !regexp.MustCompile(`^<\w+ id="` + f.ID + `"`).Match(f.HTML) {
			t.Errorf("%s is not one element with its id: %.80s", f.ID, f.HTML)
		}
	}
	if want := 12 + 5; len(fragments) != want {
		t.Errorf("%d fragments, want %d", len(fragments), want)
	}
	if strings.Contains(page, " style=") || strings.Contains(page, "<style") || regexp.MustCompile(`<script(?: type="module")?>`).MatchString(page) {
		t.Error("something inline that the content policy refuses")
	}
}

func TestFragmentsChangeWithWhatTheyShowOnly(t *testing.T) {
	t.Parallel()
	render := func(s []plant.StationState, now time.Time) map[string]string {
		out := map[string]string{}
		f, err := Fragments(ui.NewFormat(words.For("en"), time.UTC, now), kestrelRow, s)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range f {
			out[x.ID] = string(x.HTML)
		}
		return out
	}
	was := render(twelve(), noon)
	for id, html := range render(twelve(), noon.Add(20*time.Second)) {
		if was[id] != html {
			t.Errorf("%s changes within the minute", id)
		}
	}
	s := twelve()
	open(&s[1].Characteristics[0], 0, beyond)
	var changed []string
	for id, html := range render(s, noon) {
		if was[id] != html {
			changed = append(changed, id)
		}
	}
	if len(changed) != 3 {
		t.Errorf("one new signal changes %q, want its card, the needs and the foot", changed)
	}
}

func TestChoiceHidesOnTheServerWhatTheScriptHides(t *testing.T) {
	t.Parallel()
	states := twelve()
	h := alone(New(Deps{Store: &floorNow{states: states}, Log: slog.New(slog.DiscardHandler)}), kestrelRow, plant.Operator)
	for _, tc := range []struct {
		query               string
		cards, need, withEn int
	}{
		{"", 12, 5, 1},
		{"?line=" + states[0].LineID.String(), 4, 2, 0},
		{"?owner=engineering", 1, 0, 1},
		{"?owner=station", 6, 5, 0},
		{"?owner=station&line=" + states[11].LineID.String(), 4, 3, 0},
		{"?owner=x&line=y", 12, 5, 1},
	} {
		w := get(h, "/board/"+tc.query)
		if w.Code != http.StatusOK {
			t.Fatalf("%q: %d", tc.query, w.Code)
		}
		page := w.Body.Bytes()
		cards, need := visible(all(t, page, "data-testid", "card")), visible(all(t, page, "data-testid", "need"))
		if len(cards) != tc.cards || len(need) != tc.need {
			t.Errorf("%q: %d cards and %d in need, want %d and %d", tc.query, len(cards), len(need), tc.cards, tc.need)
		}
		elsewhere := all(t, page, "data-elsewhere", "")
		if got := len(visible(elsewhere)) == 1; got != (tc.need < 5) {
			t.Errorf("%q: that more needs a person elsewhere is said: %v", tc.query, got)
		}
		studies := 0
		for _, n := range visible(all(t, page, "data-owners", "engineering")) {
			if n.Data == "li" {
				studies++
			}
		}
		if studies != tc.withEn {
			t.Errorf("%q: %d with engineering, want %d", tc.query, studies, tc.withEn)
		}
	}
}

func TestEmptyPlantSaysTheNextStep(t *testing.T) {
	t.Parallel()
	b := New(Deps{Store: &floorNow{}, Log: slog.New(slog.DiscardHandler)})
	for role, button := range map[plant.Role]bool{plant.Engineer: true, plant.Supervisor: true, plant.Operator: false} {
		page := get(alone(b, kestrelRow, role), "/board/").Body.Bytes()
		if n := all(t, page, "data-testid", "no-stations"); len(n) != 1 || !strings.Contains(text(n[0]), "No stations yet") {
			t.Fatalf("%s: no word of there being no stations", role)
		}
		if got := bytes.Contains(page, []byte(`href="/desk"`)); got != button {
			t.Errorf("%s: a way to the desk: %v", role, got)
		}
	}
}

func TestDemoIsSaid(t *testing.T) {
	t.Parallel()
	b := New(Deps{Store: &floorNow{states: twelve()}, Log: slog.New(slog.DiscardHandler)})
	page := get(alone(b, kestrelRow, plant.Supervisor), "/board/").Body.Bytes()
	if len(all(t, page, "data-testid", "demo")) != 1 {
		t.Error("the demo does not say that it is one")
	}
}

func TestLinksLeadWhereThePersonMayGo(t *testing.T) {
	t.Parallel()
	b := New(Deps{Store: &floorNow{}, Log: slog.New(slog.DiscardHandler)})
	st, c, m := uuid.New(), uuid.New(), uuid.New()
	station, matter, desk := "/station/"+st.String(), "/station/"+st.String()+"/matter/"+m.String(), "/desk/characteristic/"+c.String()
	for _, tc := range []struct {
		role     plant.Role
		from, to string
	}{
		{plant.Operator, stationAddress(st, c), station},
		{plant.Operator, chartAddress(st, c), station},
		{plant.Operator, matterAddress(st, c, m), matter},
		{plant.Supervisor, stationAddress(st, c), station},
		{plant.Supervisor, chartAddress(st, c), desk},
		{plant.Supervisor, matterAddress(st, c, m), matter},
		{plant.Engineer, stationAddress(st, c), desk},
		{plant.Engineer, chartAddress(st, c), desk},
		{plant.Engineer, matterAddress(st, c, m), desk},
	} {
		w := get(alone(b, kestrelRow, tc.role), tc.from)
		if w.Code != http.StatusSeeOther || w.Header().Get("Location") != tc.to {
			t.Errorf("%s from %s: %d %s, want %s", tc.role, tc.from, w.Code, w.Header().Get("Location"), tc.to)
		}
	}
	if w := get(alone(b, kestrelRow, plant.Administrator), stationAddress(st, c)); w.Code != http.StatusForbidden {
		t.Errorf("an administrator: %d", w.Code)
	}
	for _, path := range []string{"/board/at/x/" + c.String(), "/board/chart/" + st.String() + "/" + strings.ToUpper(c.String()), "/board/at/" + st.String() + "/" + c.String() + "/..%2f"} {
		if w := get(alone(b, kestrelRow, plant.Operator), path); w.Code != http.StatusNotFound {
			t.Errorf("%s: %d", path, w.Code)
		}
	}
}

type broken struct{}

func (broken) StationStates(context.Context, int, ...uuid.UUID) ([]plant.StationState, error) {
	return nil, errors.New("connection reset by peer")
}

func TestFaultIsAReferenceNumber(t *testing.T) {
	t.Parallel()
	w := get(alone(New(Deps{Store: broken{}, Log: slog.New(slog.DiscardHandler)}), kestrelRow, plant.Supervisor), "/board/")
	if w.Code != http.StatusInternalServerError || strings.Contains(w.Body.String(), "connection reset") {
		t.Errorf("%d %s", w.Code, w.Body.String())
	}
}

func BenchmarkCard(b *testing.B) {
	s, f := twelve(), format()
	var buf bytes.Buffer
	b.ReportAllocs()
	for b.Loop() {
		buf.Reset()
		if err := card(f.Words, newCard(f, &s[0]), choice{}).Render(context.Background(), &buf); err != nil {
			b.Fatal(err)
		}
	}
	b.SetBytes(int64(buf.Len()))
}

func BenchmarkBoard(b *testing.B) {
	s, f := sixty(), format()
	b.ReportAllocs()
	size := 0
	for b.Loop() {
		out, err := Fragments(f, kestrelRow, s)
		if err != nil {
			b.Fatal(err)
		}
		size = 0
		for _, x := range out {
			size += len(x.HTML)
		}
	}
	b.SetBytes(int64(size))
}
