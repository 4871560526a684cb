package main

import (
	"fmt"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// TestWhoExistsIsNotTold: a login or badge that nobody has, one whose person is kept out,
// one without a secret and a wrong secret are answered in the same words, after the same
// work. The work is measured at the full cost of a hash, so that it stands out.
func TestWhoExistsIsNotTold(t *testing.T) {
	t.Parallel()
	r := serveWith(t, func(s *settings) { s.Cost = auth.Cost{Time: 2, MemoryKiB: 16 << 10, Threads: 1} })
	r.badge(t, r.Operator.ID, "1001")
	// Stored at the cost at which the server hashes, as theirs are who signed in once.
	costly, err := auth.NewHasher(r.program.Cost, 1)
	if err != nil {
		t.Fatal(err)
	}
	hash, err := costly.Hash(t.Context(), secret)
	if err != nil {
		t.Fatal(err)
	}
	for _, id := range []uuid.UUID{r.Operator.ID, r.Engineer.ID} {
		if err := r.SetSecret(t.Context(), id, hash, uuid.Nil); err != nil {
			t.Fatal(err)
		}
	}
	if err := r.SetBadge(t.Context(), r.Operator.ID, "1001", hash, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	if err := r.SetActive(t.Context(), r.Engineer.ID, false, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	r.person(t, "nosecret", plant.Operator)
	tablet := r.tabletVisitor(t, "1")
	v := r.visit(t, "")
	took := map[string][]time.Duration{}
	said := map[string]string{}
	// The shortest of each counts: noise only adds. A check that was left out would be a
	// tenth, however often it is asked; what a busy machine has kept waiting comes nearer
	// with every turn.
	unlike := func() (found []string) {
		known := slices.Min(took["operator1"])
		for what, all := range took {
			if least := slices.Min(all); least < known/3 || known < least/3 {
				found = append(found, fmt.Sprintf("%s takes %v where a wrong password takes %v", what, least, known))
			}
		}
		return found
	}
	for turn := 1; turn <= 5 || turn <= 25 && len(unlike()) > 0; turn++ { // by turns, so that a busy machine is busy for all
		for _, login := range []string{"operator1", "engineer1", "nosecret", "nobody-has-this"} {
			r.Clock.Advance(20 * time.Minute) // no pause
			began := time.Now()
			_, body := v.post("/sign-in", url.Values{"login": {login}, "password": {"a wrong one"}})
			took[login] = append(took[login], time.Since(began))
			said["password "+login] = problemIn(body)
		}
		for _, badge := range []string{"1001", "9999"} {
			r.Clock.Advance(20 * time.Minute)
			began := time.Now()
			_, body := tablet.post("/sign-in/badge", url.Values{"badge": {badge}, "pin": {"555666"}})
			took["badge "+badge] = append(took["badge "+badge], time.Since(began))
			said["badge "+badge] = problemIn(body)
		}
	}
	for what, text := range said {
		want := said["password operator1"]
		if strings.HasPrefix(what, "badge") {
			want = said["badge 1001"]
		}
		if text == "" || text != want {
			t.Errorf("%s: %q, want %q", what, text, want)
		}
	}
	for _, difference := range unlike() {
		t.Error(difference)
	}
}

func problemIn(body string) string {
	_, rest, found := strings.Cut(body, `-problem" role="alert">`)
	if !found {
		if _, rest, found = strings.Cut(body, `class="problem"`); !found {
			return ""
		}
	}
	text, _, _ := strings.Cut(rest, "</p>")
	return text
}

// TestTheSetUpAddressWorksOnce: not for two at a time, not a second time, not once there is
// somebody by another way, on this server or another.
func TestTheSetUpAddressWorksOnce(t *testing.T) {
	t.Parallel()
	first, second := serveNobody(t)
	form := func(login string) url.Values {
		return url.Values{"name": {"Person " + login}, "login": {login}, "password": {secret}, "again": {secret}, "role": {"administrator"}}
	}
	address := func(r *running) string { return r.program.first.Path() }
	if res, _ := first.visit(t, "").get(address(second)); res.StatusCode != http.StatusNotFound {
		t.Errorf("the address of another server: %s", res.Status)
	}
	if res, _ := first.visit(t, "").get("/set-up/" + strings.Repeat("A", 26)); res.StatusCode != http.StatusNotFound {
		t.Errorf("a guessed address: %s", res.Status)
	}
	// Two who race for it on each server: one of all is in.
	var wg sync.WaitGroup
	status := make([]int, 8)
	for i := range status {
		r := []*running{first, second}[i%2]
		v := r.visit(t, "")
		wg.Go(func() {
			res, err := v.http.PostForm(v.base+address(r), form(fmt.Sprint("racer", i)))
			if err != nil {
				t.Error(err)
				return
			}
			_ = res.Body.Close()
			status[i] = res.StatusCode
		})
	}
	wg.Wait()
	in := 0
	for _, s := range status {
		if s == http.StatusSeeOther {
			in++
		}
	}
	if people, err := first.People(t.Context()); err != nil || len(people) != 1 || in != 1 {
		t.Errorf("%d of 8 were answered as the first, %d people are there, %v; want one", in, len(people), err)
	}
	for name, r := range map[string]*running{"the one server": first, "the other": second} {
		v := r.visit(t, "")
		if res, _ := v.get(address(r)); res.StatusCode != http.StatusNotFound {
			t.Errorf("on %s the address still shows its page: %s", name, res.Status)
		}
		if res, _ := v.post(address(r), form("late")); res.StatusCode != http.StatusNotFound {
			t.Errorf("on %s the address still takes somebody: %s", name, res.Status)
		}
	}
	// Somebody who was added on the command line closes it too.
	third, _ := serveNobody(t)
	p := plant.Person{ID: uuid.Must(uuid.NewV7()), Login: "by-hand", Name: "By hand", Roles: plant.Roles{plant.Administrator}, Active: true}
	if err := third.AddPerson(t.Context(), p, third.hash(t, secret), uuid.Nil); err != nil {
		t.Fatal(err)
	}
	for _, method := range []string{http.MethodGet, http.MethodPost} {
		if res, _ := third.visit(t, "").do(method, address(third), "application/x-www-form-urlencoded", strings.NewReader(form("late").Encode())); res.StatusCode != http.StatusNotFound {
			t.Errorf("%s of the address once there is somebody: %s", method, res.Status)
		}
	}
}

// serveNobody serves a plant without anybody, on two servers.
func serveNobody(t testing.TB) (first, second *running) {
	t.Helper()
	clock := storetest.NewClock()
	at := pgtest.Database(t)
	st, err := store.Open(t.Context(), store.Options{URL: at, Clock: clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	if err := firstPlant(t.Context(), st, "Plant", "UTC"); err != nil {
		t.Fatal(err)
	}
	p := &storetest.Plant{Store: st, Clock: clock, URL: at}
	return serveOn(t, p, clock.Now), serveOn(t, p, clock.Now)
}
