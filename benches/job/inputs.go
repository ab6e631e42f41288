package job

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"soctrial/benches/define"
	"soctrial/benches/roster"
	"soctrial/benches/scenario"
	"soctrial/benches/score"
	"soctrial/benches/store"
	"soctrial/estimator"
	"soctrial/noise"
	"soctrial/plant/cell"
	"soctrial/plant/duty"
)

// runInputs is all that a run reads.
type runInputs struct {
	name     string
	set      *scenario.Set
	setBytes []byte // the file
	specs    []estimator.Spec
	meta     store.ResultsMeta // of the results: all that can change a number
}

func loadRun(o *RunOptions) (*runInputs, error) {
	if o.Workers < 0 {
		return nil, wrongf("--workers: found %d, allowed is a whole number ≥ 0", o.Workers)
	}
	data, err := os.ReadFile(o.SetPath)
	if err != nil {
		return nil, wrong(err)
	}
	set, sum, err := loadSet(o.SetPath)
	if err != nil {
		return nil, err
	}
	if err := usePlan(set, o.PlanPath); err != nil {
		return nil, err
	}
	if err := set.Validate(); err != nil { // a plan's limits may name a group
		return nil, wrongf("%s: %w", o.PlanPath, err)
	}
	specs, texts, err := loadEstimators(o.EstimatorPaths)
	if err != nil {
		return nil, err
	}
	warnOfLimits(set.Limits, specs, &o.Report)
	if err := checkSet(set, &o.Report); err != nil {
		return nil, wrongf("%s: %w", o.SetPath, err)
	}
	if err := checkSpecs(set, specs, o.EstimatorPaths, &o.Report); err != nil {
		return nil, wrong(err)
	}
	if have := sha256.Sum256(data); hex.EncodeToString(have[:]) != sum {
		return nil, wrongf("%s changed while it was read", o.SetPath)
	}
	meta := store.ResultsMeta{SetSHA256: sum, Version: o.Version, EstimatorFiles: map[string]string{}, Settings: settingsOf(set)}
	addEstimators(&meta, specs, texts)
	return &runInputs{name: filepath.Base(o.SetPath), set: set, setBytes: data, specs: specs, meta: meta}, nil
}

// loadSet reads a set and the definitions in it.
func loadSet(path string) (*scenario.Set, string, error) {
	f, err := store.ReadSet(path)
	if err != nil {
		return nil, "", wrong(err)
	}
	set, err := parseSet(f)
	if err != nil {
		return nil, "", wrong(err)
	}
	return set, f.SHA256, nil
}

// parseSet makes a set of its file's rows and texts.
func parseSet(f *store.SetFile) (*scenario.Set, error) {
	s := &scenario.Set{Rows: f.Rows, Texts: f.Texts, Cells: map[string]*cell.Cell{}, Duties: map[string]*duty.Duty{},
		Sensors: map[string]*noise.Sensors{}, Score: scenario.DefaultScore()}
	for _, key := range slices.Sorted(maps.Keys(f.Texts)) {
		kind, name, _ := strings.Cut(key, ".")
		file, text := f.Path+" (soctrial."+key+")", []byte(f.Texts[key])
		switch kind {
		case "cell":
			c, err := define.Cell(file, text)
			if err != nil {
				return nil, err
			}
			c.Name = name // what rows call it rules
			s.Cells[name] = c
		case "duty":
			d, err := define.Duty(file, text, define.Openers{})
			if err != nil {
				return nil, err
			}
			d.Name = name
			s.Duties[name] = d
		case "sensors":
			x, err := define.Sensors(file, text)
			if err != nil {
				return nil, err
			}
			x.Name = name
			s.Sensors[name] = x
		case "plan":
			p, err := define.Plan(file, text)
			if err != nil {
				return nil, err
			}
			if err := scenario.CheckLimits(p.Limits, score.MetricNames()); err != nil {
				return nil, fmt.Errorf("%s: %w", file, err)
			}
			s.Score, s.Limits, s.Draw = p.Score, p.Limits, p.Draw
		}
	}
	if err := s.Validate(); err != nil {
		return nil, fmt.Errorf("%s: %w", f.Path, err)
	}
	return s, nil
}

// addEstimators puts the estimators' files into metadata, and the cell of one
// that has its own.
func addEstimators(meta *store.ResultsMeta, specs []estimator.Spec, texts []string) {
	for i := range specs {
		meta.EstimatorFiles[specs[i].Name] = texts[i]
		if c := specs[i].Cell; c != nil {
			meta.Settings["cell of "+specs[i].Name] = define.FormatCell(c)
		}
	}
}

// loadEstimators reads estimator files; names are to differ.
func loadEstimators(paths []string) ([]estimator.Spec, []string, error) {
	if len(paths) == 0 {
		return nil, nil, wrongf("no estimator was given, allowed is at least one -e FILE")
	}
	var specs []estimator.Spec
	var texts []string
	for i, path := range paths {
		s, text, err := define.ReadEstimator(path)
		if err != nil {
			return nil, nil, wrong(err)
		}
		if at := slices.IndexFunc(specs, func(x estimator.Spec) bool { return x.Name == s.Name }); at >= 0 {
			return nil, nil, wrongf("%s: name is %q, which %s has too; names of estimators in one run are to differ", paths[i], s.Name, paths[at])
		}
		specs, texts = append(specs, *s), append(texts, text)
	}
	return specs, texts, nil
}

// checkSpecs builds every estimator once on every cell it will meet, so that a
// mistake shows before the first scenario runs.
func checkSpecs(set *scenario.Set, specs []estimator.Spec, paths []string, report *Reporter) error {
	for i := range specs {
		cells := map[string]*cell.Cell{}
		for k := range set.Rows {
			cells[set.Rows[k].Cell] = set.Cells[set.Rows[k].Cell]
		}
		if specs[i].Cell != nil {
			cells = map[string]*cell.Cell{specs[i].Cell.Name: specs[i].Cell}
		}
		for _, name := range slices.Sorted(maps.Keys(cells)) {
			if err := checkSpec(&specs[i], cells[name], report); err != nil {
				return fmt.Errorf("%s with cell %s: %w", paths[i], name, err)
			}
		}
	}
	return nil
}

func checkSpec(s *estimator.Spec, c *cell.Cell, report *Reporter) error {
	if _, err := roster.New(estimator.Setup{Spec: *s, Cell: c, SOCStart: 1}); err != nil {
		return err
	}
	if s.Branches >= 0 && s.Branches < len(c.Branches) && s.Kind != "coulomb" {
		report.warn("estimator %s follows the %d slowest of cell %s's %d branches; the resistance of the others is added to R0",
			s.Name, s.Branches, c.Name, len(c.Branches))
	}
	return nil
}

// warnOfLimits tells which limits are on estimators that are not run; they
// come to "cannot tell".
func warnOfLimits(limits []scenario.Limit, specs []estimator.Spec, report *Reporter) {
	for i, l := range limits {
		if l.Estimator == "" || slices.ContainsFunc(specs, func(s estimator.Spec) bool { return s.Name == l.Estimator }) {
			continue
		}
		var names []string
		for _, s := range specs {
			names = append(names, s.Name)
		}
		report.warn("limit[%d].estimator is %q, which is not run (%q are): it cannot be told; --plan gives other limits", i, l.Estimator, names)
	}
}

// settingsOf is what rules a run beside its set and estimators, as text.
func settingsOf(set *scenario.Set) map[string]string {
	return map[string]string{
		"settle_after_s": number(set.Score.SettleAfterS), "converge_band": number(set.Score.ConvergeBand),
		"converge_hold_s": number(set.Score.ConvergeHoldS), "low_soc": number(set.Score.LowSOC), "limits": limitsText(set.Limits),
	}
}

func limitsText(limits []scenario.Limit) string {
	text := ""
	for _, l := range limits {
		text += fmt.Sprintf("[[limit]]\nmetric = %q\nat_most = %s\nshare = %s\n", l.Metric, number(l.AtMost), number(l.Share))
		if l.Group != "" {
			text += fmt.Sprintf("group = %q\n", l.Group)
		}
		if l.Estimator != "" {
			text += fmt.Sprintf("estimator = %q\n", l.Estimator)
		}
	}
	return text
}

func number(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

func fileHash(path string) (string, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return "", err
	}
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:]), nil
}
