package store

import (
	"compress/gzip"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"soctrial/plant/record"
	"soctrial/testdata"
)

func put(t testing.TB, name, content string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func span2(x []float64) (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, v := range x {
		low, high = min(low, v), max(high, v)
	}
	return low, high
}

// The figures are those of the records' own README (computed there from the
// files; Kollmeyer 2018, DOI 10.17632/wykht8y7tg.1, and Wiggins, Allu, Wang
// 2019, DOI 10.5281/zenodo.2580327). Currents there count charging as positive.
func TestSharedRecords(t *testing.T) {
	cellA := &record.Map{Time: record.Column{Heading: "Time", Unit: "s"}, Voltage: record.Column{Heading: "Voltage", Unit: "V"},
		Current:     record.Column{Heading: "Current", Unit: "A", ChargePositive: true},
		Temperature: record.Column{Heading: "Battery_Temp_degC", Unit: "degC"},
		Charge:      record.Column{Heading: "Ah", Unit: "Ah", ChargePositive: true}}
	cellB := &record.Map{Time: record.Column{Heading: "Time(s)", Unit: "s"}, Voltage: record.Column{Position: 10, Unit: "V"},
		Current: record.Column{Heading: "Current(A)", Unit: "A", ChargePositive: true}}
	for _, c := range []struct {
		file                   string
		m                      *record.Map
		rows                   int
		spanS                  float64
		low, high, down, up    float64 // V; A as the file counts
		chargeEndAh, tempHighC float64 // NaN: not stated
	}{
		{"cell-a-25degC-c20-ocv.csv", cellA, 2453, 195824.5, 2.4995, 4.2001, -0.145, 0.145, math.NaN(), math.NaN()},
		{"cell-a-25degC-hppc.csv", cellA, 27884, 97599.4, 2.4982, 4.1750, -17.40, 0, 2.7728, 27.9},
		{"cell-a-25degC-hppc-between.csv", cellA, 210, 92867, 2.4995, 4.1042, -0.870, 0, 2.83264, math.NaN()},
		{"cell-a-25degC-us06-1s.csv", cellA, 4813, 4818.9, 2.6146, 4.2026, -19.94, 7.40, 2.586, 32.8},
		{"cell-a-25degC-us06-first1200s-full-rate.csv", cellA, 11982, 1199.9, 3.4163, 4.2226, -15.51, 6.57, 0.62733, math.NaN()},
		{"cell-a-25degC-la92-1s.csv", cellA, 14094, 14104.0, 2.5889, 4.2361, -9.89, 9.42, 2.587, 28.0},
		{"cell-b-25C-hppc.csv", cellB, 13248, 58967, 3.000, 4.203, -30, 22.5, math.NaN(), math.NaN()},
		{"cell-b-c15-cycling-10C-24C-40C.csv", cellB, 22596, 1238588, 3.000, 4.201, -2.17, 2.17, math.NaN(), math.NaN()},
	} {
		t.Run(c.file, func(t *testing.T) {
			path := testdata.Shared(t, "records/"+c.file)
			r, _, err := ReadRecord(path, RecordOptions{Map: c.m})
			if err != nil {
				t.Fatal(err)
			}
			near := func(what string, got, want, digits float64) {
				if !math.IsNaN(want) && !(math.Abs(got-want) <= 0.5001*digits) {
					t.Errorf("%s: %g, README says %g", what, got, want)
				}
			}
			if r.Len() != c.rows {
				t.Errorf("%d rows, README says %d", r.Len(), c.rows)
			}
			low, high := span2(r.VoltageV)
			minA, maxA := span2(r.CurrentA)
			near("span", r.TimeS[r.Len()-1]-r.TimeS[0], c.spanS, 1)
			near("lowest voltage", low, c.low, 1e-4)
			near("highest voltage", high, c.high, 1e-4)
			near("most discharge", -maxA, c.down, 1e-2)
			near("most charge", -minA, c.up, 1e-2)
			if c.m == cellA {
				near("charge at the end", r.ChargeAh[r.Len()-1], c.chargeEndAh, 1e-3)
				_, hot := span2(r.TemperatureC)
				near("hottest", hot, c.tempHighC, 0.1)
			}
			// Without a map the same columns are recognised, but for the counter.
			plain, told, err := ReadRecord(path, RecordOptions{ChargePositive: new(true)})
			if err != nil {
				t.Fatal(err)
			}
			if d := cmp.Diff(r.Readings.VoltageV, plain.VoltageV); d != "" {
				t.Error(d)
			}
			if d := cmp.Diff(r.Readings.CurrentA, plain.CurrentA); d != "" {
				t.Error(d)
			}
			if plain.ChargeAh != nil || told.Dropped != 0 {
				t.Errorf("not asked for: %v", told)
			}
			if _, told, err = ReadRecord(path, RecordOptions{}); err != nil {
				t.Fatal(err)
			}
			// A slow test hardly steps; there the sign cannot be doubted.
			if all := strings.Join(told.Lines, "\n"); strings.Contains(c.file, "us06") && !strings.Contains(all, "seems to be positive on charge") {
				t.Errorf("the wrong sign went unnoticed:\n%s", all)
			}
		})
	}
}

// Each of these is the same record of three rows.
func TestRecordForms(t *testing.T) {
	nan := math.NaN()
	want := record.Record{Name: "r", Readings: record.Readings{TimeS: []float64{0, 1, 1, 2.5}, CurrentA: []float64{2, -0.5, 0, 1},
		VoltageV: []float64{3.4, 3.6, nan, 3.5}, TemperatureC: []float64{25, 25, 26, 26}}}
	for name, file := range map[string]string{
		"own names":       "time_s,current_a,voltage_v,temperature_c\n0,2,3.4,25\n1,-0.5,3.6,25\n1,-0,,26\n2.5,1,3.5,26\n",
		"other order":     "voltage_v,temperature_c,time_s,current_a\n3.4,25,0,2\n3.6,25,1,-.5\nNaN,26,1,0\n3.5,26,2.5,1\n",
		"mark, CRLF":      "\ufefftime_s,current_a,voltage_v,temperature_c\r\n0,2,3.4,25\r\n1,-0.5,3.6,25\r\n1,0,NA,26\r\n2.5,1,3.5,26\r\n",
		"German":          "Zeile;Time [s];Current [mA];Voltage [mV];Temp [°C]\n1;0;2000;3400;25\n2;1,0;-500,0;3600;25\n3;1;0;;26\n4;2,5;1000;3500;26\n",
		"tabs, Latin-1":   "Time (s)\tCurrent (A)\tVoltage (V)\tTemperature (\xb0C)\n0\t2\t3.4\t25\n1\t-0.5\t3.6\t25\n1\t0\t\t26\n2.5\t1\t3.5\t26",
		"line of units":   "Time|Current|Voltage|Temp\n[ms]|[mA]|[V]|[K]\n0|2000|3.4|298.15\n1000|-500|3.6|298.15\n1000|0||299.15\n2500|1000|3.5|299.15\n",
		"comments":        "# quay sweeper\n% second\n\ntime_s,current_a,voltage_v,temperature_c\n0,2,3.4,25\n# pause\n1,-0.5,3.6,25\n1,0,,26\n\n2.5,1,3.5,26\n",
		"marked headings": "# quay sweeper\n# time_s, current_a, voltage_v, temperature_c\n0,2,3.4,25\n1,-0.5,3.6,25\n1,0,,26\n2.5,1,3.5,26\n",
		"preamble":        "Test,rounds\nOperator,works department\nI/A,U/V,t/h,T/K\n2,3.4,0,298.15\n-0.5,3.6,2.777777777777778e-4,298.15\n0,,2.777777777777778e-4,299.15\n1,3.5,6.944444444444444e-4,299.15\n",
		"quotes":          "\"Note, long\",\"Time(s)\",\"Current(A)\",\"Voltage(V)\",\"Temp(C)\"\n\"a \"\"b\"\", c\",0,2,\"3.4\",25\nx,1,-0.5,3.6,25\nx,1,0,,26\n,2.5,1,3.5,26\n",
		"clock":           "Test Time,Current(A),Voltage(V),Temp_degC\n0:00:00,2,3.4,25\n0:00:01.0,-0.5,3.6,25\n0 00:00:01,0,,26\n00:00:02.5,1,3.5,26\n",
		"wall clock":      "Date Time,Current(A),Voltage(V),Temp_degC\n3/24/2017 11:59:59 PM,2,3.4,25\n3/25/2017 12:00:00 AM,-0.5,3.6,25\n3/25/2017 12:00:00 AM,0,,26\n3/25/2017 12:00:01.5 AM,1,3.5,26\n",
		"ISO":             "timestamp,Current(A),Voltage(V),Temp_degC\n2024-02-29T23:59:59Z,2,3.4,25\n2024-03-01T00:00:00Z,-0.5,3.6,25\n2024-03-01T00:00:00Z,0,,26\n2024-03-01T00:00:01.5Z,1,3.5,26\n",
		"empty ends":      "time_s,current_a,voltage_v,temperature_c,\n0,2,3.4,25,\n1,-0.5,3.6,25,\n1,0,,26,,,\n2.5,1,3.5,26,\n",
	} {
		t.Run(name, func(t *testing.T) {
			got, told, err := ReadRecord(put(t, "r.csv", file), RecordOptions{})
			if err != nil {
				t.Fatal(err)
			}
			if d := cmp.Diff(want, *got, cmpopts.EquateNaNs(), cmpopts.EquateApprox(0, 1e-12)); d != "" {
				t.Errorf("%s\n%s", d, strings.Join(told.Lines, "\n"))
			}
		})
	}
}

func TestRecordMap(t *testing.T) {
	col := func(p int, u string) record.Column { return record.Column{Position: p, Unit: u} }
	nan := math.NaN()
	for _, c := range []struct {
		name, file string
		o          RecordOptions
		want       record.Record
	}{
		{"repeated headings, by position", "V,I,V,s\n9,1,3.4,0\n9,2,3.5,1\n",
			RecordOptions{Map: &record.Map{Time: col(4, "s"), Current: col(2, "A"), Voltage: col(3, "V")}},
			record.Record{Readings: record.Readings{TimeS: []float64{0, 1}, CurrentA: []float64{1, 2}, VoltageV: []float64{3.4, 3.5}, TemperatureC: []float64{nan, nan}}}},
		{"no headings", "0 ;1;3,4\n1;2;3,5\n",
			RecordOptions{Map: &record.Map{Time: col(1, "min"), Current: col(2, "A"), Voltage: col(3, "V"), Decimal: ",", Delimiter: ";"}},
			record.Record{Readings: record.Readings{TimeS: []float64{0, 60}, CurrentA: []float64{1, 2}, VoltageV: []float64{3.4, 3.5}, TemperatureC: []float64{nan, nan}}}},
		{"rows to skip, percent, counter, Fahrenheit, charging positive", "time_s,current_a,voltage_v\n\nt,i,u,z,q,w\n0,-1,3.4,80,0,77\n1,2,3.5,79.5,-36,86\n",
			RecordOptions{Map: &record.Map{SkipRows: 2, Time: record.Column{Heading: "t"}, Current: record.Column{Heading: "i", ChargePositive: true},
				Voltage: record.Column{Heading: "u"}, SOC: record.Column{Heading: "z", Unit: "percent"},
				Charge: record.Column{Heading: "q", Unit: "As", ChargePositive: true}, Temperature: record.Column{Heading: "w", Unit: "degF"}}},
			record.Record{Readings: record.Readings{TimeS: []float64{0, 1}, CurrentA: []float64{1, -2}, VoltageV: []float64{3.4, 3.5}, TemperatureC: []float64{25, 30}},
				SOC: []float64{0.8, 0.795}, ChargeAh: []float64{0, 0.01}}},
		{"a day-first wall clock", "when,i,u\n24/3/2017 13:00:00,1,3\n25/3/2017 13:00:00,1,3\n",
			RecordOptions{Map: &record.Map{Time: record.Column{Heading: "when", Unit: "datetime"}, Current: record.Column{Heading: "i"}, Voltage: record.Column{Heading: "u"}}},
			record.Record{Readings: record.Readings{TimeS: []float64{0, 86400}, CurrentA: []float64{1, 1}, VoltageV: []float64{3, 3}, TemperatureC: []float64{nan, nan}}}},
		{"the call's sign rules", "time_s,current_a,voltage_v\n0,-1,3.4\n", RecordOptions{ChargePositive: new(true)},
			record.Record{Readings: record.Readings{TimeS: []float64{0}, CurrentA: []float64{1}, VoltageV: []float64{3.4}, TemperatureC: []float64{nan}}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			got, _, err := ReadRecord(put(t, "r.csv", c.file), c.o)
			if err != nil {
				t.Fatal(err)
			}
			c.want.Name = "r"
			if d := cmp.Diff(c.want, *got, cmpopts.EquateNaNs(), cmpopts.EquateApprox(0, 1e-12)); d != "" {
				t.Error(d)
			}
		})
	}
}

func TestRecordRefused(t *testing.T) {
	const heads = "time_s,current_a,voltage_v\n"
	for _, c := range []struct {
		name, file string
		m          *record.Map
		want       string
	}{
		{"empty", "", nil, "the file is empty"},
		{"only headings", heads, nil, "no rows"},
		{"no voltage", "time_s,current_a\n0,1\n", nil, `no column for voltage among "time_s", "current_a"`},
		{"no current", "time_s,voltage_v\n0,1\n", nil, "no column for current"},
		{"no time", "current_a,voltage_v\n0,1\n", nil, "no column for time"},
		{"one meaning twice", "Time(s),I [A],Current(A),Voltage(V)\n0,1,1,3\n", nil, `columns 2 ("I [A]") and 3 ("Current(A)") both mean current`},
		{"the same heading twice", "t,I,V,V\n0,1,3,3\n", nil, "both mean voltage"},
		{"current never", heads + "0,,3\n1,,3\n", nil, `column "current_a" (current) has no value in any of 2 rows`},
		{"backward", heads + "0,1,3\n2,1,3\n# pause\n1,1,3\n", nil, "line 5: time goes back from 2 s to 1 s"},
		{"no number", heads + "0,1,3\n1,1,high\n", nil, `line 3, column "voltage_v": "high" is not a number`},
		{"infinite", heads + "0,1,inf\n", nil, `"inf" is not a number`},
		{"hexadecimal", heads + "0,1,0x1p4\n", nil, `"0x1p4" is not a number`},
		{"decimal comma in points", "time_s;current_a;voltage_v\n0;1.5;3\n1;1,5;3\n", nil, `"1,5" is not a number (it would be with the decimal mark ","`},
		{"short row", heads + "0,1\n", nil, "line 2 has 2 fields, the headings are 3"},
		{"long row", heads + "0,1,3,5\n", nil, "line 2 has 4 fields, the headings are 3"},
		{"no time value", heads + ",1,3\n", nil, "line 2 has no time"},
		{"UTF-16", "\xff\xfet\x00i\x00", nil, "UTF-16"},
		{"binary", "\x7fELF\x00\x01", nil, "zero byte"},
		{"percent as fraction", "time_s,current_a,voltage_v,soc\n0,1,3,80\n", nil, "soc is 80, which is no fraction"},
		{"unknown unit", heads + "0,1,3\n", &record.Map{Voltage: record.Column{Heading: "voltage_v", Unit: "kV"}}, `voltage: unit is "kV"; V, mV are allowed`},
		{"mapped column absent", heads + "0,1,3\n", &record.Map{Voltage: record.Column{Heading: "voltage"}}, `"voltage", which the file does not have; the nearest is "voltage_v"`},
		{"position beyond", heads + "0,1,3\n", &record.Map{Voltage: record.Column{Position: 4}}, "voltage is column 4, but the file has 3 columns"},
		{"mapped heading twice", "t,I,V,V\n0,1,3,3\n", &record.Map{Voltage: record.Column{Heading: "V"}}, "columns 3 and 4 both have that heading"},
		{"one column for two", "t,I,V\n0,1,3\n", &record.Map{Voltage: record.Column{Heading: "V"}, Current: record.Column{Position: 3}}, `current and voltage are both column "V"`},
		{"bad date", "when,i,u\n2017-13-01 00:00:00,1,3\n", &record.Map{Time: record.Column{Heading: "when", Unit: "datetime"}}, "is no date and time"},
		{"damaged gzip", "\x1f\x8b\x08broken", nil, "gzip"},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := put(t, "r.csv", c.file)
			_, _, err := ReadRecord(path, RecordOptions{Map: c.m})
			if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), path) {
				t.Errorf("got %v\nwant %s", err, c.want)
			}
		})
	}
}

func TestRecordRepair(t *testing.T) {
	file := "time_s,current_a,voltage_v\n0,1,3\n2,1,3\n1,1,3\n2,1,3\n,1,3\n3,x,3\n4,1\n5,1,3\n"
	got, told, err := ReadRecord(put(t, "r.csv", file), RecordOptions{Repair: true})
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff([]float64{0, 2, 2, 5}, got.TimeS); d != "" || told.Dropped != 4 {
		t.Error(d, told.Dropped)
	}
	if last := told.Lines[len(told.Lines)-1]; !strings.Contains(last, "4 rows left out by repair; the first: line 4: time goes back") {
		t.Error(last)
	}
}

func TestRecordGzip(t *testing.T) {
	path := filepath.Join(t.TempDir(), "night.csv.gz")
	err := WriteFile(path, func(w io.Writer) error {
		z := gzip.NewWriter(w)
		fmt.Fprint(z, "time_s,current_a,voltage_v\n0,1,3\n")
		return z.Close()
	})
	if err != nil {
		t.Fatal(err)
	}
	got, _, err := ReadRecord(path, RecordOptions{})
	if err != nil || got.Name != "night" || got.Len() != 1 {
		t.Fatalf("%+v %v", got, err)
	}
}
