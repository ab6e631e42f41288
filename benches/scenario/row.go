// Package scenario holds what a bench runs: resolved scenarios, the definitions
// they name, and the plans they are drawn from.
//
// A Row has nothing left to draw. A scenario's result is a function of its
// Row, the definitions it names and its seed, and of nothing else.
package scenario

import (
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// Row is one scenario, every value resolved.
type Row struct {
	ID      int64
	Seed    uint64
	Cell    string // definitions, by name
	Duty    string
	Sensors string
	Group   string // optional, for limits and summaries

	SOCStart          float64 // (1) true SOC at the start
	SOCStartError     float64 // (0) told minus true
	HysteresisStart   float64 // (0) [-1, 1]
	TemperatureStartC float64 // (ambient) NaN: ambient
	AmbientC          float64 // (25)

	CapacityScale  float64 // (1)
	R0Scale        float64 // (1)
	BranchRScale   float64 // (1)
	BranchTauScale float64 // (1)
	OCVOffsetV     float64 // (0)

	R0DriftPerH       float64 // (0)
	CapacityDriftPerH float64 // (0)
	R0WalkPerSqrtH    float64 // (0)

	PlantSubsteps int // (1)

	// Sensors replace the definition's values where they are not NaN.
	Override SensorValues
	// CurrentReading replaces the definition's where it is not empty.
	CurrentReading string

	Labels []Label // text columns and label_ numbers, carried along, in the set's column order
}

// Label is a value that is carried along and never computed with.
type Label struct {
	Column   string
	Text     string
	Number   float64 // when IsNumber
	IsNumber bool
}

// Set is a scenario set with the definitions it names.
type Set struct {
	Rows    []Row
	Cells   map[string]*cell.Cell
	Duties  map[string]*duty.Duty
	Sensors map[string]*noise.Sensors
	// Texts holds the TOML each definition is kept as, by "cell.<name>",
	// "duty.<name>", "sensors.<name>" and "plan".
	Texts  map[string]string
	Score  ScoreSettings
	Limits []Limit
	Draw   DrawKind // how the plan drew it; empty: not from a plan
}

// ScoreSettings is the plan's [score].
type ScoreSettings struct {
	SettleAfterS  float64 // 600
	ConvergeBand  float64 // 0.05
	ConvergeHoldS float64 // 60
	LowSOC        float64 // 0.2
}

// DefaultScore returns the settings a plan without [score] has.
func DefaultScore() ScoreSettings {
	return ScoreSettings{SettleAfterS: 600, ConvergeBand: 0.05, ConvergeHoldS: 60, LowSOC: 0.2}
}

// Limit is one [[limit]] of a plan: the share of scenarios whose metric's
// size is at most AtMost must be at least Share.
type Limit struct {
	Metric    string
	AtMost    float64
	Share     float64 // (0, 1]; 1 when not given
	Group     string  // only scenarios of this group; empty: all
	Estimator string  // only this estimator; empty: each
}

// DrawKind is how a plan draws.
type DrawKind string

// The ways to draw.
const (
	Grid           DrawKind = "grid"
	Sobol          DrawKind = "sobol"
	LatinHypercube DrawKind = "latin-hypercube"
	List           DrawKind = "list"
)

// Vary is one [[vary]] of a plan; exactly one of Values, Between, Normal,
// LogNormal and Triangular is given.
type Vary struct {
	Column     string
	Values     []float64
	Texts      []string // values of a text column (group, current_reading, labels)
	Between    *[2]float64
	Steps      int // with Between in a grid
	Normal     *Normal
	LogNormal  *LogNormal
	Triangular *Triangular
	Min, Max   float64 // draws are limited to them; NaN: none
}

// Normal is a normal distribution.
type Normal struct{ Mean, Std float64 }

// LogNormal is a log-normal distribution: exp(N(ln Median, Sigma²)).
type LogNormal struct{ Median, Sigma float64 }

// Triangular is a triangular distribution.
type Triangular struct{ Low, Mode, High float64 }

// Plan is what a set is drawn from.
type Plan struct {
	Name                   string
	Cells, Duties, Sensors []string // files, as written
	Draw                   DrawKind
	Count                  int
	Seed                   uint64
	Vary                   []Vary
	Score                  ScoreSettings
	Limits                 []Limit
}
