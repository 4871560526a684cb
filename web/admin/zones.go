package admin

import (
	_ "embed"
	"fmt"
	"slices"
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

// zoneOf loads a time zone. What the machine calls its own is no name of one. A name that
// is typed with other capitals, or only the place, is taken when it can be one zone only.
func zoneOf(name string) (*time.Location, error) {
	if name == "" || name == "Local" {
		return nil, fmt.Errorf("there is no time zone %q", name)
	}
	loc, err := time.LoadLocation(name)
	if err == nil {
		return loc, nil
	}
	found, typed := "", plainZone(name)
	for _, z := range zones {
		whole := plainZone(z)
		if whole != typed && placeOf(whole) != typed {
			continue
		}
		if found != "" {
			return nil, err
		}
		found = z
	}
	if found == "" {
		return nil, err
	}
	return time.LoadLocation(found)
}

// plainZone is the name of a zone as it is compared: capitals do not count, and a blank is
// the mark that stands for one.
func plainZone(name string) string { return strings.ReplaceAll(strings.ToLower(name), " ", "_") }

func placeOf(zone string) string { return zone[strings.LastIndex(zone, "/")+1:] }

// likeZone are a few zones that somebody may have meant: what was typed is part of their
// name, or their place begins like it, those first that do for longer.
func likeZone(name string) []string {
	const most, alike = 4, 3
	typed := plainZone(name)
	place := placeOf(typed)
	if len(place) < alike {
		return nil
	}
	var list []string
	for _, z := range zones {
		if strings.Contains(plainZone(z), place) {
			list = append(list, z)
		}
	}
	for n := len(place) - 1; n >= alike; n-- {
		for _, z := range zones {
			if strings.HasPrefix(placeOf(plainZone(z)), place[:n]) && !slices.Contains(list, z) {
				list = append(list, z)
			}
		}
	}
	return list[:min(len(list), most)]
}
