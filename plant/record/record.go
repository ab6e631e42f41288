// Package record holds what was measured: blocks of sensor readings on their
// way to an estimator, and whole records of a lab or a vehicle, as columns in
// memory. It opens no file; benches/store reads and writes them.
//
// A missing value is NaN. Current is positive on discharge.
package record

// CurrentReading says what a current reading at sample k means.
type CurrentReading string

const (
	// Instant is the current that flows from t_k on; the voltage is the one
	// under it.
	Instant CurrentReading = "instant"
	// IntervalMean is the mean current over (t_{k-1}, t_k]; the voltage is the
	// one just before t_k, under the current that flowed up to it. The first
	// reading is an instant one.
	IntervalMean CurrentReading = "interval-mean"
)

// Readings is a block of consecutive samples, columns of one length. A missing
// current, voltage or temperature is NaN; a time never is.
type Readings struct {
	TimeS        []float64 // s from the start, never decreasing
	CurrentA     []float64
	VoltageV     []float64
	TemperatureC []float64
	// PeriodS > 0 says that samples lie exactly this far apart, so that a
	// consumer need not take rounded differences of TimeS; 0: use TimeS.
	PeriodS        float64
	CurrentReading CurrentReading // empty means Instant
}

// Len returns the number of samples.
func (r *Readings) Len() int { return len(r.TimeS) }

// MakeReadings returns a block with room for n samples.
func MakeReadings(n int) Readings {
	back := make([]float64, 4*n)
	return Readings{
		TimeS: back[0:n:n], CurrentA: back[n : 2*n : 2*n],
		VoltageV: back[2*n : 3*n : 3*n], TemperatureC: back[3*n : 4*n : 4*n],
	}
}

// Slice returns the samples from to to (excluded), sharing memory with r.
func (r *Readings) Slice(from, to int) Readings {
	s := *r
	s.TimeS, s.CurrentA = r.TimeS[from:to], r.CurrentA[from:to]
	s.VoltageV, s.TemperatureC = r.VoltageV[from:to], r.TemperatureC[from:to]
	return s
}

// Record is a whole record: readings, and what reference the recorder kept.
type Record struct {
	Name     string
	Readings           // PeriodS is 0: time stamps are as recorded
	SOC      []float64 // recorded reference SOC, or nil
	ChargeAh []float64 // the recorder's charge counter, rising on discharge, or nil
}

// Map says how a foreign file reads as a record. A zero Column is absent.
type Map struct {
	Time, Current, Voltage, Temperature, SOC, Charge Column
	SkipRows                                         int    // lines to skip before the headings
	Delimiter                                        string // one character; empty: found by looking
	Decimal                                          string // "." or ","; empty: "."
}

// Column names one column of a foreign file and its unit.
type Column struct {
	Heading        string // exact heading; empty when Position is used
	Position       int    // 1-based; for headings that repeat; 0: by Heading
	Unit           string // as in the file: s, min, h, ms, A, mA, V, mV, degC, degF, K, Ah, mAh, As, fraction, percent, datetime
	ChargePositive bool   // current and charge only: the file counts charging as positive
}

// Given reports whether the column was named at all.
func (c Column) Given() bool { return c.Heading != "" || c.Position != 0 }
