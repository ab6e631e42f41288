// Package duty says what is asked of a cell: legs of current, power, held
// voltage, pulses, traces and road speeds, with their stops and repeats.
//
// A Duty is the definition. Compile turns it into a Program, flat and
// read-only, that any number of Cursors walk at once, one demand at a time. A
// Cursor knows nothing of the cell: whoever runs it (the plant) says when a
// demand's time has passed and when a stop was met.
//
// The package never looks at a state of charge or a voltage itself, and reads
// no files: a trace arrives as columns.
package duty

// Kind is the kind of a leg.
type Kind string

// The kinds of a leg.
const (
	Rest        Kind = "rest"
	Current     Kind = "current"
	Power       Kind = "power"
	HoldVoltage Kind = "hold-voltage"
	Pulses      Kind = "pulses"
	Trace       Kind = "trace"
	Speed       Kind = "speed"
	Profile     Kind = "profile"
	Group       Kind = "group"
)

// AtLimit is what a leg does where the cell meets one of its limits.
type AtLimit string

// What a leg does at a limit. Empty is the default of the design: charging is
// cut back at voltage_max_v and at SOC 1, discharging ends the duty at
// voltage_min_v and at SOC 0.
const (
	Cut AtLimit = "cut"
	End AtLimit = "end"
)

// Leg is one part of a duty. NaN marks a number that was not given; a slice
// not given is nil. Which fields a kind uses is told beside each.
type Leg struct {
	Kind      Kind
	DurationS float64 // one pass; a leg with stops only needs it as a cap
	Repeat    int     // passes, ≥ 1; 0 means 1
	AtLimit   AtLimit

	UntilSOC      float64 // stop; see Stop for the side
	UntilVoltageV float64
	UntilCurrentA float64 // stop when |i| is at or below it
	UntilCRate    float64 // likewise, of the nameplate capacity

	CurrentA float64 // current, pulses, profile (relative ones)
	CRate    float64 // instead of CurrentA
	PowerW   float64 // power
	VoltageV float64 // hold-voltage

	PulseS      float64 // pulses: a group is pulse, rest and, with ReturnRatio, return pulse, rest
	RestS       float64
	Count       int     // pulses: groups
	ReturnRatio float64 // pulses: the opposite pulse's size over the pulse's, ≥ 0
	SOCStep     float64 // pulses: charge moved between groups, of the nameplate capacity
	StepCRate   float64 // at this rate
	StepRestS   float64 // and rested after

	TimeS    []float64 // trace, speed: from 0, ascending
	TraceA   []float64 // trace: current
	TraceW   []float64 // trace: power
	SpeedMps []float64 // speed
	Vehicle  *Vehicle  // speed, and profiles that are speeds
	File     string    // where the columns came from, for messages

	ProfileName string  // profile
	PeakPowerW  float64 // profile: scales one given as a share of its peak power

	Legs []Leg // group
}

// Vehicle turns road speed into cell power.
type Vehicle struct {
	MassKg                 float64 // > 0
	RotatingMassKg         float64 // ≥ 0, added to the inertia alone
	RollingCoefficient     float64 // ≥ 0
	DragAreaM2             float64 // drag coefficient times frontal area, ≥ 0
	AirDensityKgPerM3      float64 // > 0
	Slope                  float64 // rise over run
	DriveEfficiency        float64 // (0, 1], driving power is divided by it
	RegenerationEfficiency float64 // [0, 1], braking power is multiplied by it
	AuxiliaryW             float64 // ≥ 0, always drawn
	Series                 int     // cells in series, ≥ 1
	Parallel               int     // cells in parallel, ≥ 1
}

// Duty is the definition of what is asked, legs in order.
type Duty struct {
	Name    string
	Legs    []Leg
	Vehicle *Vehicle // the duty's [vehicle], for legs without their own
}

// Quantity is what a demand holds.
type Quantity uint8

// What a demand holds.
const (
	CurrentDemand Quantity = iota // A, > 0 discharges
	PowerDemand                   // W, > 0 discharges
	VoltageDemand                 // V at the terminals
)

// Demand is what is asked from one instant until the next change.
type Demand struct {
	Quantity Quantity
	Value    float64
	EndS     float64 // when it changes, s from the duty's start; +Inf: only by a stop
}

// StopQuantity is what a stop looks at.
type StopQuantity uint8

// What a stop looks at.
const (
	StopSOC StopQuantity = iota
	StopVoltage
	StopCurrent // met when |i| ≤ Value
)

// Side is from which side a stop is met.
type Side uint8

// The sides of a stop.
const (
	// SideAsBegun: met when the quantity has reached Value from the side it
	// was on when the scope began.
	SideAsBegun Side = iota
	SideFalling      // met when the quantity is ≤ Value (discharge)
	SideRising       // met when the quantity is ≥ Value (charge)
)

// Stop ends a leg or a group, with all its repeats.
type Stop struct {
	Quantity StopQuantity
	Side     Side
	Value    float64
	Depth    int // how deep the scope it ends lies: 0 a leg of the duty, 1 within its group, …
	Leg      int // which leg of the duty (counted from 1 at the top level), for messages
}
