package cell_test

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant/cell"
)

// The fast exponential against the library's, everywhere and on both sides of
// the seam.
func TestExp(t *testing.T) {
	check := func(x float64) {
		if got, want := cell.Exp(x), math.Exp(x); math.Abs(got-want) > 3e-16*want {
			t.Errorf("exp(%g): %.17g, want %.17g", x, got, want)
		}
	}
	for _, x := range []float64{0, 1.0 / 16, -1.0 / 16, math.Nextafter(1.0/16, 0), math.Nextafter(-1.0/16, 0), 1e-300, -3, 5} {
		check(x)
	}
	rapid.Check(t, func(t *rapid.T) { check(rapid.Float64Range(-0.08, 0.08).Draw(t, "x")) })
	if !math.IsNaN(cell.Exp(math.NaN())) || cell.Exp(math.Inf(-1)) != 0 {
		t.Error("exp of NaN or -Inf")
	}
}
