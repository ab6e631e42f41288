package plant

// Truth is a block of consecutive samples of what the cell did, columns of one
// length. Sample k stands at t_k; "before" is just before any change at t_k.
type Truth struct {
	TimeS          []float64 // t_k = k·period
	SOC            []float64 // z at t_k
	CurrentA       []float64 // the current that flows from t_k on, > 0 on discharge
	VoltageV       []float64 // the terminal voltage under it
	CurrentBeforeA []float64 // the current that flowed up to t_k; at the first sample CurrentA
	VoltageBeforeV []float64 // the terminal voltage under that one
	CurrentMeanA   []float64 // mean current over (t_{k-1}, t_k], exact; at the first sample CurrentA
	TemperatureC   []float64 // cell temperature at t_k
	PeriodS        float64   // distance of samples, > 0
}

// Len returns the number of samples.
func (t *Truth) Len() int { return len(t.TimeS) }

// MakeTruth returns a block with room for n samples.
func MakeTruth(n int) Truth {
	back := make([]float64, 8*n)
	col := func(i int) []float64 { return back[i*n : (i+1)*n : (i+1)*n] }
	return Truth{TimeS: col(0), SOC: col(1), CurrentA: col(2), VoltageV: col(3),
		CurrentBeforeA: col(4), VoltageBeforeV: col(5), CurrentMeanA: col(6), TemperatureC: col(7)}
}

// Slice returns the samples from to to (excluded), sharing memory with t.
func (t *Truth) Slice(from, to int) Truth {
	return Truth{TimeS: t.TimeS[from:to], SOC: t.SOC[from:to], CurrentA: t.CurrentA[from:to],
		VoltageV: t.VoltageV[from:to], CurrentBeforeA: t.CurrentBeforeA[from:to],
		VoltageBeforeV: t.VoltageBeforeV[from:to], CurrentMeanA: t.CurrentMeanA[from:to],
		TemperatureC: t.TemperatureC[from:to], PeriodS: t.PeriodS}
}
