package job

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"

	"soctrial/benches/define"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// DrawOptions is one call of draw.
type DrawOptions struct {
	PlanPath string
	OutPath  string
	Force    bool // replace a file that exists
	Report   Reporter
}

// Draw resolves a plan into a scenario set and writes it. Files the plan names
// lie beside it; they are checked against each other first.
func Draw(o DrawOptions) (*scenario.Set, error) {
	if err := mayWrite(o.OutPath, o.Force); err != nil {
		return nil, err
	}
	p, text, err := define.ReadPlan(o.PlanPath)
	if err != nil {
		return nil, wrong(err)
	}
	if err := scenario.CheckLimits(p.Limits, score.MetricNames()); err != nil {
		return nil, wrong(define.At(o.PlanPath, []byte(text), err))
	}
	defs, err := loadDefinitions(p, text, filepath.Dir(o.PlanPath))
	if err != nil {
		return nil, wrong(err)
	}
	set, err := scenario.Draw(p, *defs)
	if err != nil {
		return nil, wrong(define.At(o.PlanPath, []byte(text), err))
	}
	if err := checkSet(set, &o.Report); err != nil {
		return nil, wrongf("%s: %w", o.PlanPath, err)
	}
	return set, wrong(store.WriteSet(o.OutPath, set))
}

// mayWrite refuses a file that exists, unless it is to be replaced.
func mayWrite(path string, force bool) error {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil
	case err != nil:
		return wrong(err)
	case info.IsDir():
		return wrongf("output %s is a folder, allowed is a file", path)
	case force:
		return nil
	}
	return wrongf("output %s exists; give another name, or --force to replace it", path)
}

// loadDefinitions reads the files a plan names, beside it.
func loadDefinitions(p *scenario.Plan, text, dir string) (*scenario.Definitions, error) {
	d := &scenario.Definitions{Cells: map[string]*cell.Cell{}, Duties: map[string]*duty.Duty{}, Sensors: map[string]*noise.Sensors{},
		Texts: map[string]string{"plan": text}}
	from := map[string]string{} // kind and name → file
	take := func(kind, name, path, text string) error {
		key := kind + "." + name
		if other, twice := from[key]; twice {
			return fmt.Errorf("%s: name is %q, which %s has too; names of %s definitions in a set are to differ", path, name, other, kind)
		}
		from[key], d.Texts[key] = path, text
		return nil
	}
	for _, file := range p.Cells {
		path := beside(dir, file)
		c, text, err := define.ReadCell(path)
		if err == nil {
			err = take("cell", c.Name, path, text)
		}
		if err != nil {
			return nil, err
		}
		d.Cells[c.Name], d.CellNames = c, append(d.CellNames, c.Name)
	}
	for _, file := range p.Duties {
		path := beside(dir, file)
		x, text, err := define.ReadDuty(path, readTrace)
		if err == nil {
			err = take("duty", x.Name, path, text)
		}
		if err != nil {
			return nil, err
		}
		d.Duties[x.Name], d.DutyNames = x, append(d.DutyNames, x.Name)
	}
	for _, file := range p.Sensors {
		path := beside(dir, file)
		s, text, err := define.ReadSensors(path)
		if err == nil {
			err = take("sensors", s.Name, path, text)
		}
		if err != nil {
			return nil, err
		}
		d.Sensors[s.Name], d.SensorsNames = s, append(d.SensorsNames, s.Name)
	}
	return d, nil
}

// beside is where a file lies that another in dir names.
func beside(dir, file string) string {
	if filepath.IsAbs(file) {
		return file
	}
	return filepath.Join(dir, file)
}
