package main

import (
	"context"
	"strings"
	"testing"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store/storetest"
)

// Two machines of a station may measure the same thing.
func TestANameThatTwoMachinesHave(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := context.Background()
	twin := plant.Characteristic{ID: storetest.ID(), StationID: r.Station.ID, MachineID: r.Second.ID, Name: r.Diameter.Name}
	if err := r.AddCharacteristic(ctx, twin, plant.Setup{Unit: "mm", Decimals: 3, Target: storetest.Decimal(t, "14.991"), Lower: storetest.Decimal(t, "14.982"),
		Upper: storetest.Decimal(t, "15.000"), Chart: limits.XBarR, Size: 5, Plan: plant.SamplingPlan{EveryMinutes: 30}}, r.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	v := r.visit(t, "")
	_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	send := func(name string, want int) string {
		return v.api("rounds", map[string]any{"id": newNumber(), "taken_at": r.Clock.Now(), "entries": []any{
			map[string]any{"characteristic": name, "unit": "mm", "readings": []any{"14.991", "14.990", "14.991", "14.99", "14.992"}},
		}}, want)
	}
	if told := send(r.Diameter.Name, 422); !strings.Contains(told, `measures \"Axle seat diameter\" more than once`) || !strings.Contains(told, ` / Axle seat diameter\"`) {
		t.Errorf("of a name that is there twice: %s", told)
	}
	for _, name := range []string{"Lathe 2 / Axle seat diameter", twin.ID.String()} {
		if told := send(name, 200); !strings.Contains(told, twin.ID.String()) {
			t.Errorf("%s: %s", name, told)
		}
	}
	if told := send("Lathe 9 / Axle seat diameter", 422); !strings.Contains(told, "measures no") {
		t.Errorf("of a machine that is not there: %s", told)
	}
}
