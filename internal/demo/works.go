package demo

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

// place is a station of the works with what is measured there.
type place struct {
	line    string
	name    string
	family  string
	machine string
	rate    float64  // parts an hour
	streams []string // parallel sources on the machine
	parts   []string
	gauges  []measure
	stopped bool // stands still when the history ends
	late    bool // its last round is overdue when the history ends
}

// measure is a characteristic with the process behind it.
type measure struct {
	name     string
	gauge    string
	setup    plant.Setup
	mean     float64 // where the process runs, in the unit
	sigma    float64 // of a reading, within
	wander   float64 // s.d. of what moves whole subgroups, as a share of sigma
	learning bool    // limits were never frozen
	revised  bool    // limits were revised half way
	faults   []fault
	spell    spell // of over-adjustment
}

// fault is a special cause: from day on it moves the mean and widens the spread until
// somebody finds it.
type fault struct {
	day    float64 // after the history begins
	shift  float64 // of the mean, in sigma
	drift  float64 // further shift a day, in sigma
	widen  float64 // factor on sigma, 0: 1
	cause  string
	action string
	open   bool // nobody has found it when the history ends
	turn   bool // it is here to stay, and the machine was adjusted for it
	alone  bool // nobody takes what it opens
}

// spell is a stretch of days in which somebody corrects the process after each sample
// by nearly its whole deviation from target.
type spell struct{ from, to float64 }

func dec(units int64, decimals int) *plant.Decimal {
	return &plant.Decimal{Units: units, Decimals: decimals}
}

func every(minutes int) plant.SamplingPlan { return plant.SamplingPlan{EveryMinutes: minutes} }

// Days is how long the history is.
const Days = 60

// works is Kestrel Row, in the order of the floor.
var works = []place{
	{line: "Axles", name: "Turning 1", family: "turning", machine: "Lathe 11", rate: 230, parts: []string{"Axle 100", "Axle 130"}, gauges: []measure{
		{name: "Axle seat diameter", gauge: "Micrometer M-04", mean: 14.9912, sigma: 0.0018, wander: 0.06, revised: true,
			setup: plant.Setup{Unit: "mm", Decimals: 3, Target: dec(14991, 3), Lower: dec(14982, 3), Upper: dec(15000, 3), Chart: limits.XBarR, Size: 5, Plan: every(30),
				ControlPlan: plant.ControlPlan{Operation: "20 turning", Drawing: "KR-1100", DrawingRevision: "C", Plan: "CP-20", RiskAnalysis: "RA-20.3", SpecialMark: "S", Method: "micrometer, seat centre"}},
			faults: []fault{{day: 9.3, shift: 2.2, cause: "Insert chipped", action: "Insert changed"}, {day: 31.6, widen: 2.1, cause: "Swarf in collet", action: "Collet cleaned, pressure set to 18 bar"},
				{day: 44.2, shift: -1.9, cause: "First parts after bar change, warm", action: "Warm-up of ten parts agreed"}, {day: Days - 0.03, shift: 2.2, open: true, cause: "Insert chipped", action: "Insert changed"}}},
		{name: "Shoulder length", gauge: "Depth gauge D-02", mean: 9.998, sigma: 0.021, wander: 0.04,
			setup:  plant.Setup{Unit: "mm", Decimals: 2, Target: dec(1000, 2), Lower: dec(990, 2), Upper: dec(1010, 2), Chart: limits.XBarR, Size: 3, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "20 turning", Drawing: "KR-1100", Plan: "CP-20"}},
			faults: []fault{{day: 22.4, shift: 2.8, cause: "Stop moved", action: "Stop set and locked"}}},
	}},
	{line: "Axles", name: "Turning 2", family: "turning", machine: "Lathe 12", rate: 210, parts: []string{"Axle 130"}, gauges: []measure{
		{name: "Axle seat diameter", gauge: "Micrometer M-05", mean: 14.9908, sigma: 0.0017, wander: 0.04,
			setup:  plant.Setup{Unit: "mm", Decimals: 3, Target: dec(14991, 3), Lower: dec(14982, 3), Upper: dec(15000, 3), Chart: limits.XBarS, Size: 6, Plan: every(30), ControlPlan: plant.ControlPlan{Operation: "20 turning", Drawing: "KR-1100", Plan: "CP-20"}},
			faults: []fault{{day: 17.8, drift: 0.9, cause: "Insert worn", action: "Insert changed"}, {day: 52.1, shift: 2.1, cause: "Swarf in collet", action: "Collet cleaned"}}},
	}},
	{line: "Axles", name: "Thread rolling", family: "rolling", machine: "Roller 3", rate: 320, parts: []string{"Axle 130"}, gauges: []measure{
		{name: "Pitch diameter", gauge: "Thread micrometer T-01", mean: 14.351, sigma: 0.006, wander: 0.05,
			setup:  plant.Setup{Unit: "mm", Decimals: 3, Target: dec(14350, 3), Lower: dec(14320, 3), Upper: dec(14380, 3), Chart: limits.XBarR, Size: 4, Plan: every(45), ControlPlan: plant.ControlPlan{Operation: "30 rolling", Drawing: "KR-1101", Plan: "CP-30"}},
			faults: []fault{{day: 21.4, shift: 2.6, turn: true, cause: "Harder bar stock", action: "Roll gap closed"}, {day: 39.5, drift: 0.5, cause: "Die worn", action: "Die pair changed"}}},
	}},
	{line: "Axles", name: "Straightening", family: "straightening", machine: "Press 7", rate: 180, parts: []string{"Axle 130"}, late: true, gauges: []measure{
		{name: "Run-out", gauge: "Bench centre B-03", mean: 0.018, sigma: 0.0045, wander: 0.04,
			setup:  plant.Setup{Unit: "mm", Decimals: 3, Upper: dec(40, 3), Worse: plant.High, Chart: limits.XBarR, Size: 4, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "40 straightening", Drawing: "KR-1100", Plan: "CP-40"}},
			faults: []fault{{day: 27.1, shift: 2.4, cause: "Anvil loose", action: "Anvil tightened"}}},
	}},
	{line: "Shells", name: "Shell turning", family: "turning", machine: "Lathe 21", rate: 90, parts: []string{"Shell 28", "Shell 32"}, gauges: []measure{
		{name: "Bearing bore", gauge: "Bore gauge G-11", mean: 27.9945, sigma: 0.0024, wander: 0.06, revised: true,
			setup: plant.Setup{Unit: "mm", Decimals: 3, Target: dec(27994, 3), Lower: dec(27984, 3), Upper: dec(28004, 3), Chart: limits.XBarR, Size: 5, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "50 shell turning", Drawing: "KR-2010", Plan: "CP-50", SpecialMark: "S"}},
			faults: []fault{{day: 12.7, shift: -2.3, cause: "Insert chipped", action: "Insert changed"}, {day: 47.9, widen: 1.9, cause: "Chuck jaw dirty", action: "Jaws cleaned"},
				{day: Days - 0.085, shift: -2.3, open: true, alone: true, cause: "Insert chipped", action: "Insert changed"}}},
	}},
	{line: "Shells", name: "Drilling 1", family: "drilling", machine: "Drill 5", rate: 60, streams: []string{"Spindle 1", "Spindle 2", "Spindle 3", "Spindle 4"}, parts: []string{"Shell 28"}, gauges: []measure{
		{name: "Spoke-hole position", gauge: "Pin gauge P-02", mean: 0.062, sigma: 0.0125, wander: 0.04,
			setup: plant.Setup{Unit: "mm", Decimals: 3, Upper: dec(100, 3), Worse: plant.High, Chart: limits.XBarS, Size: 8, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "60 drilling", Drawing: "KR-2010", Plan: "CP-60"}},
			faults: []fault{{day: 50.2, widen: 1.9, cause: "Gauge anvil dirty", action: "Gauge cleaned and checked against the master"},
				{day: never, cause: gaugeWorn, action: "New pin, checked against the master"}}},
	}},
	{line: "Shells", name: "Drilling 2", family: "drilling", machine: "Drill 6", rate: 60, parts: []string{"Shell 32"}, stopped: true, gauges: []measure{
		{name: "Spoke-hole position", gauge: "Pin gauge P-03", mean: 0.041, sigma: 0.008, wander: 0.04,
			setup:  plant.Setup{Unit: "mm", Decimals: 3, Upper: dec(100, 3), Worse: plant.High, Chart: limits.XBarS, Size: 8, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "60 drilling", Drawing: "KR-2010", Plan: "CP-60"}},
			faults: []fault{{day: 35.4, shift: 2.6, cause: "Bush worn", action: "Bush changed"}}},
	}},
	{line: "Shells", name: "Anodising", family: "anodising", machine: "Bath 2", rate: 140, parts: []string{"Shell 28"}, gauges: []measure{
		{name: "Coating thickness", gauge: "Eddy-current gauge E-01", mean: 9.8, sigma: 0.62,
			setup: plant.Setup{Unit: "μm", Decimals: 1, Lower: dec(70, 1), Upper: dec(130, 1), Target: dec(100, 1), Chart: limits.Individuals, Size: 1, Plan: every(60), ControlPlan: plant.ControlPlan{Operation: "70 anodising", Plan: "CP-70"}},
			faults: []fault{{day: 25.2, shift: -3.2, cause: "Bath temperature low", action: "Heater fuse changed"},
				{day: Days - 0.16, shift: -3.2, open: true, alone: true, cause: "Bath temperature low", action: "Heater fuse changed"}}},
		{name: "Bath temperature", gauge: "Thermometer H-09", mean: 19.9, sigma: 0.28, learning: true,
			setup: plant.Setup{Unit: "°C", Decimals: 1, Lower: dec(180, 1), Upper: dec(220, 1), Target: dec(200, 1), Chart: limits.Individuals, Size: 1, Plan: every(240), ControlPlan: plant.ControlPlan{Operation: "70 anodising", Plan: "CP-70"}}},
	}},
	{line: "Assembly", name: "Press", family: "pressing", machine: "Press 9", rate: 150, parts: []string{"Hub F28", "Hub R32"}, gauges: []measure{
		{name: "Bearing press force", gauge: "Load cell L-01", mean: 6.38, sigma: 0.11, wander: 0.05,
			setup: plant.Setup{Unit: "kN", Decimals: 2, Target: dec(640, 2), Lower: dec(600, 2), Upper: dec(680, 2), Chart: limits.XBarR, Size: 4, Worse: plant.Neither,
				Plan:        plant.SamplingPlan{EveryMinutes: 30, Events: []plant.Occasion{plant.ToolChange, plant.StartUp}},
				ControlPlan: plant.ControlPlan{Operation: "80 pressing", Drawing: "KR-3000", Plan: "CP-80", RiskAnalysis: "RA-80.1", SpecialMark: "S", Method: "load cell, peak"}},
			faults: []fault{{day: 14.5, shift: 2.5, cause: "Bearing seat undersize", action: "Lot of shells sorted"}, {day: Days - 0.035, shift: 3.1, open: true, cause: "Bearing seat undersize", action: "Lot of shells sorted"}}},
	}},
	{line: "Assembly", name: "Greasing", family: "greasing", machine: "Dispenser 4", rate: 150, parts: []string{"Hub F28"}, gauges: []measure{
		{name: "Grease mass", gauge: "Balance W-02", mean: 1.212, sigma: 0.055, spell: spell{20, 29},
			setup: plant.Setup{Unit: "g", Decimals: 2, Target: dec(120, 2), Lower: dec(95, 2), Upper: dec(145, 2), Chart: limits.Individuals, Size: 1,
				Plan: plant.SamplingPlan{EveryMinutes: 30, Events: []plant.Occasion{plant.AfterAdjustment}}, ControlPlan: plant.ControlPlan{Operation: "90 greasing", Plan: "CP-90"}},
			faults: []fault{{day: 34.6, shift: 3.2, turn: true, cause: "Softer grease, new supplier", action: "Dosing screw turned back"}, {day: 41.3, shift: -2.9, cause: "Nozzle partly blocked", action: "Nozzle cleaned"},
				{day: 51.4, shift: -2.7, turn: true, cause: "Hall colder, grease stiffer", action: "Dosing screw turned up"}}},
	}},
	{line: "Assembly", name: "Final test", family: "testing", machine: "Test bench 1", rate: 150, parts: []string{"Hub F28"}, gauges: []measure{
		{name: "Drag torque", gauge: "Torque bench Q-01", mean: 0.031, sigma: 0.0031, wander: 0.04,
			setup: plant.Setup{Unit: "N m", Decimals: 4, Upper: dec(450, 4), Worse: plant.High, Chart: limits.XBarR, Size: 5,
				Plan: plant.SamplingPlan{EveryParts: 150}, ControlPlan: plant.ControlPlan{Operation: "100 final test", Plan: "CP-100"}},
			faults: []fault{{day: 33.8, shift: 2.2, cause: "Grease too stiff", action: "Grease drum changed"}}},
	}},
}

// shifts of the works; it stands still at night and on Sundays.
var shifts = []plant.Shift{{Name: "early", Starts: 6 * time.Hour}, {Name: "late", Starts: 14 * time.Hour}, {Name: "night", Starts: 22 * time.Hour}}

// families of parts: the axles share their charts, and so do the hubs.
var families = map[string]string{"Axle 100": "axles", "Axle 130": "axles", "Shell 28": "shells", "Shell 32": "shells", "Hub F28": "hubs", "Hub R32": "hubs"}

// people of the works. They are called by what they do.
var people = []struct {
	login, name string
	roles       plant.Roles
}{
	{"operator1", "Operator 1", plant.Roles{plant.Operator}},
	{"operator2", "Operator 2", plant.Roles{plant.Operator}},
	{"supervisor1", "Supervisor 1", plant.Roles{plant.Supervisor}},
	{"engineer1", "Engineer 1", plant.Roles{plant.Engineer}},
	{"administrator1", "Administrator 1", plant.Roles{plant.Administrator}},
}
