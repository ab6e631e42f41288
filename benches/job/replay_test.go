package job

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"soctrial/benches/store"
	"soctrial/testdata"
)

// steady is a record of 1 A out of the quay sweeper's 2 Ah cell for ten
// minutes, from rest, every 10 s: SOC falls by 1/720 a row. soc is the
// record's own at a row, "" for a record without.
func steady(header string, row func(i int) string) string {
	var b strings.Builder
	b.WriteString(header + "\n")
	for i := range 61 {
		b.WriteString(row(i) + "\n")
	}
	return b.String()
}

func at(i int) (timeS, currentA, voltageV float64) {
	timeS = 10 * float64(i)
	z := 1 - timeS/7200
	return timeS, 1, 3 + z - 0.02 - 0.01*(1-math.Exp(-timeS/30))
}

func plainRow(i int) string {
	t, a, v := at(i)
	return fmt.Sprintf("%g,%g,%.6f", t, a, v)
}

func (w workplace) replayOptions(record, out string) ReplayOptions {
	nan := math.NaN()
	return ReplayOptions{RecordPath: w.path(record), CellPath: w.path("cell.toml"), EstimatorPaths: []string{w.path("coulomb.toml")},
		OutDir: w.path(out), SOCStart: nan, FromS: nan, ReferenceCapacityAh: nan, Seed: 1, Version: "test"}
}

func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(math.Abs(got-want) <= 1e-9) {
		t.Errorf("%s is %.12g, by hand %.12g", what, got, want)
	}
}

// Every reference and every start, by hand: a counter that starts right makes
// no error, one told wrong keeps its error, one with a current offset drifts.
func TestReplayByHand(t *testing.T) {
	w := newWorkplace(t, map[string]string{
		"plain.csv": steady("time_s,current_a,voltage_v", plainRow),
		"soc.csv": steady("time_s,current_a,voltage_v,soc", func(i int) string {
			return fmt.Sprintf("%s,%.9f", plainRow(i), 0.9-float64(i)/720)
		}),
		"counter.csv": steady("time_s,current_a,voltage_v,charge_ah", func(i int) string {
			return fmt.Sprintf("%s,%.9f", plainRow(i), 5+float64(i)/360)
		}),
		"rest.csv": "time_s,current_a,voltage_v\n0,0,3.75\n100,0,3.75\n",
		"offset.toml": strings.NewReplacer("noise_a = 0.02", "offset_a = 0.1", "voltage = { noise_v = 0.002 }", "").
			Replace(sensorsText),
	})
	n := 0
	run := func(change func(*ReplayOptions)) *Outcome {
		t.Helper()
		n++
		o := w.replayOptions("plain.csv", fmt.Sprintf("out-%d", n))
		o.SOCStart = 1
		change(&o)
		out, err := Replay(context.Background(), o)
		if err != nil {
			t.Fatal(err)
		}
		return out
	}

	out := run(func(o *ReplayOptions) {})
	near(t, "RMSE against its own current", out.Results[0].Metrics.SOCRMSE, 0)
	if want := "the current counted over the cell's 2 Ah from SOC 1 as given"; out.Reference != want {
		t.Errorf("the reference is %q, asked is %q", out.Reference, want)
	}
	if r := out.Results[0]; r.ScenarioID != 0 || r.Metrics.Samples != 61 || r.Metrics.DurationS != 600 {
		t.Errorf("found scenario %d, %d samples, %g s", r.ScenarioID, r.Metrics.Samples, r.Metrics.DurationS)
	}

	out = run(func(o *ReplayOptions) { o.SOCStartError = -0.1 })
	near(t, "bias when told 0.1 too little", out.Results[0].Metrics.SOCBias, -0.1)

	out = run(func(o *ReplayOptions) { o.RecordPath, o.SOCStart = w.path("soc.csv"), math.NaN() })
	near(t, "largest error from the record's own start", out.Results[0].Metrics.SOCMaxAbs, 0)
	if out.Reference != "the record's own soc" {
		t.Errorf("the reference is %q", out.Reference)
	}

	// Over 2.5 Ah the reference falls by 1/900 a row, the counter by 1/720.
	out = run(func(o *ReplayOptions) { o.RecordPath, o.ReferenceCapacityAh = w.path("counter.csv"), 2.5 })
	near(t, "error at the end over another capacity", out.Results[0].Metrics.EndError, 60.0/900-60.0/720)
	if want := "the record's charge counter over the given 2.5 Ah from SOC 1 as given"; out.Reference != want {
		t.Errorf("the reference is %q, asked is %q", out.Reference, want)
	}

	// 3.75 V is SOC 0.75 on a line from 3 V to 4 V.
	out = run(func(o *ReplayOptions) { o.RecordPath, o.SOCStart = w.path("rest.csv"), math.NaN() })
	if want := "the current counted over the cell's 2 Ah from SOC 0.75 at the OCV of its first 3.75 V"; out.Reference != want {
		t.Errorf("the reference is %q, asked is %q", out.Reference, want)
	}

	// From 305 s on the first sample is at 310 s, 31 rows down.
	out = run(func(o *ReplayOptions) { o.FromS, o.SOCStartError = 305, 0.02 })
	near(t, "bias from half-way", out.Results[0].Metrics.SOCBias, 0.02)
	if r := out.Results[0].Metrics; r.Samples != 30 || r.DurationS != 290 {
		t.Errorf("from 305 s: %d samples over %g s, by hand 30 over 290", r.Samples, r.DurationS)
	}
	trace, err := store.ReadTraces(w.path(fmt.Sprintf("out-%d/traces.parquet", n)), 0, "counting")
	if err != nil {
		t.Fatal(err)
	}
	near(t, "reference at 310 s", trace.SOCTrue[0], 1-31.0/720)
	near(t, "estimate at 310 s", trace.SOC[0], 1-31.0/720+0.02)
	for name, column := range map[string][]float64{"voltage_true_v": trace.VoltageTrueV, "temperature_c": trace.TemperatureC, "innovation_v": trace.InnovationV} {
		for i, x := range column {
			if !math.IsNaN(x) {
				t.Fatalf("%s holds %g at %d, which nobody knows", name, x, i)
			}
		}
	}

	// 0.1 A over 600 s is 60/7200 of 2 Ah too much taken out.
	out = run(func(o *ReplayOptions) { o.SensorsPath = w.path("offset.toml") })
	near(t, "error at the end with an offset", out.Results[0].Metrics.EndError, -60.0/7200)
}

// Means are weighted by the interval a sample stands for: an error of -0.1
// for 100 s and of 0 for 300 s has a mean of -0.025.
func TestReplayWeighsByInterval(t *testing.T) {
	w := newWorkplace(t, map[string]string{"uneven.csv": "time_s,current_a,voltage_v,soc\n0,0,3.9,0.9\n100,0,3.9,0.8\n400,0,3.9,0.8\n"})
	o := w.replayOptions("uneven.csv", "out")
	o.SOCStartError = -0.1
	out, err := Replay(context.Background(), o)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "bias", out.Results[0].Metrics.SOCBias, -0.025)
	near(t, "largest error", out.Results[0].Metrics.SOCMaxAbs, 0.1)
}

func TestReplaysThatAreRefused(t *testing.T) {
	w := newWorkplace(t, map[string]string{
		"plain.csv":     steady("time_s,current_a,voltage_v", plainRow),
		"backward.csv":  "time_s,current_a,voltage_v\n0,0,3.9\n10,0,3.9\n5,0,3.9\n20,0,3.9\n",
		"bad-cell.toml": strings.Replace(cellText, "ohm = 0.02", "ohm = -0.02", 1),
	})
	for _, x := range []struct {
		name   string
		change func(*ReplayOptions)
		says   []string
	}{
		{"time runs backward", func(o *ReplayOptions) { o.RecordPath = w.path("backward.csv") }, []string{"backward.csv", "line 4", "10", "5"}},
		{"start out of range", func(o *ReplayOptions) { o.SOCStart = 1.2 }, []string{"--soc-start", "1.2", "[0, 1]"}},
		{"from beyond the end", func(o *ReplayOptions) { o.FromS = 601 }, []string{"--from-s", "601", "600"}},
		{"no capacity", func(o *ReplayOptions) { o.ReferenceCapacityAh = 0 }, []string{"--reference-capacity-ah", "0"}},
		{"no record", func(o *ReplayOptions) { o.RecordPath = w.path("absent.csv") }, []string{"absent.csv"}},
		{"negative resistance", func(o *ReplayOptions) { o.CellPath = w.path("bad-cell.toml") }, []string{"bad-cell.toml:8", "-0.02"}},
		{"traces of chosen scenarios", func(o *ReplayOptions) { o.Traces = "worst:3" }, []string{"--traces", "worst:3"}},
	} {
		t.Run(x.name, func(t *testing.T) {
			o := w.replayOptions("plain.csv", "refused")
			x.change(&o)
			_, err := Replay(context.Background(), o)
			if _, ok := errors.AsType[*Error](err); !ok {
				t.Fatalf("found %v, asked is an input error", err)
			}
			for _, s := range x.says {
				if !strings.Contains(err.Error(), s) {
					t.Errorf("%q does not say %q", err, s)
				}
			}
			if found, _ := w.glob("*refused*"); len(found) > 0 {
				t.Errorf("left behind: %v", found)
			}
		})
	}
	o := w.replayOptions("backward.csv", "repaired")
	o.Repair = true
	out, err := Replay(context.Background(), o)
	if err != nil || out.Results[0].Metrics.Samples != 3 {
		t.Errorf("repaired: %v, %v", out, err)
	}
}

// The drive profiles recorded on cell a (Kollmeyer 2018, DOI
// 10.17632/wykht8y7tg.1), through a cell written by hand. The tester's own
// counter judges: counting its 1 s samples stays within half a percent, and a
// filter on so rough a cell within what its resistances leave open.
func TestReplayOfRecordedDrives(t *testing.T) {
	w := newWorkplace(t, map[string]string{"ekf.toml": strings.NewReplacer("voltage_std_v = 0.004", "voltage_std_v = 0.03",
		"current_std_a = 0.02", "current_std_a = 0.05", "v_per_sqrt_s = 1e-4", "v_per_sqrt_s = 5e-4").Replace(ekfText)})
	for _, record := range []string{"us06-1s", "la92-1s"} {
		t.Run(record, func(t *testing.T) {
			o := w.replayOptions("", record)
			o.RecordPath = testdata.Shared(t, "records/cell-a-25degC-"+record+".csv")
			o.CellPath, o.MapPath = "../../testdata/cells/cell-a-by-hand.toml", "../../testdata/maps/cell-a.toml"
			o.EstimatorPaths = append(o.EstimatorPaths, w.path("ekf.toml"))
			out, err := Replay(context.Background(), o)
			if err != nil {
				t.Fatal(err)
			}
			counting, ekf := out.Results[0].Metrics, out.Results[1].Metrics
			if !(counting.SOCRMSE < 0.005) {
				t.Errorf("counting has an RMSE of %g against the tester's counter, asked is under 0.005", counting.SOCRMSE)
			}
			if !(ekf.SOCRMSE < 0.02 && ekf.SOCMaxAbs < 0.06) {
				t.Errorf("the filter has an RMSE of %g and at most %g, asked is under 0.02 and 0.06", ekf.SOCRMSE, ekf.SOCMaxAbs)
			}
			if !strings.HasPrefix(out.Reference, "the record's charge counter") {
				t.Errorf("the reference is %q", out.Reference)
			}

			// Started under load in the middle and 15 % wrong, the filter comes back and the counter does not.
			o.OutDir, o.FromS, o.SOCStartError = w.path(record+"-wrong"), 1600, -0.15
			if out, err = Replay(context.Background(), o); err != nil {
				t.Fatal(err)
			}
			counting, ekf = out.Results[0].Metrics, out.Results[1].Metrics
			if !(ekf.ConvergeS < 600) || !math.IsNaN(counting.ConvergeS) {
				t.Errorf("the filter converges after %g s, the counter after %g s; asked is under 600 and never", ekf.ConvergeS, counting.ConvergeS)
			}
		})
	}
}

// The pulse test recorded on cell b (Wiggins, Allu & Wang 2019, DOI
// 10.5281/zenodo.2580327), through its own repeated headings: the charge of
// its notes, 31.92 Ah out and 30.87 Ah in by trapezoids.
func TestShowOfTheOtherCellsPulses(t *testing.T) {
	path := testdata.Shared(t, "records/cell-b-25C-hppc.csv")
	r, _, err := readRecord(path, "../../testdata/maps/cell-b.toml", false, false)
	if err != nil {
		t.Fatal(err)
	}
	if r.Len() != 13248 || r.CurrentA[0] != -10 || r.VoltageV[0] != 3.327 {
		t.Errorf("found %d samples, the first %g A and %g V; its first row says 10.00 A of charge and 3.327 V", r.Len(), r.CurrentA[0], r.VoltageV[0])
	}
	var outAh, inAh float64
	for i := 1; i < r.Len(); i++ {
		ah := (r.CurrentA[i] + r.CurrentA[i-1]) / 2 * (r.TimeS[i] - r.TimeS[i-1]) / 3600
		outAh += max(ah, 0)
		inAh += max(-ah, 0)
	}
	if math.Abs(outAh-31.92) > 0.1 || math.Abs(inAh-30.87) > 0.1 {
		t.Errorf("charge %g Ah out and %g Ah in, noted are 31.92 and 30.87", outAh, inAh)
	}
}

// The recorded US06 current (as above) as a trace leg drives an invented cell
// of twice the size: what is taken out of it is what the record counts.
func TestRecordedCurrentAsATraceLeg(t *testing.T) {
	record := testdata.Shared(t, "records/cell-a-25degC-us06-1s.csv")
	maps, err := filepath.Abs("../../testdata/maps/cell-a.toml")
	if err != nil {
		t.Fatal(err)
	}
	w := newWorkplace(t, map[string]string{
		"duty.toml": fmt.Sprintf("format = \"soctrial/duty/1\"\nname = \"recorded drive\"\nleg = [{ kind = \"trace\", file = %q, map = %q }]\n", record, maps),
		"cell.toml": strings.Replace(cellText, "capacity_ah = 2.0", "capacity_ah = 5.8", 1),
		"plan.toml": strings.NewReplacer("count = 64", "", `"sobol"`, `"list"`,
			"[{ column = \"current_offset_a\", between = [-0.1, 0.1] }, { column = \"soc_start_error\", between = [-0.1, 0.1] }]",
			`[{ column = "soc_start", values = [1.0, 0.9] }]`).Replace(planText),
	})
	w.draw()
	o := w.options("out")
	o.Traces = "all"
	out, err := Run(context.Background(), o)
	if err != nil {
		t.Fatal(err)
	}
	r, _, err := readRecord(record, maps, false, false)
	if err != nil {
		t.Fatal(err)
	}
	for _, res := range out.Results {
		trace, err := store.ReadTraces(w.path("out/traces.parquet"), res.ScenarioID, res.Estimator)
		if err != nil {
			t.Fatal(err)
		}
		n := len(trace.TimeS)
		if res.Reason != "" || math.Abs(trace.TimeS[n-1]-r.TimeS[r.Len()-1]) > 1 {
			t.Errorf("scenario %d ends at %g s (%s), the record at %g s", res.ScenarioID, trace.TimeS[n-1], res.Reason, r.TimeS[r.Len()-1])
		}
		// Each current holds until the next; eta of the cell is 1.
		outAh, inAh := chargeMoved(&r.Readings)
		if got := (trace.SOCTrue[0] - trace.SOCTrue[n-1]) * 5.8; res.ScenarioID == 2 && math.Abs(got-(outAh-inAh)) > 1e-3 {
			t.Errorf("scenario %d: %g Ah were taken out, the record counts %g Ah", res.ScenarioID, got, outAh-inAh)
		}
	}
}
