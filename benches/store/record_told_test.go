package store

import (
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/parquet-go/parquet-go"

	"soctrial/plant/record"
)

// Spellings of testers and loggers (common practice, no source).
func TestRecognise(t *testing.T) {
	for head, want := range map[string]heading{
		"time_s":            {role: timeRole, unit: "s", native: true, known: true},
		"Time(s)":           {role: timeRole, unit: "s", known: true},
		"Test Time (h)":     {role: timeRole, unit: "h", known: true},
		"TimeStamp":         {role: timeRole, unit: "datetime", date: true, known: true},
		"Current(A)":        {role: currentRole, unit: "A", known: true},
		"Current [mA]":      {role: currentRole, unit: "mA", known: true},
		"I_A":               {role: currentRole, unit: "A", known: true},
		"Current (%)":       {},
		"Voltage(V)":        {role: voltageRole, unit: "V", known: true},
		"U/mV":              {role: voltageRole, unit: "mV", known: true},
		"Battery_Temp_degC": {role: temperatureRole, unit: "degC", known: true},
		"Temperature (°C)":  {role: temperatureRole, unit: "degC", known: true},
		"T [K]":             {role: temperatureRole, unit: "K", known: true},
		"Chamber_Temp_degC": {},
		"soc":               {role: socRole, unit: "fraction", native: true, known: true},
		"SOC [%]":           {role: socRole, unit: "percent", known: true},
		"SOC %":             {role: socRole, unit: "percent", known: true},
		"SOC%":              {role: socRole, unit: "percent", known: true},
		"Capacity(Ah)":      {},
		"Ah":                {},
		"charge_ah":         {role: chargeRole, unit: "Ah", native: true, known: true},
		"StepTime(s)":       {},
		"Power(W)":          {},
		"":                  {},
		"%":                 {},
	} {
		if got := recognise(head); got != want {
			t.Errorf("%q: got %+v, want %+v", head, got, want)
		}
	}
}

// What a person is told of the rows.
func TestRecordTold(t *testing.T) {
	file := "Test Time (min),Current(mA),Voltage(V),SOC [%],Capacity(Ah)\n# begin\n0,1000,3.5,80,0\n\n0,,3.5,80,0\n1,-1000,,79,0\n"
	got, told, err := ReadRecord(put(t, "r.csv", file), RecordOptions{})
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	want := record.Record{Name: "r", SOC: []float64{0.8, 0.8, 0.79}, Readings: record.Readings{TimeS: []float64{0, 0, 60}, CurrentA: []float64{1, nan, -1},
		VoltageV: []float64{3.5, 3.5, nan}, TemperatureC: []float64{nan, nan, nan}}}
	if d := cmp.Diff(want, *got, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
	for _, line := range []string{
		`time: column 1 "Test Time (min)" in min`, `current: column 2 "Current(mA)" in mA`, `voltage: column 3 "Voltage(V)" in V`,
		`soc: column 4 "SOC [%]" in percent`, "not read: Capacity(Ah)", "no value: current in 1 row, voltage in 1 row",
		"time repeats that of the row before in 1 row", "blank and comment lines between the rows, passed over: 2",
	} {
		if !slices.Contains(told.Lines, line) {
			t.Errorf("%q is not among\n%s", line, strings.Join(told.Lines, "\n"))
		}
	}
}

func TestRecordRowsRefused(t *testing.T) {
	const heads = "time_s,current_a,voltage_v\n"
	for _, c := range []struct {
		name, file string
		m          *record.Map
		want       string
	}{
		{"open quote", heads + "0,1,3\n1,1,\"3.6", nil, "line 3: a quoted field must end in a quote"},
		{"text behind a quote", heads + "0,1,\"3\"5\n", nil, "line 2: a quoted field must end in a quote"},
		{"cut last line", heads + "0,1,3\n1,1", nil, "line 3 has 2 fields, the headings are 3"},
		{"backward, the way out", heads + "2,1,3\n1,1,3\n", nil, "line 3: time goes back from 2 s to 1 s; it may repeat but not go back (--repair"},
		{"beyond a double once converted", "Time(h),current_a,voltage_v\n1e308,1,3\n", nil, `line 2, column "Time(h)": 1e+308 is not a finite number in s`},
		{"delimiter of two bytes", heads + "0,1,3\n", &record.Map{Delimiter: "§"}, "one ASCII character"},
		{"delimiter a quote", heads + "0,1,3\n", &record.Map{Delimiter: "\""}, "one ASCII character"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, _, err := ReadRecord(put(t, "r.csv", c.file), RecordOptions{Map: c.m})
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v\nwant %s", err, c.want)
			}
		})
	}
}

// parquetRecord writes rows as a Parquet file by the library itself.
func parquetRecord[T any](t *testing.T, rows ...T) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "r.parquet")
	if err := parquet.WriteFile(path, rows); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestParquetRecord(t *testing.T) {
	one := 1.0
	path := parquetRecord(t, parquetRow{0, &one, 3.5, 1}, parquetRow{1, nil, 3.25, 0.5})
	got, told, err := ReadRecord(path, RecordOptions{})
	if err != nil {
		t.Fatal(err)
	}
	nan := math.NaN()
	want := record.Record{Name: "r", SOC: []float64{1, 0.5}, Readings: record.Readings{TimeS: []float64{0, 1}, CurrentA: []float64{1, nan},
		VoltageV: []float64{3.5, 3.25}, TemperatureC: []float64{nan, nan}}}
	if d := cmp.Diff(want, *got, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
	if !slices.Contains(told.Lines, "no value: current in 1 row") {
		t.Error(told.Lines)
	}
	type foreign struct {
		When   string  `parquet:"When"`
		Pack   float64 `parquet:"Pack mV"`
		Amps   int32   `parquet:"Pack mA"`
		Factor int64   `parquet:"Counter"`
	}
	path = parquetRecord(t, foreign{"2024-02-29T23:59:59Z", 3500, -1000, 0}, foreign{"2024-03-01T00:00:01Z", 3400, -500, -360})
	m := &record.Map{Time: record.Column{Heading: "When", Unit: "datetime"}, Current: record.Column{Heading: "Pack mA", Unit: "mA", ChargePositive: true},
		Voltage: record.Column{Heading: "Pack mV", Unit: "mV"}, Charge: record.Column{Heading: "Counter", Unit: "As", ChargePositive: true}}
	if got, _, err = ReadRecord(path, RecordOptions{Map: m}); err != nil {
		t.Fatal(err)
	}
	want = record.Record{Name: "r", ChargeAh: []float64{0, 0.1}, Readings: record.Readings{TimeS: []float64{0, 2}, CurrentA: []float64{1, 0.5},
		VoltageV: []float64{3.5, 3.4}, TemperatureC: []float64{nan, nan}}}
	if d := cmp.Diff(want, *got, cmpopts.EquateNaNs(), cmpopts.EquateApprox(0, 1e-15)); d != "" {
		t.Error(d)
	}
}

func TestParquetRecordRefused(t *testing.T) {
	one, inf := 1.0, math.Inf(1)
	for name, c := range map[string]struct{ path, want string }{
		"backward":   {parquetRecord(t, parquetRow{1, &one, 3, 1}, parquetRow{0, &one, 3, 1}), "row 2: time goes back from 1 s to 0 s"},
		"infinite":   {parquetRecord(t, parquetRow{0, &inf, 3, 1}), `row 1, column "current_a"`},
		"no current": {parquetRecord(t, parquetRow{0, nil, 3, 1}), "has no value in any of 1 rows"},
		"no rows":    {parquetRecord[parquetRow](t), "no rows"},
	} {
		t.Run(name, func(t *testing.T) {
			_, _, err := ReadRecord(c.path, RecordOptions{})
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v\nwant %s", err, c.want)
			}
		})
	}
}

func TestReadColumns(t *testing.T) {
	nan := math.NaN()
	csvPath := put(t, "trace.csv", "# quay run\nleg;speed_mps;time_s\nout;0;0\nout;1.5;1\nback;;2\n")
	type row struct {
		Speed *float64 `parquet:"speed_mps,optional"`
		Time  int64    `parquet:"time_s"`
	}
	zero, fast := 0.0, 1.5
	for _, path := range []string{csvPath, parquetRecord(t, row{&zero, 0}, row{&fast, 1}, row{nil, 2})} {
		got, err := ReadColumns(path, []string{"time_s", "speed_mps"})
		if err != nil {
			t.Fatal(err)
		}
		want := map[string][]float64{"time_s": {0, 1, 2}, "speed_mps": {0, 1.5, nan}}
		if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("%s: %s", path, d)
		}
		if _, err := ReadColumns(path, []string{"time_s", "power_w"}); err == nil || !strings.Contains(err.Error(), `column "power_w" is missing`) {
			t.Errorf("%s: %v", path, err)
		}
	}
	if _, err := ReadColumns(filepath.Join(t.TempDir(), "absent.csv"), []string{"time_s"}); !os.IsNotExist(err) && (err == nil || !strings.Contains(err.Error(), "absent.csv")) {
		t.Error(err)
	}
	if _, err := ReadColumns(put(t, "twice.csv", "time_s,time_s\n0,0\n"), []string{"time_s"}); err == nil || !strings.Contains(err.Error(), "two columns") {
		t.Error(err)
	}
	if _, err := ReadColumns(put(t, "text.csv", "time_s,power_w\n0,low\n"), []string{"time_s", "power_w"}); err == nil || !strings.Contains(err.Error(), `line 2, column "power_w"`) {
		t.Error(err)
	}
}
