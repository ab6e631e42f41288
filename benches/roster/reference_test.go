package roster_test

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"soctrial/benches/define"
	"soctrial/benches/roster"
	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
	"soctrial/testdata"
)

// table reads a reference file; each row is by column name.
func table(t *testing.T, name string) []map[string]string {
	t.Helper()
	f, err := os.Open(testdata.Reference(t, name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var out []map[string]string
	for _, r := range rows[1:] {
		m := map[string]string{}
		for i, head := range rows[0] {
			m[head] = r[i]
		}
		out = append(out, m)
	}
	return out
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// steadyCase is one system of kalman_steady_state.csv.
type steadyCase map[string]map[[2]int]float64

func steadyCases(t *testing.T) map[string]steadyCase {
	cases := map[string]steadyCase{}
	for _, r := range table(t, "kalman_steady_state.csv") {
		c := cases[r["case"]]
		if c == nil {
			c = steadyCase{}
			cases[r["case"]] = c
		}
		if c[r["matrix"]] == nil {
			c[r["matrix"]] = map[[2]int]float64{}
		}
		c[r["matrix"]][[2]int{int(number(t, r["row"])), int(number(t, r["col"]))}] = number(t, r["value"])
	}
	return cases
}

// riccatiCell is the cell of the *_rc_cell* cases: 4.8 Ah, an OCV with slope
// 0.6 V, R0 = 0 so that the current's noise reaches the voltage by the
// branches alone.
func riccatiCell(branches int) *cell.Cell {
	tau1, tau2 := cell.Constant(20), cell.Constant(400)
	return &cell.Cell{Name: "riccati", CapacityAh: 4.8, CoulombicEfficiency: 1, VoltageMinV: 2, VoltageMaxV: 5, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3, 3.6}), R0: cell.Constant(0),
		Branches: []cell.Branch{{Ohm: cell.Constant(0.008), TauS: &tau1}, {Ohm: cell.Constant(0.012), TauS: &tau2}}[:branches]}
}

// riccatiSpec reads the estimator file of a case: dt is 1 s, so a density is
// the square root of Q's diagonal.
func riccatiSpec(t *testing.T, c steadyCase, currentStdA float64) estimator.Spec {
	t.Helper()
	q0, qv := c["Q"][[2]int{0, 0}], c["Q"][[2]int{1, 1}]
	if currentStdA > 0 { // Q is the current's, but for this on the diagonal
		q0, qv = 1e-14, 1e-14
	}
	text := fmt.Sprintf(`format = "soctrial/estimator/1"
kind = "ekf"
start = { soc_std = 0.1, branch_std_v = 0.01 }
process = { soc_std_per_sqrt_s = %.17e, branch_std_v_per_sqrt_s = %.17e }
measurement = { voltage_std_v = %.17e, current_std_a = %.17e }
`, math.Sqrt(q0), math.Sqrt(qv), math.Sqrt(c["R"][[2]int{0, 0}]), currentStdA)
	spec, err := define.Estimator("riccati.toml", []byte(text), define.Openers{})
	if err != nil {
		t.Fatal(err)
	}
	return *spec
}

func newEstimator(t *testing.T, s estimator.Setup) estimator.Estimator {
	t.Helper()
	e, err := roster.New(s)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func block(n int, currentA, voltageV float64) record.Readings {
	in := record.MakeReadings(n)
	in.PeriodS = 1
	for k := range n {
		in.TimeS[k], in.CurrentA[k], in.VoltageV[k], in.TemperatureC[k] = float64(k), currentA, voltageV, 25
	}
	return in
}

func advance(t *testing.T, e estimator.Estimator, in record.Readings) estimator.Estimate {
	t.Helper()
	out := estimator.MakeEstimate(in.Len())
	if err := e.Advance(&in, &out); err != nil {
		t.Fatal(err)
	}
	return out
}

// Steady state of the discrete Riccati equation, computed by doubling in 60
// digits (kalman_steady_state.csv): covariances, gain and innovation variance
// to 1e-9, from an estimator file through the roster's constructor.
func TestRiccatiSteadyState(t *testing.T) {
	cases := steadyCases(t)
	for name, currentStdA := range map[string]float64{"two_rc_cell_diagonal_q": 0, "two_rc_cell_current_noise_q": 0.05, "one_rc_cell": 0} {
		t.Run(name, func(t *testing.T) {
			want := cases[name]
			n := len(want["K"])
			e := newEstimator(t, estimator.Setup{Spec: riccatiSpec(t, want, currentStdA), Cell: riccatiCell(n - 1), SOCStart: 0.5, PeriodS: 1})
			seen := e.(estimator.Inspectable)
			for range 200 {
				advance(t, e, block(1000, 0, 3.3))
			}
			filtered, predicted := make([]float64, n*n), make([]float64, n*n)
			before, after := make([]float64, n), make([]float64, n)
			seen.Covariance(filtered)
			state, err := e.MarshalBinary()
			if err != nil {
				t.Fatal(err)
			}
			advance(t, e, block(1, 0, math.NaN())) // a prediction and no update
			seen.Covariance(predicted)
			seen.State(before)
			if err := e.UnmarshalBinary(state); err != nil {
				t.Fatal(err)
			}
			out := advance(t, e, block(1, 0, 3.4))
			seen.State(after)
			for r := range n {
				gain := (after[r] - before[r]) / out.InnovationV[0]
				relative(t, "K", r, 0, gain, want["K"][[2]int{r, 0}])
				for c := range n {
					relative(t, "P filtered", r, c, filtered[r*n+c], want["P_filt"][[2]int{r, c}])
					relative(t, "P predicted", r, c, predicted[r*n+c], want["P_pred"][[2]int{r, c}])
				}
			}
			relative(t, "S", 0, 0, out.InnovationStdV[0]*out.InnovationStdV[0], want["S"][[2]int{0, 0}])
			relative(t, "stated variance of SOC", 0, 0, out.SOCStd[0]*out.SOCStd[0], want["P_filt"][[2]int{0, 0}])
		})
	}
}

func relative(t *testing.T, what string, r, c int, got, want float64) {
	t.Helper()
	if !(math.Abs(got-want) <= 1e-9*math.Abs(want)) {
		t.Errorf("%s[%d][%d] is %.15g, the reference %.15g: off by %.2g of it", what, r, c, got, want, math.Abs(got/want-1))
	}
}

// The first 20 covariances of the same system, and its posterior Cramér-Rao
// bound (Tichavský, Muravchik, Nehorai 1998), which a linear system's Kalman
// filter attains: pcrb_linear_gaussian.csv, to its tolerance of 1e-7.
func TestCovariancesAndBoundStepByStep(t *testing.T) {
	spec := riccatiSpec(t, steadyCases(t)["two_rc_cell_diagonal_q"], 0)
	e := newEstimator(t, estimator.Setup{Spec: spec, Cell: riccatiCell(2), SOCStart: 0.5, PeriodS: 1})
	p := make([]float64, 9)
	rows := table(t, "pcrb_linear_gaussian.csv")
	if len(rows) != 21 {
		t.Fatalf("%d rows, want 21", len(rows))
	}
	for k, row := range rows {
		u := 3.3
		if k == 0 { // the reference starts from P0 without an update
			u = math.NaN()
		}
		advance(t, e, block(1, 0, u))
		e.(estimator.Inspectable).Covariance(p)
		for col, at := range map[string]int{"kalman_var_soc": 0, "kalman_cov_soc_v1_V": 1, "kalman_cov_soc_v2_V": 2, "kalman_var_v1_V2": 4,
			"kalman_cov_v1_v2_V2": 5, "kalman_var_v2_V2": 8, "pcrb_var_soc": 0, "pcrb_var_v1_V2": 4, "pcrb_var_v2_V2": 8} {
			if want := number(t, row[col]); math.Abs(p[at]-want) > 1e-7*math.Abs(want) {
				t.Errorf("step %d: %s is %.12g, the reference %.12g", k, col, p[at], want)
			}
		}
	}
}

// Quantiles the consistency test rests on, against the table of the
// NIST/SEMATECH e-Handbook (1.3.6.7.4; three decimals) and 60-digit values.
func TestChiSquareQuantiles(t *testing.T) {
	for _, row := range table(t, "chi_square_quantiles.csv") {
		law := distuv.ChiSquared{K: number(t, row["dof"])}
		for col, p := range map[string]float64{"q0_025": 0.025, "q0_500": 0.5, "q0_975": 0.975, "q0_990": 0.99} {
			got := law.Quantile(p)
			if want := number(t, row[col]); math.Abs(got-want) > 1e-9*want {
				t.Errorf("%s degrees, %g: %.12g, the reference %.12g", row["dof"], p, got, want)
			}
			if printed := row["nist_table_"+col]; printed != "" && math.Abs(got-number(t, printed)) > 0.0006 {
				t.Errorf("%s degrees, %g: %.6g, the handbook prints %s", row["dof"], p, got, printed)
			}
		}
	}
}

// What an estimator file may name is what there is.
func TestKinds(t *testing.T) {
	if got := strings.Join(roster.Kinds(), " "); got != "ekf coulomb rest-ocv" || got != strings.Join(define.EstimatorKinds(), " ") {
		t.Errorf("kinds are %s, files may name %q", got, define.EstimatorKinds())
	}
	for _, kind := range roster.Kinds() {
		s := estimator.Spec{Kind: kind, Branches: -1, VoltageStdV: 0.004, RestCurrentBelowA: 0.1, RestAfterS: 60}
		newEstimator(t, estimator.Setup{Spec: s, Cell: riccatiCell(2), SOCStart: 0.5, PeriodS: 1})
	}
	_, err := roster.New(estimator.Setup{Spec: estimator.Spec{Kind: "ekff"}, Cell: riccatiCell(2)})
	if err == nil || !strings.Contains(err.Error(), `"ekff"`) || !strings.Contains(err.Error(), "ekf, coulomb, rest-ocv") {
		t.Errorf("error is %v, want one that names the kind and the known ones", err)
	}
}
