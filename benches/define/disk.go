package define

import (
	"fmt"
	"os"
	"path/filepath"

	"soctrial/benches/scenario"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// Beside returns openers that look for files beside path. trace reads a leg's
// trace; nil: legs must carry their columns inline.
func Beside(path string, trace func(path string, m *record.Map, kind duty.Kind) (*Trace, error)) Openers {
	at := func(file string) string {
		if filepath.IsAbs(file) {
			return file
		}
		return filepath.Join(filepath.Dir(path), file)
	}
	o := Openers{
		Cell: func(file string) ([]byte, error) { return read(at(file)) },
		Map:  func(file string) ([]byte, error) { return read(at(file)) },
	}
	if trace != nil {
		o.Trace = func(file string, m *record.Map, kind duty.Kind) (*Trace, error) { return trace(at(file), m, kind) }
	}
	return o
}

func read(path string) ([]byte, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, err
	}
	if info.IsDir() {
		return nil, fmt.Errorf("%s is a folder, not a file", path)
	}
	if info.Size() > maxBytes {
		return nil, fmt.Errorf("%s has %d bytes, allowed are at most %d", path, info.Size(), maxBytes)
	}
	return os.ReadFile(path)
}

// ReadCell reads a cell file; text is what it holds.
func ReadCell(path string) (c *cell.Cell, text string, err error) {
	b, err := read(path)
	if err != nil {
		return nil, "", err
	}
	c, err = Cell(path, b)
	return c, string(b), err
}

// ReadDuty reads a duty file. Traces that its legs name are read by trace,
// from beside it. text is the duty as TOML with every trace inline, so that it
// stands alone.
func ReadDuty(path string, trace func(path string, m *record.Map, kind duty.Kind) (*Trace, error)) (d *duty.Duty, text string, err error) {
	b, err := read(path)
	if err != nil {
		return nil, "", err
	}
	d, err = Duty(path, b, Beside(path, trace))
	if err != nil {
		return nil, "", err
	}
	if namesFile(d.Legs) {
		return d, FormatDuty(d), nil
	}
	return d, string(b), nil
}

func namesFile(legs []duty.Leg) bool {
	for i := range legs {
		if legs[i].File != "" || namesFile(legs[i].Legs) {
			return true
		}
	}
	return false
}

// ReadSensors reads a sensors file.
func ReadSensors(path string) (s *noise.Sensors, text string, err error) {
	b, err := read(path)
	if err != nil {
		return nil, "", err
	}
	s, err = Sensors(path, b)
	return s, string(b), err
}

// ReadEstimator reads an estimator file, and its cell from beside it.
func ReadEstimator(path string) (s *estimator.Spec, text string, err error) {
	b, err := read(path)
	if err != nil {
		return nil, "", err
	}
	s, err = Estimator(path, b, Beside(path, nil))
	return s, string(b), err
}

// ReadPlan reads a plan file.
func ReadPlan(path string) (p *scenario.Plan, text string, err error) {
	b, err := read(path)
	if err != nil {
		return nil, "", err
	}
	p, err = Plan(path, b)
	return p, string(b), err
}

// ReadMap reads a map file.
func ReadMap(path string) (*record.Map, error) {
	b, err := read(path)
	if err != nil {
		return nil, err
	}
	return Map(path, b)
}
