package job_test

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"soctrial/benches/define"
	"soctrial/benches/store"
	"soctrial/testdata"
)

// The map files beside the published figures read as the map that the records need.
func TestRecordMapFiles(t *testing.T) {
	for _, c := range []struct {
		mapFile, file string
		rows          int
		endAh         float64 // the counter's last value, from the records' README; NaN: none
	}{
		{"cell-a.toml", "cell-a-25degC-hppc.csv", 27884, 2.7728},
		{"cell-a.toml", "cell-a-25degC-hppc-between.csv", 210, 2.83264},
		{"cell-b.toml", "cell-b-25C-hppc.csv", 13248, math.NaN()},
		{"cell-b.toml", "cell-b-c15-cycling-10C-24C-40C.csv", 22596, math.NaN()},
	} {
		m, err := define.ReadMap(filepath.Join("..", "..", "testdata", "maps", c.mapFile))
		if err != nil {
			t.Fatal(err)
		}
		r, told, err := store.ReadRecord(testdata.Shared(t, "records/"+c.file), store.RecordOptions{Map: m})
		if err != nil {
			t.Fatal(err)
		}
		if r.Len() != c.rows {
			t.Errorf("%s: %d rows, README says %d", c.file, r.Len(), c.rows)
		}
		if !math.IsNaN(c.endAh) && !(math.Abs(r.ChargeAh[r.Len()-1]-c.endAh) < 5e-5) {
			t.Errorf("%s: the counter ends at %g Ah, README says %g", c.file, r.ChargeAh[r.Len()-1], c.endAh)
		}
		if all := strings.Join(told.Lines, "\n"); !strings.Contains(all, "sign is turned") {
			t.Errorf("%s: the turned sign is not told:\n%s", c.file, all)
		}
	}
}
