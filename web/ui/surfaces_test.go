package ui

import (
	"net/http/httptest"
	"strings"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

func TestEverySurfaceThatIsOpenToAPersonIsInTheBar(t *testing.T) {
	t.Parallel()
	all := []string{"/station?all", "/board", "/desk", "/admin"}
	show := func(s Surface, device plant.Device, roles ...plant.Role) string {
		f := frame(t)
		f.Person.Roles, f.Device = roles, device
		return pageOf(t, WithFrame(httptest.NewRequest("GET", "/account", nil), f), func(shell *Shell) {
			shell.Surface = s
			shell.Bar = Navigation("Pages", []NavLink{To("/page", "Page", true)})
		})
	}
	for _, roles := range []plant.Roles{{plant.Operator}, {plant.Supervisor}, {plant.Engineer}, {plant.Administrator}, {plant.Operator, plant.Administrator}, plant.AllRoles} {
		html := show(Account, plant.Device{}, roles...)
		for _, href := range all {
			want := 0
			if MayOpen(plant.Person{Roles: roles, Active: true}, href) {
				want = 2 // in the bar, and in the menu of a small window
			}
			if n := strings.Count(html, `<a href="`+href+`">`); n != want {
				t.Errorf("%v: the way to %s is there %d times, want %d", roles, href, n, want)
			}
		}
	}
	html := show(Desk, plant.Device{}, plant.AllRoles...)
	if n := strings.Count(html, `<a href="/desk" class="here" aria-current="true">Desk</a>`); n != 2 {
		t.Errorf("the present surface is marked %d times", n)
	}
	mustNotContain(t, show(Admin, plant.Device{}, plant.Administrator), `data-testid="surfaces"`)
	mustNotContain(t, show(Station, plant.Device{ID: uuid.New(), Kind: plant.Tablet, Station: uuid.New()}, plant.AllRoles...), `data-testid="surfaces"`, `class="elsewhere"`)
}
