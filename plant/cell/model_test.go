package cell_test

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/interp"
	"pgregory.net/rapid"

	"soctrial/plant/cell"
	"soctrial/testdata"
)

// steep is a cell with every kind of table, all on different axes.
func steep() *cell.Cell {
	return &cell.Cell{
		Name: "steep", CapacityAh: 4.8, CoulombicEfficiency: 0.99, VoltageMinV: 2.5, VoltageMaxV: 4.2, TemperatureRefC: 25,
		OCV:           cell.OverSOC([]float64{0, 0.04, 0.1, 0.33, 0.5, 0.8, 1}, []float64{2.9, 3.2, 3.42, 3.6, 3.71, 3.95, 4.18}),
		OCVSlopeVPerK: &cell.Table{SOC: []float64{0, 0.5, 1}, Values: [][]float64{{-2e-4, 1e-4, 3e-4}}},
		R0: cell.Table{SOC: []float64{0.1, 0.6, 0.9}, TemperatureC: []float64{0, 25, 45},
			Values: [][]float64{{0.06, 0.05, 0.052}, {0.03, 0.024, 0.026}, {0.02, 0.018, 0.019}}},
		Branches: []cell.Branch{
			{Ohm: cell.OverSOC([]float64{0.05, 0.5, 1}, []float64{0.02, 0.011, 0.012}), TauS: tab(cell.Constant(18))},
			{Ohm: cell.Constant(0.016), TauS: &cell.Table{TemperatureC: []float64{0, 40}, Values: [][]float64{{900}, {500}}}},
			{Ohm: cell.OverSOC([]float64{0, 1}, []float64{0.004, 0.003}), Farad: tab(cell.Table{SOC: []float64{0, 1}, Values: [][]float64{{4e4, 5e4}}, Interpolation: cell.Linear})},
		},
		Hysteresis: &cell.Hysteresis{HalfGapV: cell.OverSOC([]float64{0.1, 0.5, 0.9}, []float64{0.01, 0.02, 0.008}), Rate: 30},
	}
}

func tab(t cell.Table) *cell.Table { return &t }

func view(t testing.TB, c *cell.Cell, o cell.Options, tempC float64) (*cell.View, *cell.Model) {
	t.Helper()
	m, err := cell.Compile(c, o)
	if err != nil {
		t.Fatal(err)
	}
	v := new(cell.View)
	v.Bind(m, tempC)
	return v, m
}

// A table read by hand: one PCHIP a row from gonum (which equals the published
// method, see its own documentation), linear in temperature, held at the edges.
func byHand(tab *cell.Table, soc, tempC float64, edges bool) float64 {
	row := func(r int) float64 {
		y := tab.Values[r]
		if len(tab.SOC) == 0 {
			return y[0]
		}
		x, n := tab.SOC, len(tab.SOC)
		var value func(float64) float64
		var slope func(float64) float64
		if tab.Interpolation == cell.Linear {
			var pl interp.PiecewiseLinear
			_ = pl.Fit(x, y)
			value = pl.Predict
			slope = func(at float64) float64 {
				if at == x[0] {
					return (y[1] - y[0]) / (x[1] - x[0])
				}
				return (y[n-1] - y[n-2]) / (x[n-1] - x[n-2])
			}
		} else {
			var fb interp.FritschButland
			_ = fb.Fit(x, y)
			value, slope = fb.Predict, fb.PredictDerivative
		}
		in := min(max(soc, x[0]), x[n-1])
		out := value(in)
		if edges && in != soc {
			out += slope(in) * (soc - in)
		}
		return out
	}
	if len(tab.TemperatureC) < 2 {
		return row(0)
	}
	temps := tab.TemperatureC
	k := 0
	for k < len(temps)-2 && tempC >= temps[k+1] {
		k++
	}
	w := (tempC - temps[k]) / (temps[k+1] - temps[k])
	if !edges {
		w = min(max(w, 0), 1)
	}
	return row(k)*(1-w) + row(k+1)*w
}

func TestTablesAgreeWithALibrary(t *testing.T) {
	c := steep()
	v, m := view(t, c, cell.AsBuilt(1), 25)
	rapid.Check(t, func(t *rapid.T) {
		soc := rapid.Float64Range(-0.3, 1.3).Draw(t, "soc")
		temp := rapid.Float64Range(-30, 70).Draw(t, "temperature")
		v.SetTemperature(temp)
		g := v.Segment(soc)
		x := soc - g.Ref
		want := byHand(&c.OCV, soc, temp, true) + byHand(c.OCVSlopeVPerK, soc, temp, false)*(temp-25)
		near(t, "OCV", g.OCV.At(x), want, 1e-12)
		near(t, "R0", g.R0.At(x), byHand(&c.R0, soc, temp, false), 1e-14)
		for j := range c.Branches {
			near(t, "R", g.R[j].At(x), byHand(&c.Branches[j].Ohm, soc, temp, false), 1e-14)
		}
		near(t, "tau 1", m.Tau(0, g, x), 18, 0)
		near(t, "tau 2", m.Tau(1, g, x), byHand(c.Branches[1].TauS, soc, temp, false), 1e-10)
		near(t, "tau 3", m.Tau(2, g, x), byHand(c.Branches[2].Farad, soc, temp, false)*byHand(&c.Branches[2].Ohm, soc, temp, false), 1e-9)
		near(t, "gap", g.HalfGapV.At(x), byHand(&c.Hysteresis.HalfGapV, soc, temp, false), 1e-14)
		near(t, "dOCV/dT", v.OCVSlopeVPerK(soc), byHand(c.OCVSlopeVPerK, soc, temp, false), 1e-12)
	})
}

// Collapsing the temperature axis must change no number.
func TestIsothermalModelIsTheSameCell(t *testing.T) {
	c := steep()
	rapid.Check(t, func(t *rapid.T) {
		temp := rapid.Float64Range(-30, 70).Draw(t, "temperature")
		soc := rapid.Float64Range(-0.2, 1.2).Draw(t, "soc")
		o := cell.AsBuilt(1)
		o.Isothermal, o.TemperatureC = true, temp
		m, err := cell.Compile(c, o)
		if err != nil {
			t.Fatal(err)
		}
		n, err := cell.Compile(c, cell.AsBuilt(1))
		if err != nil {
			t.Fatal(err)
		}
		var a, b cell.View
		a.Bind(m, temp)
		b.Bind(n, temp)
		s := cell.State{SOC: soc, BranchV: [5]float64{0.01, 0.02, 0.003}, Hysteresis: -0.4}
		near(t, "voltage", a.Voltage(&s, 3), b.Voltage(&s, 3), 1e-12)
		p, q := s, s
		a.Advance(&p, 3, 2.5, 4)
		b.Advance(&q, 3, 2.5, 4)
		near(t, "soc", p.SOC, q.SOC, 1e-15)
		near(t, "h", p.Hysteresis, q.Hysteresis, 1e-15)
		for j := range p.BranchV {
			near(t, "v", p.BranchV[j], q.BranchV[j], 1e-13)
		}
	})
}

// Slopes against central differences, and inside the table as well as outside:
// where a value is held its slope is 0, where the OCV goes on so does its slope.
func TestSlopesAreThoseOfTheValues(t *testing.T) {
	v, _ := view(t, steep(), cell.AsBuilt(1), 12)
	rapid.Check(t, func(t *rapid.T) {
		soc := rapid.Float64Range(-0.2, 1.2).Draw(t, "soc")
		const d = 1e-6
		g := *v.Segment(soc)
		if soc-d < g.Lo || soc+d >= g.Hi {
			return // a knot lies within the difference
		}
		x := soc - g.Ref
		for name, q := range map[string]*cell.Cubic{"OCV": &g.OCV, "R0": &g.R0, "R": &g.R[0], "gap": &g.HalfGapV} {
			near(t, name, q.Slope(x), (q.At(x+d)-q.At(x-d))/(2*d), 1e-7)
		}
	})
	for _, soc := range []float64{-0.1, 1.1} {
		g := v.Segment(soc)
		x := soc - g.Ref
		if g.R0.Slope(x) != 0 || g.R[0].Slope(x) != 0 || g.OCV.Slope(x) == 0 {
			t.Errorf("at SOC %g: slopes of R0 %g, R1 %g (want 0), OCV %g (want its edge slope)", soc, g.R0.Slope(x), g.R[0].Slope(x), g.OCV.Slope(x))
		}
	}
}

func TestAtKnots(t *testing.T) {
	c := steep()
	c.OCVSlopeVPerK = nil
	c.R0 = cell.Table{SOC: []float64{0, 0.5, 1}, Values: [][]float64{{0.03, 0.02, 0.04}}, Interpolation: cell.Linear}
	v, _ := view(t, c, cell.AsBuilt(1), 25)
	slope := func(soc float64) float64 { g := v.Segment(soc); return g.R0.Slope(soc - g.Ref) }
	near(t, "linear slope at a knot is that above", slope(0.5), 0.04, 1e-15)
	near(t, "linear slope at the last knot is flat", slope(1), 0, 0)
	near(t, "linear slope at the first knot", slope(0), -0.02, 1e-15)
	var fb interp.FritschButland
	_ = fb.Fit(c.OCV.SOC, c.OCV.Values[0])
	for _, soc := range c.OCV.SOC {
		u, du := v.OCV(soc)
		near(t, "OCV at a knot", u, fb.Predict(soc), 1e-15)
		near(t, "OCV slope at a knot", du, fb.PredictDerivative(soc), 1e-12)
	}
	pchip := steep()
	w, _ := view(t, pchip, cell.AsBuilt(1), 25)
	_ = fb.Fit(pchip.Branches[0].Ohm.SOC, pchip.Branches[0].Ohm.Values[0])
	g := w.Segment(1)
	near(t, "a PCHIP table still has its slope at its last point", g.R[0].Slope(1-g.Ref), fb.PredictDerivative(1), 1e-15)
	if s := fb.PredictDerivative(1); s == 0 {
		t.Error("the check above cannot fail: the end slope is 0")
	}
}

// The published cell, from the formulas of Chen & Rincón-Mora (2006), IEEE
// Trans. Energy Conversion 21(2); values computed to 40 digits (testdata).
func TestPublishedCellFromItsFormulas(t *testing.T) {
	rows := readCSV(t, testdata.Reference(t, "chen_rincon_mora_2006_values.csv"))
	coef := readCSV(t, testdata.Reference(t, "chen_rincon_mora_2006_coefficients.csv"))
	f := func(row int, s float64) float64 {
		v := func(k int) float64 {
			if coef[row][k] == "" {
				return 0
			}
			return num(t, coef[row][k])
		}
		return v(2)*math.Exp(v(3)*s) + v(4) + v(5)*s + v(6)*s*s + v(7)*s*s*s
	}
	var soc, ocv, r0, r1, c1, r2, c2 []float64
	for k := 0; k <= 196; k++ { // fitted capacitances are negative below SOC 0.0112
		s := 0.02 + 0.005*float64(k)
		soc = append(soc, s)
		ocv, r0 = append(ocv, f(0, s)), append(r0, f(1, s))
		r1, c1 = append(r1, f(2, s)), append(c1, f(3, s))
		r2, c2 = append(r2, f(4, s)), append(c2, f(5, s))
	}
	c := &cell.Cell{Name: "published", CapacityAh: 0.85, CoulombicEfficiency: 1, VoltageMinV: 3, VoltageMaxV: 4.11, TemperatureRefC: 25,
		OCV: cell.OverSOC(soc, ocv), R0: cell.OverSOC(soc, r0), Branches: []cell.Branch{
			{Ohm: cell.OverSOC(soc, r1), Farad: tab(cell.OverSOC(soc, c1))}, {Ohm: cell.OverSOC(soc, r2), Farad: tab(cell.OverSOC(soc, c2))}}}
	v, m := view(t, c, cell.AsBuilt(1), 25)
	checked := 0
	for _, r := range rows {
		s := num(t, r[0])
		if s < 0.02 {
			continue
		}
		g := v.Segment(s)
		x := s - g.Ref
		near(t, "OCV", g.OCV.At(x), num(t, r[1]), 1e-9)
		near(t, "Rs", g.R0.At(x), num(t, r[2]), 1e-9)
		near(t, "Rts", g.R[0].At(x), num(t, r[3]), 1e-9)
		near(t, "Rtl", g.R[1].At(x), num(t, r[5]), 1e-9)
		near(t, "tau s", m.Tau(0, g, x), num(t, r[8]), 1e-6)
		near(t, "tau l", m.Tau(1, g, x), num(t, r[9]), 1e-6)
		checked++
	}
	if checked < 20 {
		t.Fatalf("only %d rows checked", checked)
	}
}

// exp(-dt/tau) and R(1-exp(-dt/tau)) to 40 digits (testdata).
func TestExactDiscretisation(t *testing.T) {
	rows := readCSV(t, testdata.Reference(t, "rc_exact_discretisation.csv"))
	for _, r := range rows {
		dt, tau, r1 := num(t, r[0]), num(t, r[1]), num(t, r[2])
		a, rise := cell.Decay(dt, tau)
		relative(t, "decay", a, num(t, r[3]), 1e-13)
		relative(t, "gain", r1*rise, num(t, r[4]), 1e-13)
	}
	if len(rows) < 5 {
		t.Fatalf("only %d rows", len(rows))
	}
}

func readCSV(t testing.TB, path string) [][]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.FieldsPerRecord = -1
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows[1:]
}

func num(t testing.TB, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

type failer interface{ Errorf(string, ...any) }

func near(t failer, what string, got, want, tol float64) {
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: %.17g, want %.17g within %g", what, got, want, tol)
	}
}

func relative(t failer, what string, got, want, tol float64) {
	near(t, what, got, want, tol*math.Abs(want))
}
