package picture

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// drawer draws one picture.
type drawer func(w io.Writer, format Format) error

// samples are pictures of figures made up here, the way they are meant to be
// used. `go test -artifacts -outputdir DIR` keeps them to be looked at.
func samples() map[string]drawer {
	n := 5400
	time, truth, current := make([]float64, n), make([]float64, n), make([]float64, n)
	first := Estimate{Name: "ekf", SOC: make([]float64, n), SOCStd: make([]float64, n), InnovationV: make([]float64, n), InnovationStdV: make([]float64, n)}
	second := Estimate{Name: "coulomb", SOC: make([]float64, n)}
	r := rand.New(rand.NewPCG(1, 2))
	for i := range n {
		time[i] = float64(i)
		current[i] = 3 + 2*math.Sin(float64(i)/200) + 2*float64(i/300%2)
		if i > 0 {
			truth[i] = truth[i-1] - current[i-1]/3600/5
		} else {
			truth[i] = 0.95
		}
		first.SOCStd[i] = 0.01 + 0.09*math.Exp(-float64(i)/300)
		first.SOC[i] = truth[i] + 0.1*math.Exp(-float64(i)/300) + 0.004*math.Sin(float64(i)/500)
		first.InnovationV[i], first.InnovationStdV[i] = 0.004*r.NormFloat64(), 0.004
		second.SOC[i] = truth[i] + 0.1 + 1e-5*float64(i)
	}
	ramp := func(at, to float64) []float64 {
		out := make([]float64, 91)
		for i := range out {
			out[i] = at + (to-at)*(1-math.Exp(-float64(i)/20))
		}
		return out
	}
	minutes := scaled(ramp(0, 0), 0)
	for i := range minutes {
		minutes[i] = 60 * float64(i)
	}
	var few, many []float64
	for range 300 {
		few = append(few, 100*math.Abs(0.015*r.NormFloat64()))
		many = append(many, 100*math.Abs(0.08*r.NormFloat64()))
	}
	many[7] = math.Inf(1)
	soc := []float64{0, 0.05, 0.1, 0.2, 0.4, 0.6, 0.8, 0.9, 1}
	ocv := []float64{2.5, 3.0, 3.2, 3.25, 3.29, 3.3, 3.33, 3.34, 3.45}
	gap := []float64{0.02, 0.02, 0.02, 0.02, 0.02, 0.02, 0.02, 0.02, 0.02}
	at := func(t, k float64) CellRow {
		v := make([]float64, len(soc))
		for i, z := range soc {
			v[i] = k * (1 + math.Exp(-8*z))
		}
		return CellRow{t, soc, v}
	}
	resistance := func(k float64) []CellRow {
		return []CellRow{at(-10, 3*k), at(10, 1.6*k), at(25, k), at(45, 0.7*k)}
	}
	return map[string]drawer{
		"track": func(w io.Writer, f Format) error {
			return Track(w, f, TrackColumns{Title: "Scenario 12: quay-21 on rounds", Note: "told 10 % too much at the start", TimeS: time, SOCTrue: truth,
				CurrentA: current, Estimates: []Estimate{first, second}})
		},
		"errors": func(w io.Writer, f Format) error {
			e := func(name string, k float64) ErrorPercentiles {
				return ErrorPercentiles{name, minutes, ramp(0.05, k), ramp(0.15, 2*k), ramp(0.18, 3*k), ramp(0.25, 6*k)}
			}
			return ErrorsOverTime(w, f, ErrorColumns{Title: "Errors over time", Note: "300 scenarios", Estimators: []ErrorPercentiles{e("ekf", 0.004), e("coulomb", 0.05), e("rest-ocv", 0.03)}, Limit: 0.05})
		},
		"worst": func(w io.Writer, f Format) error {
			return WorstErrors(w, f, DistributionColumns{Title: "Worst errors", Quantity: "Largest |SOC error| after settling", Unit: "%",
				Estimators: []Scenarios{{"ekf", few}, {"coulomb", many}}, AtMost: 5, Share: 0.95})
		},
		"cell": func(w io.Writer, f Format) error {
			return Cell(w, f, CellColumns{Title: "quay-50", OCV: []CellRow{{math.NaN(), soc, ocv}}, HalfGapV: gap, R0: resistance(0.001),
				Branches: []BranchColumns{{resistance(0.0006), []CellRow{{math.NaN(), nil, []float64{15}}}}, {resistance(0.0008), resistance(500)}}})
		},
		"duty": func(w io.Writer, f Format) error {
			return Duty(w, f, DutyColumns{Title: "Rounds", TimeS: []float64{0, 600, 900, 2400, 3600}, CurrentA: []float64{3, 8, -2, 0, 5}, PowerW: []float64{10, 20, -4, 0, 20}, EndS: 4000})
		},
		"record": func(w io.Writer, f Format) error {
			return Record(w, f, RecordColumns{Title: "US06", TimeS: time, VoltageV: scaled(truth, 4), CurrentA: current, TemperatureC: scaled(truth, 20), SOC: truth})
		},
	}
}

func TestPicturesAreWhole(t *testing.T) {
	for name, draw := range samples() {
		for _, format := range []Format{PNG, SVG} {
			var b bytes.Buffer
			if err := draw(&b, format); err != nil {
				t.Fatalf("%s.%s: %v", name, format, err)
			}
			whole(t, name, format, b.Bytes())
			if err := os.WriteFile(filepath.Join(t.ArtifactDir(), name+"."+string(format)), b.Bytes(), 0o644); err != nil {
				t.Fatal(err)
			}
			var again bytes.Buffer
			if err := draw(&again, format); err != nil || !bytes.Equal(b.Bytes(), again.Bytes()) {
				t.Errorf("%s.%s: drawn twice gives other bytes (%v)", name, format, err)
			}
		}
	}
}

// whole checks that an outside reader takes the picture: Go's PNG decoder, or
// its XML decoder for SVG.
func whole(t *testing.T, name string, format Format, data []byte) {
	t.Helper()
	if format == PNG {
		img, err := png.Decode(bytes.NewReader(data))
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if s := img.Bounds().Size(); s.X != 1200 || s.Y != 800 {
			t.Errorf("%s is %d×%d pixels, want 1200×800", name, s.X, s.Y)
		}
		return
	}
	root := ""
	for dec := xml.NewDecoder(bytes.NewReader(data)); ; {
		tok, err := dec.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("%s is not XML: %v", name, err)
		}
		if s, ok := tok.(xml.StartElement); ok && root == "" {
			root = s.Name.Local
		}
	}
	text := string(data)
	switch {
	case root != "svg":
		t.Errorf("%s begins with %q, want svg", name, root)
	case strings.Contains(text, "NaN") || strings.Contains(text, "Inf"):
		t.Errorf("%s has a coordinate that is not finite", name)
	case !strings.Contains(text, "sans-serif") || strings.Contains(text, "font-family:Liberation"):
		t.Errorf("%s names a font without one to fall back on", name)
	case len(text) > 1<<20:
		t.Errorf("%s has %d bytes, want at most a megabyte: lines are thinned", name, len(text))
	}
}
