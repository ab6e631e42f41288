package store

import (
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"soctrial/plant/record"
)

// bigRecord makes a record of about 20 MB with the headings of a tester.
func bigRecord(b *testing.B) (path string, sizeBytes int64) {
	path = filepath.Join(b.TempDir(), "big.csv")
	err := WriteFile(path, func(w io.Writer) error {
		fmt.Fprintln(w, "TimeStamp,Voltage,Current,Ah,Wh,Power,Battery_Temp_degC,Time,Chamber_Temp_degC")
		for k := range 250000 {
			x := float64(k)
			if _, err := fmt.Fprintf(w, "3/4/2017 1:02:03 PM,%.5f,%.5f,%.5f,%.5f,%.4f,%.3f,%.3f,25\n",
				3.7+0.4*math.Sin(x/900), 5*math.Sin(x/70), -x/1e5, -x/3e4, 18*math.Sin(x/70), 25+math.Sin(x/4e3), x/10); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		b.Fatal(err)
	}
	info, err := os.Stat(path)
	if err != nil {
		b.Fatal(err)
	}
	return path, info.Size()
}

func BenchmarkReadRecordCSV(b *testing.B) {
	path, size := bigRecord(b)
	m := &record.Map{Time: record.Column{Heading: "Time"}, Current: record.Column{Heading: "Current"}, Voltage: record.Column{Heading: "Voltage"},
		Temperature: record.Column{Heading: "Battery_Temp_degC"}, Charge: record.Column{Heading: "Ah"}}
	b.SetBytes(size)
	b.ReportAllocs()
	for b.Loop() {
		if _, _, err := ReadRecord(path, RecordOptions{Map: m}); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkPlainCSV is what the reader above is measured against: the plain
// loop over encoding/csv that makes numbers of the same five columns.
func BenchmarkPlainCSV(b *testing.B) {
	path, size := bigRecord(b)
	b.SetBytes(size)
	b.ReportAllocs()
	for b.Loop() {
		f, err := os.Open(path)
		if err != nil {
			b.Fatal(err)
		}
		in := csv.NewReader(f)
		in.ReuseRecord = true
		var columns [5][]float64
		for n := 0; ; n++ {
			row, err := in.Read()
			if err == io.EOF {
				break
			}
			for i, c := range []int{7, 2, 1, 6, 3} {
				if n == 0 {
					break
				}
				x, err := strconv.ParseFloat(row[c], 64)
				if err != nil {
					b.Fatal(err)
				}
				columns[i] = append(columns[i], x)
			}
			if err != nil {
				b.Fatal(err)
			}
		}
		f.Close()
	}
}
