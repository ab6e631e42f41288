package counting_test

import (
	"fmt"
	"math"

	"soctrial/estimator"
	"soctrial/estimator/counting"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// A 2 Ah cell, told full, gives 2 A for half an hour, one sample a minute.
func ExampleNewCoulomb() {
	c := &cell.Cell{Name: "two", CapacityAh: 2, CoulombicEfficiency: 1, VoltageMinV: 2.5, VoltageMaxV: 4.2, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3, 4.1}), R0: cell.Constant(0.03)}
	notGiven := math.NaN()
	e, err := counting.NewCoulomb(estimator.Setup{Spec: estimator.Spec{Kind: "coulomb", SOCStd: notGiven, CurrentStdA: notGiven}, Cell: c, SOCStart: 1})
	if err != nil {
		fmt.Println(err)
		return
	}
	in, out := record.MakeReadings(31), estimator.MakeEstimate(31)
	in.PeriodS = 60
	for k := range in.TimeS {
		in.TimeS[k], in.CurrentA[k] = 60*float64(k), 2
	}
	if err := e.Advance(&in, &out); err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.0f%% left\n", 100*out.SOC[30])
	// Output: 50% left
}
