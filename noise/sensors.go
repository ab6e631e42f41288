package noise

import "soctrial/plant/record"

// Channel is how one sensor lies, in the unit of its quantity (A, V or °C;
// written u). All zero is an ideal sensor.
type Channel struct {
	Offset       float64 // u
	GainError    float64 // 1; reads (1+GainError) times the truth
	Noise        float64 // u, standard deviation of each sample, ≥ 0
	WalkPerSqrtS float64 // u/√s, random walk of the offset, ≥ 0
	OffsetPerK   float64 // u/K away from the cell's reference temperature
	Quantum      float64 // u, step of the converter, ≥ 0; 0: none
	Range        float64 // u, readings saturate at ±Range, ≥ 0; 0: none
	DelayS       float64 // s, ≥ 0
	DropoutShare float64 // share of time without a reading, [0, 1)
	DropoutS     float64 // s, mean length of a dropout, > 0 with a share
	StuckShare   float64 // share of time that repeats the last good reading, [0, 1)
	StuckS       float64 // s, mean length of a stuck spell, > 0 with a share
	Every        int     // one reading every so many samples, ≥ 1; 0 means 1
}

// Sensors is the definition of a sensor set.
type Sensors struct {
	Name           string
	SamplePeriodS  float64 // > 0
	Current        Channel
	Voltage        Channel
	Temperature    Channel
	CurrentReading record.CurrentReading // empty: instant
}
