package job

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

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
		if _, err := Show(ShowOptions{Path: w.path(path), PicturePath: w.path("pictures/" + name), Scenario: -1}); err != nil {
			t.Errorf("%s: %v", path, err)
		}
	}
	checkPictures(t, w.path("pictures"), 6)
	if _, err := Show(ShowOptions{Path: w.path("out/traces.parquet"), PicturePath: w.path("none.png"), Scenario: 999}); err == nil ||
		!strings.Contains(err.Error(), "--scenario: found 999") {
		t.Errorf("a scenario without a trace: found %v", err)
	}
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
