package store

import (
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"soctrial/plant/record"
)

// RecordOptions say how a foreign record is to be read.
type RecordOptions struct {
	Map            *record.Map // nil: headings and units are recognised
	ChargePositive *bool       // overrides the sign of current and charge; nil: the map's, else positive on discharge
	// Repair leaves out rows that go back in time, have no time, or cannot be read, and
	// counts them, instead of refusing the record.
	Repair bool
}

// Recognised is what a reader took a record's columns for, and what it left out.
type Recognised struct {
	Lines   []string // for a person: heading, unit and sign of each column; what was passed over or repaired
	Dropped int      // rows left out by repair
}

// ReadRecord reads a lab or vehicle record, CSV (gzip or plain) or Parquet,
// told apart by their first bytes.
//
// Time, current and voltage must be there; temperature, soc and the charge
// counter may. A map names them by heading or position; without one obvious
// headings and units are recognised ("Voltage(V)", "Current [mA]", "time_s"),
// and two columns of one meaning are refused. A CSV's delimiter is found by looking, and
// so is a decimal comma where there is no map; comment lines (# or %), lines
// before the headings, a line of units and a byte order mark are passed over.
//
// Units become s, A, V, °C, fraction and Ah; a wall clock ("datetime") becomes
// seconds from its first value. An empty cell is NaN. Times may repeat; one that goes
// back, or is missing, is refused with its line, and so is anything that is no
// number, unless o.Repair. A record without a row, or whose current
// or voltage never has a value, is refused.
func ReadRecord(path string, o RecordOptions) (*record.Record, Recognised, error) {
	m := o.Map
	if m == nil {
		m = &record.Map{}
	}
	f, size, err := openInput(path)
	if err != nil {
		return nil, Recognised{}, err
	}
	defer f.Close()
	a := &assembler{repair: o.Repair}
	if isParquet(f, size) {
		err = withInput(path, f, size, usual, func(t *table) error { return a.fromTable(t, m, o.ChargePositive) })
	} else if err = a.fromText(f, m, o.ChargePositive); err != nil {
		err = fmt.Errorf("store: %s: %w", path, err)
	}
	if err != nil {
		return nil, Recognised{}, err
	}
	r, err := a.finish()
	if err != nil {
		return nil, Recognised{}, fmt.Errorf("store: %s: %w", path, err)
	}
	r.Name = stem(path)
	return r, a.told, nil
}

// openInput opens a file that may be read from.
func openInput(path string) (*os.File, int64, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, 0, fmt.Errorf("store: %w", err)
	}
	info, err := f.Stat()
	if err == nil && info.IsDir() {
		err = fmt.Errorf("%s is a folder; a file is needed", path)
	}
	if err != nil {
		f.Close()
		return nil, 0, fmt.Errorf("store: %w", err)
	}
	return f, info.Size(), nil
}

func isParquet(in io.ReaderAt, size int64) bool {
	var head [4]byte
	_, err := in.ReadAt(head[:], 0)
	return size >= 4 && err == nil && string(head[:]) == magic
}

// stem is a file's name without folder and endings.
func stem(path string) string {
	name := strings.TrimSuffix(filepath.Base(path), ".gz")
	return strings.TrimSuffix(name, filepath.Ext(name))
}

// assembler builds a record row by row.
type assembler struct {
	repair  bool
	told    Recognised
	columns [roles][]float64
	bound   *bindings
	clock   clockReader
	zero    time.Time // of a wall clock
	started bool
	first   error // the first row that repair left out
	missing [roles]int
	repeats int // times equal to the one before
	passed  int // blank and comment lines between the rows
}

// fromText reads a CSV file.
func (a *assembler) fromText(in io.Reader, m *record.Map, chargePositive *bool) error {
	s, err := openSheet(in, m, headingTest(m))
	if err != nil {
		return err
	}
	if a.bound, err = bind(s.heads, s.units, m, chargePositive); err != nil {
		return err
	}
	a.told.Lines = append(a.told.Lines, s.notes...)
	a.told.Lines = append(a.told.Lines, a.bound.lines...)
	if s.comma {
		a.told.Lines = append(a.told.Lines, "the decimal mark is a comma")
	}
	a.lookAtDates(s)
	for {
		fields, line, err := s.next()
		if errors.Is(err, io.EOF) {
			a.passed = s.passed
			return nil
		}
		if err == nil {
			err = a.textRow(s, fields, line)
		}
		if err = a.mend(err); err != nil {
			return err
		}
	}
}

// mend drops a bad row where rows are repaired, and keeps any other error.
func (a *assembler) mend(err error) error {
	if err == nil || !a.repair {
		return err
	}
	if _, ok := errors.AsType[*rowError](err); !ok {
		return err
	}
	if a.told.Dropped++; a.first == nil {
		a.first = err
	}
	return nil
}

func (a *assembler) lookAtDates(s *sheet) {
	c := a.bound.of[timeRole]
	if !c.unit.datetime {
		return
	}
	var sample []string
	for _, l := range s.ahead {
		if row := s.row(l.line); !skippable(l.line) && c.index < len(row) {
			sample = append(sample, row[c.index])
		}
	}
	if a.clock.look(sample) {
		a.told.Lines = append(a.told.Lines, "time: a date such as 3/4/2017 is read as month/day/year")
	}
}

func (a *assembler) textRow(s *sheet, fields [][]byte, line int) error {
	var row [roles]float64
	for r, c := range a.bound.of {
		if c == nil {
			continue
		}
		if c.index >= len(fields) {
			return &rowError{fmt.Errorf("line %d has %d fields; %s is the %dth", line, len(fields), roleNames[r], c.index+1)}
		}
		var err error
		if f := fields[c.index]; role(r) == timeRole {
			row[r], err = a.time(s, f, line, c)
		} else {
			row[r], err = s.number(f, line, c.head)
		}
		if err != nil {
			return err
		}
	}
	return a.add(row, line, "line")
}

// time reads a time stamp: a number, a span with colons, or a wall clock.
func (a *assembler) time(s *sheet, f []byte, line int, c *binding) (float64, error) {
	if c.unit.datetime {
		return a.wallClock(text(f), line, "line", c.head)
	}
	if !slices.Contains(f, ':') {
		return s.number(f, line, c.head)
	}
	x, err := span(text(f))
	if err != nil {
		return 0, &rowError{fmt.Errorf("line %d, column %q: %w", line, c.head, err)}
	}
	return x / c.unit.scale, nil // a span is in seconds whatever the unit
}

// wallClock returns seconds from the first wall clock of the record.
func (a *assembler) wallClock(s string, line int, where, head string) (float64, error) {
	if isMissing([]byte(s)) {
		return math.NaN(), nil
	}
	t, err := a.clock.date(s)
	if err != nil {
		return 0, &rowError{fmt.Errorf("%s %d, column %q: %w", where, line, head, err)}
	}
	if !a.started {
		a.zero, a.started = t, true
	}
	d := t.Sub(a.zero)
	return float64(d/time.Second) + float64(d%time.Second)/1e9, nil
}

// add appends a row, in the file's units.
func (a *assembler) add(row [roles]float64, line int, where string) error {
	for r, c := range a.bound.of {
		if c == nil {
			continue
		}
		x := c.unit.convert(row[r])
		if math.IsInf(x, 0) {
			return &rowError{fmt.Errorf("%s %d, column %q: %g is not a finite number in %s", where, line, c.head, row[r], nativeUnits[r])}
		}
		if c.flip && x != 0 {
			x = -x
		}
		row[r] = x
	}
	t := row[timeRole]
	if math.IsNaN(t) {
		return &rowError{fmt.Errorf("%s %d has no time", where, line)}
	}
	if n := len(a.columns[timeRole]); n > 0 && t < a.columns[timeRole][n-1] {
		return &rowError{fmt.Errorf("%s %d: time goes back from %g s to %g s; it may repeat but not go back (--repair leaves such rows out)", where, line, a.columns[timeRole][n-1], t)}
	}
	if z := row[socRole]; a.bound.of[socRole] != nil && math.Abs(z) > 1.5 {
		return &rowError{fmt.Errorf("%s %d: soc is %g, which is no fraction; name its unit in a map if it is percent", where, line, z)}
	}
	if n := len(a.columns[timeRole]); n > 0 && t == a.columns[timeRole][n-1] {
		a.repeats++
	}
	for r, c := range a.bound.of {
		if c != nil {
			a.columns[r] = append(a.columns[r], row[r])
			if math.IsNaN(row[r]) {
				a.missing[r]++
			}
		}
	}
	return nil
}

// finish checks the whole record and gives it.
func (a *assembler) finish() (*record.Record, error) {
	a.count()
	if a.told.Dropped > 0 {
		a.told.Lines = append(a.told.Lines, fmt.Sprintf("%d rows left out by repair; the first: %v", a.told.Dropped, a.first))
	}
	n := len(a.columns[timeRole])
	if n == 0 {
		if a.first != nil {
			return nil, fmt.Errorf("no row can be used; the first: %w", a.first)
		}
		return nil, errors.New("the record has headings but no rows")
	}
	for _, r := range []role{currentRole, voltageRole} {
		if !slices.ContainsFunc(a.columns[r], func(x float64) bool { return !math.IsNaN(x) }) {
			return nil, fmt.Errorf("column %q (%s) has no value in any of %d rows", a.bound.of[r].head, roleNames[r], n)
		}
	}
	c := &a.columns
	if c[temperatureRole] == nil {
		c[temperatureRole] = make([]float64, n)
		for i := range c[temperatureRole] {
			c[temperatureRole][i] = math.NaN()
		}
	}
	if signDoubted(c[currentRole], c[voltageRole]) {
		a.told.Lines = append(a.told.Lines, "current: the voltage rises when it does, so that it seems to be positive on charge")
	}
	return &record.Record{
		Readings: record.Readings{TimeS: c[timeRole], CurrentA: c[currentRole], VoltageV: c[voltageRole], TemperatureC: c[temperatureRole]},
		SOC:      c[socRole], ChargeAh: c[chargeRole],
	}, nil
}

// signDoubted tells whether voltage and current clearly step the same way:
// series resistance makes a cell's voltage fall when it gives more current.
func signDoubted(currentA, voltageV []float64) bool {
	var both, i2, v2 float64
	for k := 1; k < len(currentA); k++ {
		di, dv := currentA[k]-currentA[k-1], voltageV[k]-voltageV[k-1]
		if s := di * dv; !math.IsNaN(s) {
			both, i2, v2 = both+s, i2+di*di, v2+dv*dv
		}
	}
	return both > 0.3*math.Sqrt(i2*v2) && i2 > 0
}
