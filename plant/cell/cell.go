// Package cell holds what is known of one battery cell: an equivalent circuit
// of an open-circuit voltage (OCV), a series resistance and up to five RC
// branches, with optional one-state hysteresis and a lumped thermal mass.
//
// A Cell is the definition, as tables. A Model is the same cell made ready to
// be stepped at one sample period: the tables joined on one SOC axis as
// polynomials, scaled for ageing, with their derivatives. The plant and every
// estimator read the same Model, so that a filter on a perfect cell is exactly
// right.
//
// The package keeps no state of a running cell, reads no files and never
// limits a state of charge: outside its table an OCV goes on with its edge
// slope, in value and derivative alike.
package cell

// Interpolation is how a table is read between the points of its SOC axis.
type Interpolation string

// The ways to read a table over SOC. An empty Interpolation means the cell's
// own choice in a table, and PCHIP in a cell.
const (
	// PCHIP is the monotone piecewise cubic of Fritsch & Butland (1984), "A
	// method for constructing local monotone piecewise cubic interpolants",
	// SIAM J. Sci. Stat. Comput. 5(2), with three-point shape-preserving ends.
	PCHIP Interpolation = "pchip"
	// Linear joins the points by straight lines; at a knot the slope is that
	// of the interval above.
	Linear Interpolation = "linear"
)

// MaxBranches is the most RC branches a cell may have.
const MaxBranches = 5

// Table is a quantity over SOC, over temperature or over both.
//
// With both axes Values[r][c] belongs to TemperatureC[r] and SOC[c]. Without a
// temperature axis there is one row, without a SOC axis one column; with
// neither, the single value is a constant. Between temperatures a table is
// linear; over SOC it follows Interpolation. Both axes ascend strictly.
type Table struct {
	SOC           []float64 // fractions, 0 to 1; nil: does not depend on SOC
	TemperatureC  []float64 // °C; nil: does not depend on temperature
	Values        [][]float64
	Interpolation Interpolation // empty: the cell's
}

// Constant returns the table that holds v everywhere.
func Constant(v float64) Table { return Table{Values: [][]float64{{v}}} }

// OverSOC returns the table of values over soc, at every temperature.
func OverSOC(soc, values []float64) Table {
	return Table{SOC: soc, Values: [][]float64{values}}
}

// Branch is one RC pair. Exactly one of TauS and Farad is given; with Farad the
// time constant is R·C, each table interpolated first.
type Branch struct {
	Ohm   Table  // resistance, ≥ 0
	TauS  *Table // time constant, s, > 0
	Farad *Table // capacitance, F, > 0
}

// Hysteresis is the one-state hysteresis of Plett (2004), "Extended Kalman
// filtering for battery management systems of LiPB-based HEV battery packs,
// part 2", J. Power Sources 134: the state h tends to -1 under discharge and
// +1 under charge, and the terminals see M(z)·h.
type Hysteresis struct {
	HalfGapV Table   // M, V, ≥ 0, over SOC alone
	Rate     float64 // gamma, ≥ 0, per unit of charge moved over capacity
}

// Thermal is a lumped mass that heats by its losses and cools to ambient.
type Thermal struct {
	HeatCapacityJPerK float64 // > 0
	ConductanceWPerK  float64 // to ambient, ≥ 0; 0 is adiabatic
}

// Cell is a cell's definition. Current is positive on discharge.
type Cell struct {
	Name                string
	CapacityAh          float64 // nameplate: the charge between SOC 1 and 0 at low rate and TemperatureRefC, > 0
	CoulombicEfficiency float64 // share of the charge current that is stored, (0, 1]
	VoltageMinV         float64 // discharge ends here
	VoltageMaxV         float64 // charge is cut back here, > VoltageMinV
	TemperatureRefC     float64 // °C at which the tables without a temperature axis hold
	Interpolation       Interpolation
	OCV                 Table  // V over SOC, required SOC axis of at least two points
	OCVSlopeVPerK       *Table // dOCV/dT over SOC; OCV(z,T) = OCV(z) + slope(z)·(T - TemperatureRefC); not with temperature rows in OCV
	R0                  Table  // series resistance, Ω, ≥ 0
	Branches            []Branch
	Hysteresis          *Hysteresis
	Thermal             *Thermal
	Uncertainty         *Uncertainty
	Origin              map[string]any // how the cell was made; carried along, never read by a calculation
}

// Uncertainty is the standard error of a cell's numbers, as identified.
type Uncertainty struct {
	Tables      map[string]any // the cell's tables again, holding standard errors
	Names       []string       // what each row of Correlation belongs to
	Correlation [][]float64    // square, symmetric, ones on the diagonal
}
