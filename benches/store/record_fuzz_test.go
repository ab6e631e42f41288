package store

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/parquet-go/parquet-go"
	"pgregory.net/rapid"

	"soctrial/plant/record"
)

// sound fails unless a record that was read keeps what a record promises.
func sound(t *testing.T, r *record.Record, sizeBytes int) {
	t.Helper()
	n := r.Len()
	// A row has three fields at least, so it cannot be shorter than "0,," and its end.
	if n == 0 || len(r.CurrentA) != n || len(r.VoltageV) != n || len(r.TemperatureC) != n ||
		r.SOC != nil && len(r.SOC) != n || r.ChargeAh != nil && len(r.ChargeAh) != n {
		t.Fatalf("columns of different lengths: %+v", r)
	}
	if sizeBytes > 0 && n > sizeBytes/2 {
		t.Fatalf("%d rows out of %d bytes", n, sizeBytes)
	}
	for k, x := range r.TimeS {
		if math.IsNaN(x) || k > 0 && x < r.TimeS[k-1] {
			t.Fatalf("time %d is %g", k, x)
		}
	}
	for _, column := range [][]float64{r.TimeS, r.CurrentA, r.VoltageV, r.TemperatureC, r.SOC, r.ChargeAh} {
		for k, x := range column {
			if math.IsInf(x, 0) {
				t.Fatalf("sample %d is infinite", k)
			}
		}
	}
}

func FuzzReadRecordCSV(f *testing.F) {
	for _, seed := range []string{
		"time_s,current_a,voltage_v\n0,1,3.5\n1,-1,3.6\n",
		"Time(s);Current [mA];U/V;SOC [%]\r\n0;1,5;3,5;80\r\n1;;3,5;79\r\n",
		"\ufeffTimeStamp,\"Current, A\",Voltage\n3/4/2017 1:02:03 PM,1,3\n",
		"# quay sweeper\nt\tI\tV\ns\tA\tV\n0:00:01\t1\t3\n", "\x1f\x8b\x08\x00", "", "\x00", "\"",
	} {
		f.Add([]byte(seed), false)
		f.Add([]byte(seed), true)
	}
	f.Fuzz(func(t *testing.T, content []byte, repair bool) {
		if bytes.HasPrefix(content, gzipMagic) {
			return // rows unpacked may exceed the size
		}
		a := &assembler{repair: repair}
		if a.fromText(bytes.NewReader(content), &record.Map{}, nil) != nil {
			return
		}
		if r, err := a.finish(); err == nil {
			sound(t, r, len(content))
		}
	})
}

type parquetRow struct {
	Time    float64  `parquet:"time_s"`
	Current *float64 `parquet:"current_a,optional"`
	Voltage float32  `parquet:"voltage_v"`
	SOC     float64  `parquet:"soc"`
}

func FuzzReadRecordParquet(f *testing.F) {
	var b bytes.Buffer
	w := parquet.NewGenericWriter[parquetRow](&b)
	one := 1.0
	if _, err := w.Write([]parquetRow{{0, &one, 3.5, 1}, {1, nil, 3.5, 1}, {2, &one, 3.25, 0.5}}); err != nil {
		f.Fatal(err)
	}
	if err := w.Close(); err != nil {
		f.Fatal(err)
	}
	f.Add(b.Bytes())
	f.Add(b.Bytes()[:b.Len()/2])
	f.Add([]byte("PAR1PAR1"))
	f.Fuzz(func(t *testing.T, content []byte) {
		a := &assembler{repair: true}
		err := withInput("fuzz.parquet", bytes.NewReader(content), int64(len(content)), tight,
			func(t *table) error { return a.fromTable(t, &record.Map{}, nil) })
		if err != nil {
			return
		}
		if r, err := a.finish(); err == nil {
			sound(t, r, 0)
		}
	})
}

// What is written reads back to the last bit, whatever the delimiter, the
// decimal mark, the line ends and the quotes.
func TestRecordRoundTrip(t *testing.T) {
	dir := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 40).Draw(t, "rows")
		delimiter := rapid.SampledFrom([]string{",", ";", "\t", "|"}).Draw(t, "delimiter")
		comma := delimiter != "," && rapid.Bool().Draw(t, "decimal comma")
		end := rapid.SampledFrom([]string{"\n", "\r\n"}).Draw(t, "line end")
		quote := rapid.SampledFrom([]string{"", `"`}).Draw(t, "quote")
		value := rapid.OneOf(rapid.Float64Range(-1e3, 1e3), rapid.Float64(), rapid.Just(math.NaN()), rapid.Just(math.Copysign(0, -1)))
		want := record.Record{Name: "r", Readings: record.MakeReadings(n)}
		var b strings.Builder
		fmt.Fprintf(&b, "time_s%scurrent_a%[1]svoltage_v%[1]stemperature_c%s", delimiter, end)
		now := rapid.Float64Range(-1e6, 1e9).Draw(t, "start")
		for k := range n {
			want.TimeS[k] = now
			now += rapid.SampledFrom([]float64{0, 0.1, 1, 1e3 / 3}).Draw(t, "step")
			want.CurrentA[k], want.VoltageV[k] = 1, 3 // one value there must be
			if k > 0 {
				want.CurrentA[k], want.VoltageV[k] = value.Draw(t, "current"), value.Draw(t, "voltage")
			}
			want.TemperatureC[k] = value.Draw(t, "temperature")
			for i, x := range []float64{want.TimeS[k], want.CurrentA[k], want.VoltageV[k], want.TemperatureC[k]} {
				s := ""
				if !math.IsNaN(x) {
					s = strconv.FormatFloat(x, "gef"[k%3], -1, 64)
				}
				if comma {
					s = strings.Replace(s, ".", ",", 1)
				}
				if i > 0 {
					b.WriteString(delimiter)
				}
				b.WriteString(quote + s + quote)
			}
			b.WriteString(end)
		}
		path := filepath.Join(dir, "r.csv")
		if err := os.WriteFile(path, []byte(b.String()), 0o600); err != nil {
			t.Fatal(err)
		}
		var o RecordOptions
		if comma {
			o.Map = &record.Map{Decimal: ","}
		}
		got, _, err := ReadRecord(path, o)
		if err != nil {
			t.Fatalf("%v\n%s", err, b.String())
		}
		// -0 is 0: cmp holds both for equal.
		if d := cmp.Diff(want, *got, cmpopts.EquateNaNs()); d != "" {
			t.Fatalf("%s\n%s", d, b.String())
		}
	})
}
