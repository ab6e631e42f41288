// Package estimator is the contract between the bench and anything that
// estimates state of charge: readings in by the block, estimates out by the
// block, strictly causal, its state saved and restored as bytes.
//
// An estimator may know the cell it was given. It never sees the plant that
// holds the truth, nor the noise that was injected.
package estimator

import (
	"fmt"
	"math"

	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// Estimate is a block of estimates, columns of one length, one value a sample.
// NaN stands where a kind states no such value or nothing was measured.
type Estimate struct {
	SOC               []float64 // reported, limited to [0, 1]
	SOCFree           []float64 // the same before it is limited
	SOCStd            []float64 // stated standard deviation of SOCFree
	VoltagePredictedV []float64 // before the reading was used
	InnovationV       []float64 // reading minus prediction
	InnovationStdV    []float64 // stated standard deviation of the innovation
}

// Len returns the number of samples.
func (e *Estimate) Len() int { return len(e.SOC) }

// MakeEstimate returns a block with room for n samples.
func MakeEstimate(n int) Estimate {
	back := make([]float64, 6*n)
	col := func(i int) []float64 { return back[i*n : (i+1)*n : (i+1)*n] }
	return Estimate{SOC: col(0), SOCFree: col(1), SOCStd: col(2), VoltagePredictedV: col(3),
		InnovationV: col(4), InnovationStdV: col(5)}
}

// Slice returns the samples from to to (excluded), sharing memory with e.
func (e *Estimate) Slice(from, to int) Estimate {
	return Estimate{SOC: e.SOC[from:to], SOCFree: e.SOCFree[from:to], SOCStd: e.SOCStd[from:to],
		VoltagePredictedV: e.VoltagePredictedV[from:to], InnovationV: e.InnovationV[from:to],
		InnovationStdV: e.InnovationStdV[from:to]}
}

// Estimator follows one cell's state of charge through its readings.
type Estimator interface {
	// Advance folds the next block of readings in and writes one estimate a
	// sample to out, whose columns are as long as the readings'. A block may
	// have any length; how a record is cut into blocks never changes a number.
	// It allocates nothing. A filter that cannot go on returns a *LostError;
	// estimates from that sample on are then not written, and the estimator is
	// not to be used again.
	Advance(in *record.Readings, out *Estimate) error
	// MarshalBinary returns the whole state; an estimator built from the same
	// Setup that restores it continues with the same numbers.
	MarshalBinary() ([]byte, error)
	// UnmarshalBinary restores a state that MarshalBinary gave.
	UnmarshalBinary(state []byte) error
}

// Spec is an estimator's definition, as a person wrote it. A deviation that a
// kind may do without is NaN where it was not given.
type Spec struct {
	Name     string
	Kind     string
	Branches int        // RC branches to use; negative: all the cell's
	CellFile string     // path as written, told in messages; empty: the scenario's fresh cell
	Cell     *cell.Cell // what CellFile holds; nil: the scenario's fresh cell

	SOCStd     float64 // [start], standard deviation of the told SOC, ≥ 0
	BranchStdV float64 // [start], of each branch voltage, ≥ 0

	SOCStdPerSqrtS     float64 // [process], ≥ 0
	BranchStdVPerSqrtS float64 // [process], ≥ 0

	VoltageStdV float64 // [measurement], > 0
	CurrentStdA float64 // [measurement], ≥ 0

	RestCurrentBelowA float64 // [rest] of rest-ocv, > 0
	RestAfterS        float64 // [rest] of rest-ocv, > 0
}

// Setup is one estimator's start in one run.
type Setup struct {
	Spec Spec
	Cell *cell.Cell // the cell it believes in; the fresh one, never the plant's aged one
	// Model is Cell as Compile would make it, so that many runs share one;
	// nil: the constructor compiles it.
	Model           *cell.Model
	SOCStart        float64 // what it is told, already limited to [0, 1]
	HysteresisStart float64 // what it is told, [-1, 1]
	PeriodS         float64 // the usual distance of samples, > 0; 0: not even
}

// Compile returns s.Model where it is given, else the believed cell compiled
// for the spec's branches and the usual period. The error is cell.Compile's.
func (s *Setup) Compile() (*cell.Model, error) {
	if s.Model != nil {
		return s.Model, nil
	}
	if s.Cell == nil {
		return nil, fmt.Errorf("estimator: %s has neither a cell nor a model to believe in", s.Spec.Name)
	}
	o := cell.AsBuilt(s.PeriodS)
	o.Branches = s.Spec.Branches
	return cell.Compile(s.Cell, o)
}

// Check returns an error when what the estimator is told is not a number, the
// hysteresis lies outside [-1, 1] or the period is negative.
func (s *Setup) Check() error {
	switch {
	case !(math.Abs(s.SOCStart) < math.Inf(1)):
		return fmt.Errorf("estimator: told SOC is %g, allowed is a finite number", s.SOCStart)
	case !(math.Abs(s.HysteresisStart) <= 1):
		return fmt.Errorf("estimator: told hysteresis is %g, allowed is -1 to 1", s.HysteresisStart)
	case !(s.PeriodS >= 0 && s.PeriodS < math.Inf(1)):
		return fmt.Errorf("estimator: period is %g s, allowed is a finite number ≥ 0", s.PeriodS)
	}
	return nil
}

// Resetter is an Estimator that can begin another run in place, as new as
// from its constructor. Where the model is the same it allocates nothing. An
// estimator whose Reset failed is not to be used again.
type Resetter interface {
	Reset(Setup) error
}

// Inspectable is an Estimator that shows its mean and covariance, for tests
// and for tools that explain a run.
type Inspectable interface {
	// StateNames names the states in order, e.g. soc, branch_1_v.
	StateNames() []string
	// State writes the mean to dst, as long as StateNames.
	State(dst []float64)
	// Covariance writes the covariance to dst, row by row, n×n long.
	Covariance(dst []float64)
}

// LostError says where and why a filter could not go on.
type LostError struct {
	Sample int     // counted from the start of the run
	TimeS  float64 // s
	Cause  string  // e.g. "covariance not positive: variance of soc is -1.2e-9"
}

// Error implements error.
func (e *LostError) Error() string {
	return fmt.Sprintf("lost at sample %d (t = %g s): %s", e.Sample, e.TimeS, e.Cause)
}
