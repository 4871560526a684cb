package store

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"math/big"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const selectDevice = `select id, kind, name, station_id, line_id, lock_minutes, language, enrolled_at, enrolled_by, last_contact, revoked_at from device`

func scanDevice(r pgx.CollectableRow) (d plant.Device, err error) {
	var station, line, by *uuid.UUID
	var lock int
	var contact, revoked *time.Time
	err = r.Scan(&d.ID, &d.Kind, &d.Name, &station, &line, &lock, &d.Language, &d.EnrolledAt, &by, &contact, &revoked)
	d.Station, d.Line, d.EnrolledBy = orNil(station), orNil(line), orNil(by)
	d.LockAfter = time.Duration(lock) * time.Minute
	d.LastContact, d.RevokedAt = orZero(contact), orZero(revoked)
	return d, err
}

func lockMinutes(d plant.Device) int { return int(d.LockAfter / time.Minute) }

// Devices lists all devices, those that are let in first, by name.
func (s *Store) Devices(ctx context.Context) ([]plant.Device, error) {
	rows, err := s.pool.Query(ctx, selectDevice+` where plant_id = $1 order by revoked_at desc nulls first, name`, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read devices: %w", err)
	}
	return pgx.CollectRows(rows, scanDevice)
}

// Device reads one device.
func (s *Store) Device(ctx context.Context, id uuid.UUID) (plant.Device, error) {
	return s.device(ctx, ` where id = $1 and plant_id = $2`, id, s.plant())
}

// DeviceBySecret finds the device with this hash of its secret, also when it was
// revoked. There being none is NotFound.
func (s *Store) DeviceBySecret(ctx context.Context, hash []byte) (plant.Device, error) {
	return s.device(ctx, ` where plant_id = $2 and secret_hash = $1`, hash, s.plant())
}

func (s *Store) device(ctx context.Context, where string, args ...any) (plant.Device, error) {
	rows, err := s.pool.Query(ctx, selectDevice+where, args...)
	if err != nil {
		return plant.Device{}, fmt.Errorf("read device: %w", err)
	}
	d, err := pgx.CollectExactlyOneRow(rows, scanDevice)
	if err != nil {
		return d, fmt.Errorf("read device: %w", missing(err, "There is no such device."))
	}
	return d, nil
}

// ActiveDevices gives those of the devices that are let in.
func (s *Store) ActiveDevices(ctx context.Context, ids []uuid.UUID) ([]uuid.UUID, error) {
	rows, err := s.pool.Query(ctx, `select id from device where id = any($1) and revoked_at is null`, ids)
	if err != nil {
		return nil, fmt.Errorf("read devices: %w", err)
	}
	return pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
}

// MakeDeviceCode makes the code that will let one device in, for CodeLifetime.
func (s *Store) MakeDeviceCode(ctx context.Context, d plant.Device, by uuid.UUID) (plant.DeviceCode, error) {
	d, err := d.Clean()
	if err != nil {
		return plant.DeviceCode{}, err
	}
	now := s.now()
	c := plant.DeviceCode{ID: newID(), Device: d, MadeAt: now, MadeBy: by, ExpiresAt: now.Add(plant.CodeLifetime)}
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `delete from device_code where plant_id = $1 and expires_at <= $2`, s.plant(), now); err != nil {
			return err
		}
		if err := s.deviceNameFree(ctx, tx, d.Name, uuid.Nil); err != nil {
			return err
		}
		for range 5 {
			if c.Code, err = randomDigits(plant.CodeDigits); err != nil {
				return err
			}
			tag, err := tx.Exec(ctx, `insert into device_code (id, plant_id, code, kind, name, station_id, line_id, lock_minutes, made_at, made_by, expires_at)
				values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11) on conflict on constraint device_code_once do nothing`,
				c.ID, s.plant(), c.Code, string(d.Kind), d.Name, orNull(d.Station), orNull(d.Line), lockMinutes(d), now, orNull(by), c.ExpiresAt)
			if err != nil || tag.RowsAffected() == 1 {
				return err
			}
		}
		return fmt.Errorf("no free code was found")
	})
	if err != nil {
		return plant.DeviceCode{}, fmt.Errorf("make a device code: %w", err)
	}
	return c, nil
}

// randomDigits is n decimal digits, the first not zero, so that nobody leaves it out.
func randomDigits(n int64) (string, error) {
	least := new(big.Int).Exp(big.NewInt(10), big.NewInt(n-1), nil)
	v, err := rand.Int(rand.Reader, new(big.Int).Mul(least, big.NewInt(9)))
	if err != nil {
		return "", fmt.Errorf("draw a code: %w", err)
	}
	return v.Add(v, least).String(), nil
}

// deviceNameFree refuses a name that another device has which is let in.
func (s *Store) deviceNameFree(ctx context.Context, tx pgx.Tx, name string, but uuid.UUID) error {
	var there bool
	err := tx.QueryRow(ctx, `select exists (select from device where plant_id = $1 and name = $2 and revoked_at is null and id <> $3)`,
		s.plant(), name, but).Scan(&there)
	if err == nil && there {
		return deviceNameTaken(nil)
	}
	return err
}

func deviceNameTaken(cause error) error {
	return plant.Conflictf("name", "There is a device of this name already.").Because(cause)
}

// DeviceCodes lists the codes that wait to be typed, the oldest first.
func (s *Store) DeviceCodes(ctx context.Context) ([]plant.DeviceCode, error) {
	rows, err := s.pool.Query(ctx, `select id, code, kind, name, station_id, line_id, lock_minutes, made_at, made_by, expires_at
		from device_code where plant_id = $1 and expires_at > $2 order by made_at, id`, s.plant(), s.now())
	if err != nil {
		return nil, fmt.Errorf("read device codes: %w", err)
	}
	return pgx.CollectRows(rows, scanDeviceCode)
}

func scanDeviceCode(r pgx.CollectableRow) (c plant.DeviceCode, err error) {
	var station, line, by *uuid.UUID
	var lock int
	err = r.Scan(&c.ID, &c.Code, &c.Device.Kind, &c.Device.Name, &station, &line, &lock, &c.MadeAt, &by, &c.ExpiresAt)
	c.Device.Station, c.Device.Line, c.MadeBy = orNil(station), orNil(line), orNil(by)
	c.Device.LockAfter = time.Duration(lock) * time.Minute
	return c, err
}

// WithdrawDeviceCode makes a code worthless. One that is gone already is no error.
func (s *Store) WithdrawDeviceCode(ctx context.Context, id uuid.UUID) error {
	if _, err := s.pool.Exec(ctx, `delete from device_code where id = $1 and plant_id = $2`, id, s.plant()); err != nil {
		return fmt.Errorf("withdraw a device code: %w", err)
	}
	return nil
}

// Enrol uses a code up and lets the device in that it was made for, known from now on
// by the hash of its secret.
func (s *Store) Enrol(ctx context.Context, code string, secretHash []byte) (plant.Device, error) {
	now := s.now()
	var d plant.Device
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `delete from device_code where plant_id = $1 and code = $2 and expires_at > $3
			returning id, code, kind, name, station_id, line_id, lock_minutes, made_at, made_by, expires_at`, s.plant(), code, now)
		if err != nil {
			return err
		}
		c, err := pgx.CollectExactlyOneRow(rows, scanDeviceCode)
		if errors.Is(err, pgx.ErrNoRows) {
			return plant.Invalidf("code", "This code is wrong or no longer valid. Ask for a new one.")
		}
		if err != nil {
			return err
		}
		d = c.Device
		d.ID, d.EnrolledAt, d.EnrolledBy, d.LastContact = newID(), now, c.MadeBy, now
		_, err = tx.Exec(ctx, `insert into device (id, plant_id, kind, name, station_id, line_id, lock_minutes, secret_hash, enrolled_at, enrolled_by, last_contact)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $9)`,
			d.ID, s.plant(), string(d.Kind), d.Name, orNull(d.Station), orNull(d.Line), lockMinutes(d), secretHash, now, orNull(d.EnrolledBy))
		if violates(err, "device_name_once") {
			return deviceNameTaken(err)
		}
		if err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, deviceBody(d, "enrolled", now, d.EnrolledBy))
	})
	if err != nil {
		return plant.Device{}, fmt.Errorf("enrol a device: %w", err)
	}
	return d, nil
}

func deviceBody(d plant.Device, step string, at time.Time, by uuid.UUID) ledger.Device {
	return ledger.Device{Device: d.ID, Step: step, At: ledger.Time(at), Person: ledger.ID(by), Sort: string(d.Kind), Name: d.Name,
		Station: ledger.ID(d.Station), Line: ledger.ID(d.Line), LockMinutes: lockMinutes(d)}
}

// ChangeDevice gives a device another name, place, lock or language. Its kind stays. The
// language is a preference and is not entered in the ledger.
func (s *Store) ChangeDevice(ctx context.Context, d plant.Device, by uuid.UUID) error {
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		if err := tx.QueryRow(ctx, `select kind from device where id = $1 and plant_id = $2 and revoked_at is null for update`,
			d.ID, s.plant()).Scan(&d.Kind); err != nil {
			return missing(err, "There is no such device.")
		}
		var err error
		if d, err = d.Clean(); err != nil {
			return err
		}
		if err := s.deviceNameFree(ctx, tx, d.Name, d.ID); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `update device set name = $2, station_id = $3, line_id = $4, lock_minutes = $5, language = $6 where id = $1`,
			d.ID, d.Name, orNull(d.Station), orNull(d.Line), lockMinutes(d), d.Language); err != nil {
			if violates(err, "device_name_once") {
				return deviceNameTaken(err)
			}
			return err
		}
		return s.appendPlantChain(ctx, tx, deviceBody(d, "changed", s.now(), by))
	})
	if err != nil {
		return fmt.Errorf("change a device: %w", err)
	}
	s.admissionChanged(ctx)
	return nil
}

// SetDeviceLanguage keeps in which language a tablet speaks, chosen at the tablet itself.
func (s *Store) SetDeviceLanguage(ctx context.Context, id uuid.UUID, language string) error {
	tag, err := s.pool.Exec(ctx, `update device set language = $2 where id = $1 and plant_id = $3 and revoked_at is null`, id, language, s.plant())
	if err != nil {
		return fmt.Errorf("set the language of a device: %w", err)
	}
	if tag.RowsAffected() == 0 {
		return plant.NotFoundf("", "There is no such device.")
	}
	s.admissionChanged(ctx)
	return nil
}

// RevokeDevice keeps a device out from now on, for good. Once more is no error.
func (s *Store) RevokeDevice(ctx context.Context, id, by uuid.UUID) error {
	now := s.now()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		var revoked *time.Time
		if err := tx.QueryRow(ctx, `select revoked_at from device where id = $1 and plant_id = $2 for update`, id, s.plant()).Scan(&revoked); err != nil {
			return missing(err, "There is no such device.")
		}
		if revoked != nil {
			return nil
		}
		if _, err := tx.Exec(ctx, `update device set revoked_at = $2, revoked_by = $3 where id = $1`, id, now, orNull(by)); err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, ledger.Device{Device: id, Step: "revoked", At: ledger.Time(now), Person: ledger.ID(by)})
	})
	if err != nil {
		return fmt.Errorf("revoke a device: %w", err)
	}
	s.admissionChanged(ctx)
	return nil
}

// Places lists the lines and stations of the plant that are in use, in their order.
func (s *Store) Places(ctx context.Context) ([]plant.Line, []plant.Station, error) {
	rows, err := s.pool.Query(ctx, `select id, name, position from line where plant_id = $1 and retired_at is null order by position, name`, s.plant())
	if err != nil {
		return nil, nil, fmt.Errorf("read lines: %w", err)
	}
	lines, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (l plant.Line, err error) {
		err = r.Scan(&l.ID, &l.Name, &l.Position)
		return l, err
	})
	if err != nil {
		return nil, nil, fmt.Errorf("read lines: %w", err)
	}
	rows, err = s.pool.Query(ctx, `select s.id, s.line_id, s.name, s.family, s.position from station s join line l on l.id = s.line_id
		where s.plant_id = $1 and s.retired_at is null order by l.position, l.name, s.position, s.name`, s.plant())
	if err != nil {
		return nil, nil, fmt.Errorf("read stations: %w", err)
	}
	stations, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (st plant.Station, err error) {
		err = r.Scan(&st.ID, &st.LineID, &st.Name, &st.Family, &st.Position)
		return st, err
	})
	if err != nil {
		return nil, nil, fmt.Errorf("read stations: %w", err)
	}
	return lines, stations, nil
}
