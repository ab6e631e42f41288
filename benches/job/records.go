package job

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"soctrial/benches/define"
	"soctrial/benches/store"
	"soctrial/plant/duty"
	"soctrial/plant/record"
)

// readRecord reads a record, through a map where one is given.
func readRecord(path, mapPath string, chargePositive, repair bool) (*record.Record, store.Recognised, error) {
	o := store.RecordOptions{Repair: repair}
	if mapPath != "" {
		m, err := define.ReadMap(mapPath)
		if err != nil {
			return nil, store.Recognised{}, wrong(err)
		}
		o.Map = m
	}
	if chargePositive {
		o.ChargePositive = &chargePositive
	}
	r, told, err := store.ReadRecord(path, o)
	return r, told, wrong(err)
}

// loadRecord reads the record of a replay, tells what was recognised in it,
// and returns its file's hash.
func loadRecord(o *ReplayOptions) (*record.Record, string, error) {
	r, told, err := readRecord(o.RecordPath, o.MapPath, o.ChargePositive, o.Repair)
	if err != nil {
		return nil, "", err
	}
	for _, line := range told.Lines {
		o.Report.warn("%s", line)
	}
	hash, err := fileHash(o.RecordPath)
	return r, hash, wrong(err)
}

// readTrace reads the trace of a leg from a file of its own: time_s with
// current_a, power_w or speed_mps; with a map, the current of a record. Times
// count from the first sample; a current that is missing is the one before it.
func readTrace(path string, m *record.Map, kind duty.Kind) (*define.Trace, error) {
	if m != nil {
		if kind != duty.Trace {
			return nil, fmt.Errorf("a map reads a record's current; a leg of kind %q takes columns time_s and speed_mps", kind)
		}
		r, _, err := store.ReadRecord(path, store.RecordOptions{Map: m})
		if err != nil {
			return nil, err
		}
		return &define.Trace{TimeS: fromZero(r.TimeS), CurrentA: held(r.CurrentA)}, nil
	}
	if kind == duty.Speed {
		c, err := store.ReadColumns(path, []string{"time_s", "speed_mps"})
		if err != nil {
			return nil, err
		}
		return &define.Trace{TimeS: fromZero(c["time_s"]), SpeedMps: c["speed_mps"]}, nil
	}
	c, err := store.ReadColumns(path, []string{"time_s", "current_a"})
	if err == nil {
		return &define.Trace{TimeS: fromZero(c["time_s"]), CurrentA: held(c["current_a"])}, nil
	}
	c, powerErr := store.ReadColumns(path, []string{"time_s", "power_w"})
	if powerErr == nil {
		return &define.Trace{TimeS: fromZero(c["time_s"]), PowerW: held(c["power_w"])}, nil
	}
	return nil, errors.Join(err, powerErr)
}

func fromZero(timeS []float64) []float64 {
	out := slices.Clone(timeS)
	for i := range out {
		out[i] -= timeS[0]
	}
	return out
}

// held puts the value before it in a missing one's place, at first 0.
func held(x []float64) []float64 {
	last := 0.0
	for i, v := range x {
		if math.IsNaN(v) {
			x[i] = last
		}
		last = x[i]
	}
	return x
}

// showRecord says what a record spans.
func showRecord(o *ShowOptions) (*Shown, error) {
	r, told, err := readRecord(o.Path, o.MapPath, o.ChargePositive, o.Repair)
	if err != nil {
		return nil, err
	}
	s := &Shown{Kind: "record", Name: r.Name}
	n := r.Len()
	s.fact("samples", "%d", n)
	s.fact("span", "%s, from %g s to %g s", duration(r.TimeS[n-1]-r.TimeS[0]), r.TimeS[0], r.TimeS[n-1])
	s.intervals(r.TimeS)
	outAh, inAh := chargeMoved(&r.Readings)
	s.fact("charge", "%.4g Ah out, %.4g Ah in, net %.4g Ah out (each current held to the next sample)", outAh, inAh, outAh-inAh)
	rows := [][]string{{"column", "least", "most", "first", "last", "missing"}}
	for _, c := range []struct {
		name string
		x    []float64
	}{{"current_a", r.CurrentA}, {"voltage_v", r.VoltageV}, {"temperature_c", r.TemperatureC}, {"soc", r.SOC}, {"charge_ah", r.ChargeAh}} {
		low, high := rangeOf(c.x)
		if math.IsNaN(low) {
			continue
		}
		missing := 0
		for _, v := range c.x {
			if math.IsNaN(v) {
				missing++
			}
		}
		rows = append(rows, []string{c.name, short3(low), short3(high), short3(c.x[0]), short3(c.x[n-1]), fmt.Sprint(missing)})
	}
	s.Tables = append(s.Tables, ShownTable{"Columns (current and charge positive on discharge)", rows})
	for _, line := range told.Lines {
		s.fact("read as", "%s", line)
	}
	if o.PicturePath != "" {
		return s, drawRecord(o.PicturePath, r)
	}
	return s, nil
}

// intervals says how far apart samples lie, and where gaps are.
func (s *Shown) intervals(timeS []float64) {
	if len(timeS) < 2 {
		return
	}
	d := make([]float64, len(timeS)-1)
	repeated := 0
	for i := range d {
		if d[i] = timeS[i+1] - timeS[i]; d[i] == 0 {
			repeated++
		}
	}
	ascending := slices.Sorted(slices.Values(d))
	usual := ascending[len(ascending)/2]
	s.fact("sample distance", "%.4g s usually, %.4g s to %.4g s; %d repeated times", usual, ascending[0], ascending[len(ascending)-1], repeated)
	gaps, widest, at := 0, 0.0, 0.0
	for i, x := range d {
		if x > 10*usual && x > 60 {
			gaps++
			if x > widest {
				widest, at = x, timeS[i]
			}
		}
	}
	if gaps > 0 {
		s.fact("gaps", "%d of over ten usual distances and a minute, the widest %s after %g s", gaps, duration(widest), at)
	}
}

// chargeMoved counts charge in both directions, each current held to the next
// sample.
func chargeMoved(r *record.Readings) (outAh, inAh float64) {
	last := 0.0
	for i := range r.TimeS {
		if i > 0 {
			ah := last * (r.TimeS[i] - r.TimeS[i-1]) / 3600
			outAh += max(ah, 0)
			inAh += max(-ah, 0)
		}
		if a := r.CurrentA[i]; !math.IsNaN(a) {
			last = a
		}
	}
	return outAh, inAh
}
