package picture

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func example() Figure {
	n := 3600
	t, z, i := make([]float64, n), make([]float64, n), make([]float64, n)
	a := Estimate{Name: "ekf", SOC: make([]float64, n), SOCStd: make([]float64, n), ResidualV: make([]float64, n)}
	b := Estimate{Name: "counting", SOC: make([]float64, n)}
	for k := range n {
		t[k] = float64(k)
		z[k] = 0.95 - 0.7*float64(k)/float64(n)
		i[k] = 4 + 6*math.Sin(float64(k)/17)*math.Sin(float64(k)/200)
		a.SOC[k] = z[k] - 0.1*math.Exp(-float64(k)/200) + 0.004*math.Sin(float64(k)/90)
		a.SOCStd[k] = 0.01 + 0.05*math.Exp(-float64(k)/300)
		a.ResidualV[k] = 0.004 * math.Sin(float64(k*k%911))
		b.SOC[k] = z[k] - 0.1
	}
	for k := 1000; k < 1100; k++ {
		a.ResidualV[k] = math.NaN()
	}
	return Track(TrackColumns{Title: "Quay sweeper pack, aged, 10 °C", TimeS: t, SOCTrue: z, CurrentA: i, Estimates: []Estimate{a, b}, Note: "Simulated."})
}

func TestFilesAreWhatTheySay(t *testing.T) {
	f := example()
	b, err := Draw(f, PNG)
	if err != nil {
		t.Fatal(err)
	}
	im, err := png.Decode(bytes.NewReader(b))
	if err != nil || im.Bounds().Dx() != widthPx || im.Bounds().Dy() != heightPx {
		t.Fatalf("%v, %v", err, im.Bounds())
	}
	s, err := Draw(f, SVG)
	if err != nil {
		t.Fatal(err)
	}
	for d := xml.NewDecoder(bytes.NewReader(s)); ; {
		_, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	for _, want := range []string{"SOC / %", "Current / A", "Residual / mV", "Time / min", "true SOC", "sans-serif"} {
		if !bytes.Contains(s, []byte(want)) {
			t.Errorf("the SVG lacks %q", want)
		}
	}
	if bytes.Contains(s, []byte(">-0<")) {
		t.Error("the SVG has a label -0")
	}
	for _, format := range []Format{PNG, SVG} {
		one, _ := Draw(f, format)
		two, _ := Draw(f, format)
		if !bytes.Equal(one, two) {
			t.Errorf("%s differs from draw to draw", format)
		}
	}
	if _, err := Draw(f, "gif"); err == nil || !strings.Contains(err.Error(), "allowed") {
		t.Errorf("gif: %v", err)
	}
	if _, err := Draw(Figure{Title: "nothing"}, PNG); err == nil {
		t.Error("a figure without panels was drawn")
	}
}

// Whatever the columns hold, a picture comes out.
func TestOddColumns(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for name, s := range map[string]Series{
		"empty":    {},
		"one":      {X: []float64{1}, Y: []float64{2}},
		"all NaN":  {X: []float64{1, 2}, Y: []float64{nan, nan}},
		"constant": {X: []float64{1, 2, 3}, Y: []float64{5, 5, 5}},
		"zero":     {X: []float64{0, 1}, Y: []float64{0, 0}},
		"huge":     {X: []float64{0, 1}, Y: []float64{-1e299, 1e299}},
		"tiny":     {X: []float64{0, 1e-12}, Y: []float64{1e-300, 2e-300}},
		"infinite": {X: []float64{0, 1, 2}, Y: []float64{1, inf, -inf}},
		"negative": {X: []float64{-1, 1}, Y: []float64{-3, 4}},
		"uneven":   {X: []float64{1, 2, 3}, Y: []float64{4}},
		"band":     {X: []float64{1, 2}, Y: []float64{4, 5}, Low: []float64{nan, 1}, High: []float64{9}},
	} {
		for _, log := range []bool{false, true} {
			f := Figure{Title: name, XLabel: "x / 1", LogX: log, Panels: []Panel{{YLabel: "y / 1", LogY: log, Series: []Series{s}, Levels: []Level{{Value: 3}}}}}
			if name == "band" {
				s.High = s.High[:1]
			}
			for _, format := range []Format{PNG, SVG} {
				if _, err := Draw(f, format); err != nil {
					t.Errorf("%s: %v", name, err)
				}
			}
		}
	}
}

func TestThinKeepsTheEnvelope(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		y := rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), 1, 3000).Draw(t, "y")
		x := make([]float64, len(y))
		for k := range x {
			x[k] = float64(k)
		}
		columns := rapid.IntRange(1, 200).Draw(t, "columns")
		tx, ty := Thin(x, y, columns)
		if len(tx) > max(4*columns, 0) && len(y) > 4*columns {
			t.Fatalf("%d points in %d columns", len(tx), columns)
		}
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, v := range y {
			lo, hi = min(lo, v), max(hi, v)
		}
		tlo, thi := math.Inf(1), math.Inf(-1)
		for k, v := range ty {
			tlo, thi = min(tlo, v), max(thi, v)
			if y[int(tx[k])] != v || k > 0 && tx[k] <= tx[k-1] {
				t.Fatalf("point %d is not one of the line's, or out of order", k)
			}
		}
		if lo != tlo || hi != thi || tx[0] != 0 || tx[len(tx)-1] != x[len(x)-1] {
			t.Fatalf("extremes %g..%g became %g..%g", lo, hi, tlo, thi)
		}
	})
}

func TestTicks(t *testing.T) {
	for _, c := range []struct {
		lo, hi float64
		want   string
	}{{0, 1, "0 0.2 0.4 0.6 0.8 1.0"}, {-3, 3, "-2 0 2"}, {0.9995, 1.0005, "0.9996 0.9998 1.0000 1.0002 1.0004"}, {-1e-9, 1e-9, "-1e-09 -5e-10 0 5e-10 1e-09"}} {
		var got []string
		for _, k := range (ticks{about: 5}).Ticks(c.lo, c.hi) {
			got = append(got, k.Label)
		}
		if strings.Join(got, " ") != c.want {
			t.Errorf("%g to %g: %v, want %s", c.lo, c.hi, got, c.want)
		}
	}
}
