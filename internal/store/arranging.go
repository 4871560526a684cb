package store

import (
	"context"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// arranging is one transaction that changes what the plant has. What was done is entered
// into the plant's chain at its end, so that the chain is locked last.
type arranging struct {
	s        *Store
	tx       pgx.Tx
	by       uuid.UUID
	b        pgx.Batch // what is to be written; it goes in one go, since a plant may be described whole
	bodies   []ledger.Body
	stations map[uuid.UUID]bool // whose pages show it
}

// arranged runs f as one transaction. Whoever leaves the page has still pressed the
// button, so it does not end with the request.
func (s *Store) arranged(ctx context.Context, by uuid.UUID, f func(ctx context.Context, a *arranging) error) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	a := &arranging{s: s, by: by, stations: map[uuid.UUID]bool{}}
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		a.tx = tx
		if err := f(ctx, a); err != nil {
			return err
		}
		if err := tx.SendBatch(ctx, &a.b).Close(); err != nil {
			return nameTaken(err)
		}
		return s.appendPlantChain(ctx, tx, a.bodies...)
	})
	if err != nil {
		return err
	}
	for id := range a.stations {
		s.measured.Delete(id)
		s.changed(id)
	}
	return nil
}

// say enters what was done. Content holds no names of people.
func (a *arranging) say(what string, subject uuid.UUID, content map[string]any) {
	a.bodies = append(a.bodies, ledger.Arrangement{
		What: what, Subject: subject, At: ledger.Time(a.s.now()), Person: ledger.ID(a.by), Content: content,
	})
}

func (a *arranging) addLine(l plant.Line) {
	a.say("line added", l.ID, map[string]any{"name": l.Name})
	a.b.Queue(`insert into line (id, plant_id, name, position) values ($1, $2, $3, $4)`, l.ID, a.s.plant(), l.Name, l.Position)
}

func (a *arranging) addStation(st plant.Station) {
	a.say("station added", st.ID, map[string]any{"name": st.Name, "line": st.LineID, "family": st.Family})
	a.stations[st.ID] = true
	a.b.Queue(`insert into station (id, plant_id, line_id, name, family, position) values ($1, $2, $3, $4, $5, $6)`,
		st.ID, a.s.plant(), st.LineID, st.Name, st.Family, st.Position)
}

func machineContent(m plant.Machine) map[string]any {
	c := map[string]any{"name": m.Name, "station": m.StationID, "parts_per_hour": ledger.Number(m.PartsPerHour)}
	var streams []string
	for _, st := range m.Streams {
		if !st.Retired {
			streams = append(streams, st.Name)
		}
	}
	if streams != nil {
		c["streams"] = streams
	}
	return c
}

func (a *arranging) addMachine(m plant.Machine) {
	a.say("machine added", m.ID, machineContent(m))
	a.stations[m.StationID] = true
	a.b.Queue(`insert into machine (id, plant_id, station_id, name, position, parts_per_hour) values ($1, $2, $3, $4, $5, $6)`,
		m.ID, a.s.plant(), m.StationID, m.Name, m.Position, m.PartsPerHour)
	a.putStreams(m)
}

// putStreams makes the streams of a machine what m says: those that are not named any
// more are retired, those that come back are taken up again.
func (a *arranging) putStreams(m plant.Machine) {
	a.b.Queue(`update stream set retired_at = $2 where machine_id = $1 and retired_at is null`, m.ID, a.s.now())
	for i, st := range m.Streams {
		if !st.Retired {
			a.b.Queue(`insert into stream (id, plant_id, machine_id, name, position) values ($1, $2, $3, $4, $5)
				on conflict on constraint stream_name_once do update set position = excluded.position, retired_at = null`,
				st.ID, a.s.plant(), m.ID, st.Name, i)
		}
	}
}

func (a *arranging) addPart(p plant.Part) {
	a.say("part added", p.ID, map[string]any{"name": p.Name, "family": p.Family})
	a.b.Queue(`insert into part (id, plant_id, name, family) values ($1, $2, $3, $4)`, p.ID, a.s.plant(), p.Name, p.Family)
}

func gaugeContent(g plant.Gauge) map[string]any {
	c := map[string]any{"name": g.Name}
	if g.Resolution != nil {
		c["resolution"] = g.Resolution.String()
	}
	if !g.NextCheck.IsZero() {
		c["next_check"] = g.NextCheck.Format("2006-01-02")
	}
	if g.CheckDays > 0 {
		c["check_days"] = g.CheckDays
	}
	return c
}

func (a *arranging) addGauge(g plant.Gauge) {
	a.say("gauge added", g.ID, gaugeContent(g))
	a.b.Queue(`insert into gauge (id, plant_id, name, resolution, next_check, check_days) values ($1, $2, $3, $4::text::numeric, $5, $6)`,
		g.ID, a.s.plant(), g.Name, decimalOrNull(g.Resolution), timeOrNull(g.NextCheck), g.CheckDays)
}

func characteristicContent(c plant.Characteristic) map[string]any {
	m := map[string]any{"name": c.Name, "machine": c.MachineID, "station": c.StationID, "family": c.Family}
	if c.PartID != uuid.Nil {
		m["part"] = c.PartID
	}
	return m
}

// addCharacteristic adds a characteristic with the first version of its set-up, its state
// row and the head of its ledger chain.
func (a *arranging) addCharacteristic(c plant.Characteristic, setup plant.Setup) error {
	s := a.s
	setup.Version, setup.MadeAt = 1, s.now()
	if err := setup.Validate(); err != nil {
		return err
	}
	a.say("characteristic added", c.ID, characteristicContent(c))
	a.stations[c.StationID] = true
	a.b.Queue(`insert into characteristic (id, plant_id, station_id, machine_id, part_id, family, name, position)
		values ($1, $2, $3, $4, $5, $6, $7, $8)`,
		c.ID, s.plant(), c.StationID, c.MachineID, orNull(c.PartID), c.Family, c.Name, c.Position)
	if err := s.queueSetup(&a.b, c.ID, setup, a.by); err != nil {
		return err
	}
	entry, head, err := ledger.Seal(c.ID, ledger.Head{}, setupBody(c.ID, setup, a.by))
	if err != nil {
		return err
	}
	s.queueLedger(&a.b, entry)
	a.b.Queue(`insert into characteristic_state (characteristic_id, plant_id, station_id, setup_version, ledger_seq, ledger_hash)
		values ($1, $2, $3, $4, $5, $6)`, c.ID, s.plant(), c.StationID, setup.Version, head.Seq, head.Hash[:])
	return nil
}

// nameTaken turns a violated natural key into words. Names of retired things stay taken:
// the record would otherwise show two of one name.
func nameTaken(err error) error {
	for constraint, said := range taken {
		if violates(err, constraint) {
			e := *said // the same sentence may be said to several at once
			return e.Because(err)
		}
	}
	return err
}

var taken = map[string]*plant.Error{
	"line_name_once":           plant.Conflictf("name", "There is a line of this name already, in use or retired. Choose another name."),
	"station_name_once":        plant.Conflictf("name", "There is a station of this name already, in use or retired. Choose another name."),
	"machine_name_once":        plant.Conflictf("name", "There is a machine of this name already, in use or retired. Choose another name."),
	"part_name_once":           plant.Conflictf("name", "There is a part of this name already, in use or retired. Choose another name."),
	"gauge_name_once":          plant.Conflictf("name", "There is a gauge of this name already, in use or retired. Choose another name."),
	"characteristic_name_once": plant.Conflictf("name", "This machine has a characteristic of this name already, in use or retired. Choose another name."),
	"cause_name_once":          plant.Conflictf("name", "There is a cause of this name already."),
	"shift_name_once":          plant.Conflictf("shifts", "Two shifts have the same name."),
	"shift_start_once":         plant.Conflictf("shifts", "Two shifts start at the same time."),
}
