package store_test

import (
	"context"
	"crypto/sha256"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

func hashOf(token string) []byte { sum := sha256.Sum256([]byte(token)); return sum[:] }

func TestACodeLetsOneDeviceInOnce(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	by := p.Administrator.ID
	want := plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: p.Station.ID, LockAfter: 5 * time.Minute}
	code, err := p.MakeDeviceCode(ctx, want, by)
	if err != nil || len(code.Code) != plant.CodeDigits {
		t.Fatalf("code = %+v, %v", code, err)
	}
	if open, err := p.DeviceCodes(ctx); err != nil || len(open) != 1 || open[0].Device != want {
		t.Errorf("codes that wait: %+v, %v", open, err)
	}
	d, err := p.Enrol(ctx, code.Code, hashOf("one"))
	if err != nil || d.Name != want.Name || d.EnrolledBy != by {
		t.Fatalf("enrolled %+v, %v", d, err)
	}
	if _, err := p.Enrol(ctx, code.Code, hashOf("two")); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("the same code again: %v, want Invalid", err)
	}
	if got, err := p.DeviceBySecret(ctx, hashOf("one")); err != nil || got != d {
		t.Errorf("by its secret: %+v, %v; want %+v", got, err, d)
	}
	if _, err := p.MakeDeviceCode(ctx, want, by); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("the name again: %v, want Conflict", err)
	}

	late, err := p.MakeDeviceCode(ctx, plant.Device{Kind: plant.Wall, Name: "Wall"}, by)
	if err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(plant.CodeLifetime)
	if _, err := p.Enrol(ctx, late.Code, hashOf("three")); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("a code past its time: %v, want Invalid", err)
	}

	d.Name, d.Station, d.LockAfter = "Tablet B", p.Other.ID, time.Hour
	if err := p.ChangeDevice(ctx, d, by); err != nil {
		t.Fatal(err)
	}
	if err := p.RevokeDevice(ctx, d.ID, by); err != nil {
		t.Fatal(err)
	}
	if active, err := p.ActiveDevices(ctx, []uuid.UUID{d.ID}); err != nil || len(active) != 0 {
		t.Errorf("let in after it was revoked: %v, %v", active, err)
	}
	if _, err := p.MakeDeviceCode(ctx, want, by); err != nil {
		t.Errorf("the name of a revoked device: %v, want it free", err)
	}
	honest(t, p)
}

func honest(t *testing.T, p *storetest.Plant) {
	t.Helper()
	if differ, err := p.CheckRecord(context.Background()); err != nil || len(differ) > 0 {
		t.Errorf("an honest record differs: %v, %v", differ, err)
	}
	if _, err := p.VerifyLedger(context.Background()); err != nil {
		t.Error(err)
	}
}

// TestTheAuditFindsChangedPeopleAndDevices changes their tables beside the program.
func TestTheAuditFindsChangedPeopleAndDevices(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	code, err := p.MakeDeviceCode(ctx, plant.Device{Kind: plant.Wall, Name: "Wall"}, p.Administrator.ID)
	if err != nil {
		t.Fatal(err)
	}
	d, err := p.Enrol(ctx, code.Code, hashOf("wall"))
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range []error{
		p.RevokeDevice(ctx, d.ID, p.Administrator.ID),
		p.SetActive(ctx, p.Operator.ID, false, p.Administrator.ID),
		p.EraseName(ctx, p.Operator.ID, p.Administrator.ID),
		p.SetRoles(ctx, p.Supervisor.ID, plant.Roles{plant.Supervisor, plant.Operator}, p.Administrator.ID),
	} {
		if step != nil {
			t.Fatal(step)
		}
	}
	honest(t, p)
	for _, sql := range []string{
		`update person set roles = array['administrator'] where login = 'supervisor1'`,
		`update person set active = true where erased_at is not null`,
		`update person set erased_at = null where erased_at is not null`,
		`update device set revoked_at = null`,
		`update device set name = 'Another'`,
		`delete from device`,
	} {
		tx, err := p.Pool().Begin(ctx)
		if err != nil {
			t.Fatal(err)
		}
		if tag, err := tx.Exec(ctx, sql); err != nil || tag.RowsAffected() == 0 {
			t.Fatalf("%s: %v, %v", sql, tag, err)
		}
		if err := tx.Commit(ctx); err != nil {
			t.Fatal(err)
		}
		differ, err := p.CheckRecord(ctx)
		if err != nil || len(differ) == 0 {
			t.Errorf("after %s the audit finds %v, %v", sql, differ, err)
		}
	}
}

func TestTheLastAdministratorStays(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	if err := p.SetActive(ctx, p.Administrator.ID, false, p.Administrator.ID); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("keeping the last one out: %v, want Conflict", err)
	}
	if err := p.SetRoles(ctx, p.Administrator.ID, plant.Roles{plant.Operator}, p.Administrator.ID); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("taking the role from the last one: %v, want Conflict", err)
	}
	if err := p.SetRoles(ctx, p.Engineer.ID, plant.Roles{plant.Engineer, plant.Administrator}, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	if err := p.SetActive(ctx, p.Administrator.ID, false, p.Engineer.ID); err != nil {
		t.Errorf("with another one there: %v", err)
	}
	honest(t, p)
}

// TestAnErasedNameIsGone: name, salt, login, badge and secrets; the record keeps the id.
func TestAnErasedNameIsGone(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	a := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14993)
	if err := p.SetBadge(ctx, p.Operator.ID, " b-77 ", "hash", uuid.Nil); err != nil {
		t.Fatal(err)
	}
	if who, _, err := p.CredentialByBadge(ctx, "B-77"); err != nil || who.ID != p.Operator.ID {
		t.Errorf("by badge: %+v, %v", who, err)
	}
	if err := p.SetBadge(ctx, p.Engineer.ID, "b-77", "hash", uuid.Nil); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a badge twice: %v, want Conflict", err)
	}
	if err := p.EraseName(ctx, p.Operator.ID, uuid.Nil); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("erasing somebody who may sign in: %v, want Conflict", err)
	}
	if err := p.SetActive(ctx, p.Operator.ID, false, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	if err := p.EraseName(ctx, p.Operator.ID, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	var left int
	err := p.Pool().QueryRow(ctx, `select count(*) from person p where p.id = $1 and (p.name ilike '%operator%' or p.login ilike '%operator%'
		or length(p.name_salt) > 0 or p.secret <> '' or p.badge is not null or p.pin <> '')`, p.Operator.ID).Scan(&left)
	if err != nil || left != 0 {
		t.Errorf("something of the person is left: %d, %v", left, err)
	}
	if err := p.SetActive(ctx, p.Operator.ID, true, uuid.Nil); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("letting somebody in who was erased: %v, want NotFound", err)
	}
	rec, err := p.LastRound(ctx, p.Station.ID)
	if err != nil || rec.ID != a.Round {
		t.Errorf("the record without the name: %+v, %v", rec, err)
	}
	honest(t, p)
}
