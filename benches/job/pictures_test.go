package job

import (
	"bytes"
	"context"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"soctrial/benches/score"
)

// A counter keeps the error it was told, but for its sensor: at the first
// sample the percentiles over scenarios are those of soc_start_error itself,
// limited to what a told SOC may be.
func TestErrorsOverTimeBeginWithWhatWasTold(t *testing.T) {
	w := newWorkplace(t, nil)
	w.draw()
	o := w.options("out")
	out, err := Run(context.Background(), o)
	if err != nil {
		t.Fatal(err)
	}
	in, err := loadRun(&o)
	if err != nil {
		t.Fatal(err)
	}
	in.longest = []float64{900}
	got, err := errorsOverTime(context.Background(), in)
	if err != nil {
		t.Fatal(err)
	}
	var told []float64
	for _, r := range out.Set.Rows {
		told = append(told, math.Abs(min(1+r.SOCStartError, 1)-1))
	}
	slices.Sort(told)
	counting := got[1]
	if counting.Name != "counting" || len(counting.TimeS) < gridPoints || counting.TimeS[0] != 0 {
		t.Fatalf("found %s with %d times from %g s", counting.Name, len(counting.TimeS), counting.TimeS[0])
	}
	near(t, "median error at the start", counting.P50[0], score.Percentile(told, 0.5))
	near(t, "95th percentile at the start", counting.P95[0], score.Percentile(told, 0.95))
	near(t, "largest error at the start", counting.Largest[0], told[len(told)-1])

	if err := os.Mkdir(w.path("pictures"), 0o755); err != nil {
		t.Fatal(err)
	}
	drawn, err := DrawRun(context.Background(), o, out, w.path("pictures"), "aged")
	if err != nil {
		t.Fatal(err)
	}
	if len(drawn) != 3 {
		t.Errorf("drew %v, asked are errors, worst and track", drawn)
	}
	checkPictures(t, w.path("pictures"), 6)
}

// Whatever has a picture is drawn, in the format its ending says.
func TestShowDrawsWhatHasAPicture(t *testing.T) {
	w := newWorkplace(t, map[string]string{"plain.csv": steady("time_s,current_a,voltage_v", plainRow)})
	w.draw()
	w.run(w.options("out"))
	if err := os.Mkdir(w.path("pictures"), 0o755); err != nil {
		t.Fatal(err)
	}
	for name, path := range map[string]string{"cell.png": "cell.toml", "cell.svg": "cell.toml", "duty.svg": "duty.toml", "results.png": "out",
		"traces.svg": "out/traces.parquet", "record.png": "plain.csv"} {
		if _, err := Show(ShowOptions{Path: w.path(path), PicturePath: w.path("pictures/" + name)}); err != nil {
			t.Errorf("%s: %v", path, err)
		}
	}
	checkPictures(t, w.path("pictures"), 6)
	for _, path := range []string{"plan.toml", "sensors.toml", "ekf.toml", "set.parquet"} {
		if _, err := Show(ShowOptions{Path: w.path(path), PicturePath: w.path("none.png")}); err == nil || !strings.Contains(err.Error(), "--picture") {
			t.Errorf("%s: found %v, asked is a refusal of the picture", path, err)
		}
	}
}

// checkPictures holds each file's first bytes against its ending.
func checkPictures(t *testing.T, dir string, want int) {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(dir, "*"))
	if err != nil || len(files) != want {
		t.Fatalf("found %v (%v), asked are %d pictures", files, err, want)
	}
	for _, path := range files {
		data, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		isPNG, isSVG := bytes.HasPrefix(data, []byte("\x89PNG")), bytes.Contains(data[:min(500, len(data))], []byte("<svg"))
		if (filepath.Ext(path) == ".png") != isPNG || (filepath.Ext(path) == ".svg") != isSVG {
			t.Errorf("%s begins with %q", path, data[:20])
		}
	}
}
