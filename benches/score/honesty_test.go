package score

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"soctrial/testdata"
)

// table reads a reference file: one map a row, by heading; text columns stay
// out.
func table(t *testing.T, name string) []map[string]float64 {
	t.Helper()
	f, err := os.Open(testdata.Reference(t, name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil || len(rows) < 2 {
		t.Fatalf("%s: %d rows, %v", name, len(rows), err)
	}
	var out []map[string]float64
	for _, row := range rows[1:] {
		m := map[string]float64{}
		for i, text := range row {
			if x, err := strconv.ParseFloat(text, 64); err == nil {
				m[rows[0][i]] = x
			}
		}
		out = append(out, m)
	}
	return out
}

// The library's chi-square quantiles against 60-digit values, and against the
// three decimals of NIST/SEMATECH e-Handbook table 1.3.6.7.4.
func TestChiSquareQuantiles(t *testing.T) {
	for _, row := range table(t, "chi_square_quantiles.csv") {
		c := distuv.ChiSquared{K: row["dof"]}
		for column, p := range map[string]float64{"q0_025": 0.025, "q0_500": 0.5, "q0_975": 0.975, "q0_990": 0.99} {
			want, q := row[column], c.Quantile(p)
			if !(want > 0 && math.Abs(q-want) <= 1e-9*want) {
				t.Errorf("%g degrees, %g: %.13g, want %.13g", row["dof"], p, q, want)
			}
			if handbook, given := row["nist_table_"+column]; given && math.Abs(q-handbook) > 0.0006 {
				t.Errorf("%g degrees, %g: %.5g, handbook %.5g", row["dof"], p, q, handbook)
			}
		}
	}
}

// The digits the metrics use are those quantiles, rounded.
func TestBandConstants(t *testing.T) {
	if q := (distuv.ChiSquared{K: 1}).Quantile(0.95); math.Abs(q-inBand) > 0.0005 {
		t.Errorf("3.841 stands for %g", q)
	}
	if q := distuv.UnitNormal.Quantile(0.975); math.Abs(q-twoSided) > 0.005 {
		t.Errorf("1.96 stands for %g", q)
	}
}

// Bands of averaged NEES and NIS as in Bar-Shalom, Li & Kirubarajan (2001),
// section 5.4.
func TestMeanBand(t *testing.T) {
	for _, row := range table(t, "nees_nis_bands_95pct.csv") {
		low, high := MeanBand(int(row["dimension"]), int(row["n_runs_or_samples"]), 0.95)
		if !(math.Abs(low-row["lower_bound"]) <= 1e-8 && math.Abs(high-row["upper_bound"]) <= 1e-8) {
			t.Errorf("%v: [%.10g, %.10g]", row, low, high)
		}
	}
}

// Five values by hand: mean 3, deviation √2.5, and t(4 degrees, 97.5 %) = 2.776 of
// every printed table.
func TestMeanInterval(t *testing.T) {
	got := MeanInterval([]float64{1, 2, math.NaN(), 3, 4, 5}, 0.95)
	half := 2.776 * math.Sqrt(2.5/5)
	if got.Mean != 3 || got.N != 5 || math.Abs(got.High-3-half) > 5e-4 || math.Abs(3-got.Low-half) > 5e-4 {
		t.Errorf("got %+v", got)
	}
	if one := MeanInterval([]float64{7}, 0.95); one.Mean != 7 || !math.IsInf(one.Low, -1) || !math.IsInf(one.High, 1) {
		t.Errorf("one value: %+v", one)
	}
	if none := MeanInterval(nil, 0.95); !math.IsNaN(none.Mean) || none.N != 0 {
		t.Errorf("none: %+v", none)
	}
}

// The interval holds the truth about as often as it says: 2,000 sets of 12
// normal values; 95 % ± four deviations of a binomial share.
func TestMeanIntervalCovers(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	const sets = 2000
	held := 0
	for range sets {
		x := make([]float64, 12)
		for i := range x {
			x[i] = 1 + r.NormFloat64()
		}
		if i := MeanInterval(x, 0.95); i.Low <= 1 && 1 <= i.High {
			held++
		}
	}
	if share := float64(held) / sets; math.Abs(share-0.95) > 4*math.Sqrt(0.95*0.05/sets) {
		t.Errorf("the interval held the truth in %g", share)
	}
}

func TestHonesty(t *testing.T) {
	row := func(coverage, nis, nees float64) Result {
		m := Nothing()
		m.Coverage95, m.NISMean, m.NEESMean = coverage, nis, nees
		return Result{Status: OK, Metrics: m}
	}
	nan := math.NaN()
	for _, tt := range []struct {
		name    string
		rows    []Result
		verdict Confidence
		reason  string
	}{
		{"errors larger than stated", []Result{row(0.5, 3, 5), row(0.6, 3.2, 6), row(0.55, 3.1, 5.5)}, Overconfident, "overconfident: NEES 5.5"},
		{"coverage alone", []Result{row(0.5, nan, nan), row(0.51, nan, nan)}, Overconfident, "overconfident: coverage 0.505"},
		{"errors smaller than stated", []Result{row(1, 0.2, 0.1), row(1, 0.21, 0.12)}, Underconfident, "underconfident: coverage 1 "},
		{"as stated", []Result{row(0.94, 0.9, 1.2), row(0.96, 1.1, 0.8)}, Consistent, ""},
		{"nothing stated", []Result{row(nan, nan, nan), row(nan, nan, nan)}, Unknown, ""},
		{"one scenario", []Result{row(0.1, 9, 9)}, Unknown, ""},
		{"the worse counts", []Result{row(0.95, 0.5, 3), row(0.95, 0.51, 3.1)}, Overconfident, "underconfident: NIS"},
	} {
		h := HonestyOf(tt.rows)
		if h.Verdict != tt.verdict || !strings.Contains(strings.Join(h.Reasons, "; "), tt.reason) || (tt.reason == "") != (len(h.Reasons) == 0) {
			t.Errorf("%s: got %s, %q", tt.name, h.Verdict, h.Reasons)
		}
	}
	lost := row(0.1, 9, 9)
	lost.Status = Lost
	if h := HonestyOf([]Result{lost, lost}); h.NEES.N != 0 {
		t.Errorf("lost rows were counted: %+v", h)
	}
}
