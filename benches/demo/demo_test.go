package demo

import (
	"encoding/csv"
	"math"
	"os"
	"slices"
	"strconv"
	"testing"

	"soctrial/benches/define"
	"soctrial/plant/cell"
	"soctrial/testdata"
)

func filesByName(t *testing.T) map[string]string {
	t.Helper()
	files, err := Files()
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]string{}
	for _, f := range files {
		out[f.Name] = f.Text
	}
	return out
}

// TestDefinitionsRead reads every file as its kind, and finds every file that
// a plan or a step names; none lies about unused.
func TestDefinitionsRead(t *testing.T) {
	files := filesByName(t)
	used := map[string]bool{}
	use := func(names ...string) {
		for _, n := range names {
			if used[n] = true; files[n] == "" {
				t.Errorf("%s is named but not there", n)
			}
		}
	}
	for name, text := range files {
		kind, err := define.Kind(name, []byte(text))
		if err != nil {
			t.Fatal(err)
		}
		switch kind {
		case define.KindCell:
			_, err = define.Cell(name, []byte(text))
		case define.KindDuty:
			_, err = define.Duty(name, []byte(text), define.Openers{})
		case define.KindSensors:
			_, err = define.Sensors(name, []byte(text))
		case define.KindEstimator:
			_, err = define.Estimator(name, []byte(text), define.Openers{})
		case define.KindPlan:
			plan, planErr := define.Plan(name, []byte(text))
			if err = planErr; err == nil {
				use(slices.Concat(plan.Cells, plan.Duties, plan.Sensors)...)
			}
		}
		if err != nil {
			t.Error(err)
		}
	}
	for _, s := range Steps() {
		use(s.Plan)
		use(s.Estimators...)
		use(s.Pictured...)
	}
	for name := range files {
		if !used[name] {
			t.Errorf("%s is used by no plan and no step", name)
		}
	}
}

func readCell(t *testing.T, name string) *cell.Cell {
	t.Helper()
	c, err := define.Cell(name, []byte(filesByName(t)[name]))
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// TestPublishedCellIsItsFormulas computes each table from the coefficients of
// Chen & Rincón-Mora, IEEE Trans. Energy Conversion 21(2), 2006: a·exp(b·s) +
// c0 + c1·s + c2·s² + c3·s³. The files hold at least six digits.
func TestPublishedCellIsItsFormulas(t *testing.T) {
	f, err := os.Open(testdata.Reference(t, "chen_rincon_mora_2006_coefficients.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	formulas := map[string]func(s float64) float64{}
	for _, r := range rows[1:] {
		var k [6]float64
		for i := range k {
			if r[2+i] != "" {
				if k[i], err = strconv.ParseFloat(r[2+i], 64); err != nil {
					t.Fatal(err)
				}
			}
		}
		formulas[r[0]] = func(s float64) float64 { return k[0]*math.Exp(k[1]*s) + k[2] + s*(k[3]+s*(k[4]+s*k[5])) }
	}
	c := readCell(t, "published-850.toml")
	for name, table := range map[string]*cell.Table{
		"voc_V": &c.OCV, "r_series_ohm": &c.R0, "r_transient_s_ohm": &c.Branches[0].Ohm, "c_transient_s_F": c.Branches[0].Farad,
		"r_transient_l_ohm": &c.Branches[1].Ohm, "c_transient_l_F": c.Branches[1].Farad,
	} {
		if table.SOC[0] != 0.02 {
			t.Errorf("%s begins at SOC %g, want 0.02: below, fitted capacitances turn negative", name, table.SOC[0])
		}
		for i, s := range table.SOC {
			if want := formulas[name](s); math.Abs(table.Values[0][i]-want) > 2e-6*math.Abs(want) {
				t.Errorf("%s at SOC %g is %g, want %g", name, s, table.Values[0][i], want)
			}
		}
	}
}

// TestCellsAreWhatTheyAreSaidToBe: one steep, one flat with hysteresis, and
// every resistance higher in the cold (common practice, no source).
func TestCellsAreWhatTheyAreSaidToBe(t *testing.T) {
	steep, flat := readCell(t, "quay-sweeper-21.toml"), readCell(t, "quay-sweeper-flat-50.toml")
	between := func(c *cell.Cell, lo, hi float64) float64 {
		var v []float64
		for i, z := range c.OCV.SOC {
			if z >= lo && z <= hi {
				v = append(v, c.OCV.Values[0][i])
			}
		}
		return v[len(v)-1] - v[0]
	}
	if s, f := between(steep, 0.2, 0.9), between(flat, 0.2, 0.9); s < 0.4 || f > 0.12 {
		t.Errorf("from SOC 0.2 to 0.9 the steep cell rises %g V and the flat one %g V", s, f)
	}
	if flat.Hysteresis == nil || flat.CapacityAh != 50 || steep.CapacityAh != 4.8 || len(steep.OCV.SOC) < 21 || len(flat.OCV.SOC) < 21 {
		t.Error("capacity, hysteresis or the number of SOC points is not as told")
	}
	for _, c := range []*cell.Cell{steep, flat} {
		for _, table := range []cell.Table{c.R0, c.Branches[0].Ohm, c.Branches[1].Ohm} {
			for r := 1; r < len(table.Values); r++ {
				for i := range table.Values[r] {
					if table.Values[r][i] >= table.Values[r-1][i] {
						t.Errorf("%s: %g Ω at %g °C is not below %g Ω at %g °C", c.Name, table.Values[r][i], table.TemperatureC[r], table.Values[r-1][i], table.TemperatureC[r-1])
					}
				}
			}
		}
	}
}
