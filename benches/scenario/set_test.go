package scenario

import (
	"math"
	"strings"
	"testing"

	"soctrial/noise"
	"soctrial/plant/cell"
)

func TestSetValidate(t *testing.T) {
	whole := func() *Set {
		s, err := Draw(&Plan{Draw: Grid, Vary: []Vary{values("soc_start", 1, 0.5)}}, yard())
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
	for want, spoil := range map[string]func(*Set){
		"scenario_id: found 1 in more than one row":                    func(s *Set) { s.Rows[1].ID = 1 },
		"scenario 2: scenario: cell: found \"tug\"":                    func(s *Set) { s.Rows[1].Cell = "tug" },
		"scenario 1: scenario: duty: found \"tour\"":                   func(s *Set) { s.Rows[0].Duty = "tour" },
		"scenario 3: scenario: sensors: found \"van\"":                 func(s *Set) { s.Rows[2].Sensors = "van" },
		"scenario 1: scenario: soc_start: found 2":                     func(s *Set) { s.Rows[0].SOCStart = 2 },
		"found a definition named \"x.sha256\"":                        func(s *Set) { s.Cells["x.sha256"] = &cell.Cell{} },
		"scenario 1: scenario: temperature_start_c: found 10, allowed": func(s *Set) { s.Rows[0].TemperatureStartC = 10 },
		"current_dropout_s: found 0, allowed is > 0 with a share":      func(s *Set) { s.Rows[0].Override[8] = 0.1 },
		"voltage_stuck_s: found 0": func(s *Set) {
			s.Sensors["pack"] = &noise.Sensors{Voltage: noise.Channel{StuckShare: 0.1}}
		},
		"score.converge_band: found 5, allowed is a number in [0, 1]": func(s *Set) { s.Score.ConvergeBand = 5 },
		"limit[0].group: found \"aged\"":                              func(s *Set) { s.Limits = []Limit{{Group: "aged"}} },
	} {
		s := whole()
		spoil(s)
		if err := s.Validate(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
	s := whole()
	s.Cells["sweeper"] = &cell.Cell{Thermal: &cell.Thermal{}}
	s.Rows[0].TemperatureStartC, s.Rows[0].AmbientC = 10, 20
	s.Rows[4].TemperatureStartC = 25 // a cell without [thermal], at ambient
	s.Rows[5].TemperatureStartC = math.NaN()
	if err := s.Validate(); err != nil {
		t.Error(err)
	}
}

// Rows that carry one number are one draw; a row without one is none of them.
func TestDraws(t *testing.T) {
	number := func(x float64) []Label { return []Label{{Column: "label_draw", Number: x, IsNumber: true}} }
	s := &Set{Rows: []Row{{ID: 4, Labels: number(1)}, {ID: 5, Labels: number(1)}, {ID: 6, Labels: number(2.5)},
		{ID: 7}, {ID: 8, Labels: number(math.NaN())}}}
	d := s.Draws()
	if len(d) != 3 || d[4] != d[5] || d[4] == d[6] {
		t.Errorf("draws %v", d)
	}
}
