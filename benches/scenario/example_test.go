package scenario_test

import (
	"fmt"
	"math"

	"soctrial/benches/scenario"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// A grid of two offsets and two capacities on one cell, duty and sensor set.
func ExampleDraw() {
	none := math.NaN()
	plan := &scenario.Plan{Draw: scenario.Grid, Seed: 7, Score: scenario.DefaultScore(), Vary: []scenario.Vary{
		{Column: "current_offset_a", Values: []float64{-0.1, 0.1}, Min: none, Max: none},
		{Column: "capacity_scale", Values: []float64{1, 0.8}, Min: none, Max: none},
	}}
	set, err := scenario.Draw(plan, scenario.Definitions{
		CellNames: []string{"quay-sweeper-21"}, Cells: map[string]*cell.Cell{"quay-sweeper-21": {}},
		DutyNames: []string{"rounds"}, Duties: map[string]*duty.Duty{"rounds": {}},
		SensorsNames: []string{"pack"}, Sensors: map[string]*noise.Sensors{"pack": {}},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	offset, _ := scenario.Find("current_offset_a")
	for i := range set.Rows {
		row := &set.Rows[i]
		fmt.Println(row.ID, row.Cell, offset.Get(row), row.CapacityScale)
	}
	// Output:
	// 1 quay-sweeper-21 -0.1 1
	// 2 quay-sweeper-21 -0.1 0.8
	// 3 quay-sweeper-21 0.1 1
	// 4 quay-sweeper-21 0.1 0.8
}
