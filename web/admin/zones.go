package admin

import (
	_ "embed"
	"strings"
	"time"

	"holdfast/web/ui"
)

// zonesText are the names of places in the zone database that the program brings along,
// and UTC. Names without a place, such as EST, are taken when they are typed.
//
//go:embed zones.txt
var zonesText string

// zones are offered while typing.
var zones = strings.Fields(zonesText)

// zoneScript shows the time of a zone while it is chosen, and presets the browser's own.
const zoneScript = "js/zone.js"

// zoneField asks for the plant's time zone and shows what time it is there, so that a wrong
// one is seen. Where nobody has chosen yet, a script presets the browser's own zone.
func zoneField(q *asking, now time.Time, chosen bool) field {
	f := q.field(text, "zone").suggesting(zones)
	f.Zone, f.ZonePreset = true, !chosen
	if loc, err := zoneOf(f.Value); err == nil {
		f.ZoneNow = q.w.T("setup.zone-now", ui.NewFormat(q.w, loc, now).Time(now), now.In(loc).Format("Monday"))
	}
	f.ZoneSaid = q.w.T("setup.zone-now", "{time}", "{day}")
	return f
}
