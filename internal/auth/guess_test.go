package auth

import (
	"fmt"
	"testing"
	"time"

	"github.com/google/uuid"
)

// TestGuessingAtTabletsThatKnowTheirPeople is the harder half of guessing: at a tablet where
// somebody has come in before, the pauses that many sources share do not hold them up, and
// so must not let a guesser through either. A guesser tries once a second for a shift: one
// badge at forty tablets that its owner uses, and two hundred badges at one tablet that all
// use. Meanwhile the people whose badges are left alone sign in, and nobody of them waits.
func TestGuessingAtTabletsThatKnowTheirPeople(t *testing.T) {
	t.Parallel()
	const shift, people, tablets = 8 * time.Hour, 200, 40
	device := make([]Source, tablets)
	for i := range device {
		device[i] = DeviceSource(uuid.New())
	}
	badge := func(i int) string { return fmt.Sprint("badge", i) }
	for _, tc := range []struct {
		name   string
		try    func(second int) (badge string, from Source)
		spared func(person int) bool // whose badge nobody guesses at where they sign in
		atMost int                   // tries in a shift; a million PINs are possible
	}{
		{"one badge at forty tablets of its owner", func(s int) (string, Source) { return badge(7), device[s%tablets] },
			func(person int) bool { return person != 7 }, 2000},
		{"two hundred badges at one tablet", func(s int) (string, Source) { return badge(s % people), device[0] },
			func(person int) bool { return person%tablets != 0 }, 6500},
	} {
		c := newClock()
		th := NewThrottle(c.now)
		signIn := func(person int, at Source) (pause time.Duration) {
			a, pause := th.Try(badge(person), at)
			if a != nil {
				a.Succeeded()
			}
			return pause
		}
		for _, d := range device {
			for person := range people {
				signIn(person, d) // everybody has worked everywhere
			}
		}
		tries, waited, signIns := 0, 0, 0
		for second := range int(shift / time.Second) {
			c.add(time.Second)
			name, from := tc.try(second)
			if _, pause := th.Try(name, from); pause == 0 {
				tries++
			}
			person := second % (15 * 60)
			if person < people && tc.spared(person) {
				signIns++
				if signIn(person, device[person%tablets]) > 0 {
					waited++
				}
			}
		}
		t.Logf("%s: %d tries got through in %v, a chance of 1 in %d to find a PIN; %d sign-ins meanwhile, %d had to wait",
			tc.name, tries, shift, 1_000_000/tries, signIns, waited)
		if tries > tc.atMost {
			t.Errorf("%s: %d tries in a shift, want at most %d", tc.name, tries, tc.atMost)
		}
		if waited > 0 {
			t.Errorf("%s: %d of %d sign-ins of others had to wait", tc.name, waited, signIns)
		}
	}
}
