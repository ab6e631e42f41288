package duty_test

import (
	"encoding/binary"
	"errors"
	"math"
	"testing"

	"soctrial/plant/duty"
)

// source draws a duty from bytes; past their end all is 0.
type source struct{ b []byte }

func (s *source) byte() byte {
	if len(s.b) == 0 {
		return 0
	}
	v := s.b[0]
	s.b = s.b[1:]
	return v
}

// number gives nothing, small numbers, and any bits.
func (s *source) number() float64 {
	switch v := s.byte(); {
	case v < 96:
		return math.NaN()
	case v < 224:
		return float64(int(v)-128) / 8
	case v < 240:
		return []float64{0, -1, math.Inf(1), math.Inf(-1), 1e308, 5e-324, 1e-300, 0.5}[v%8]
	}
	var bits [8]byte
	s.b = s.b[copy(bits[:], s.b):]
	return math.Float64frombits(binary.LittleEndian.Uint64(bits[:]))
}

func (s *source) column(n int) []float64 {
	if n == 0 {
		return nil
	}
	out := make([]float64, n)
	for k := range out {
		out[k] = float64(s.byte()) / 4
		if s.byte() > 250 {
			out[k] = s.number()
		}
	}
	return out
}

func (s *source) vehicle() *duty.Vehicle {
	return &duty.Vehicle{MassKg: s.number(), RotatingMassKg: 1, AirDensityKgPerM3: 1.2, Slope: float64(int8(s.byte())), DriveEfficiency: 0.9,
		RegenerationEfficiency: 0.5, Series: int(s.byte()), Parallel: 1}
}

func (s *source) legs(depth int) []duty.Leg {
	var out []duty.Leg
	for range s.byte() % 4 {
		l := leg(append(duty.Kinds(), "", "pause")[s.byte()%11])
		for _, v := range []*float64{&l.DurationS, &l.UntilSOC, &l.UntilVoltageV, &l.UntilCurrentA, &l.UntilCRate} {
			*v = s.number()
		}
		own := map[duty.Kind][]*float64{
			duty.Current: {&l.CurrentA, &l.CRate}, duty.Power: {&l.PowerW}, duty.HoldVoltage: {&l.VoltageV}, duty.Profile: {&l.PeakPowerW, &l.CRate},
			duty.Pulses: {&l.CurrentA, &l.CRate, &l.PulseS, &l.RestS, &l.ReturnRatio, &l.SOCStep, &l.StepCRate, &l.StepRestS},
		}
		for _, v := range own[l.Kind] {
			*v = s.number()
		}
		l.Repeat = int(int8(s.byte()))
		n := int(s.byte() % 6)
		switch l.Kind {
		case duty.Pulses:
			l.Count = int(int8(s.byte()))
		case duty.Trace:
			l.TimeS, l.TraceA = s.column(n), s.column(n)
		case duty.Speed:
			l.TimeS, l.SpeedMps, l.Vehicle = s.column(n), s.column(n), s.vehicle()
		case duty.Profile:
			l.ProfileName = []string{"dst", "nedc", "hppc", "iso12405-power-pulse", ""}[s.byte()%5]
		case duty.Group:
			if depth < 12 {
				l.Legs = s.legs(depth + 1)
			}
		default:
			if n == 5 { // a stranger
				*s.any(&l) = s.number()
			}
		}
		out = append(out, l)
	}
	return out
}

func (s *source) any(l *duty.Leg) *float64 {
	all := []*float64{&l.CurrentA, &l.CRate, &l.PowerW, &l.VoltageV, &l.PulseS, &l.RestS, &l.ReturnRatio, &l.SOCStep, &l.StepCRate, &l.StepRestS, &l.PeakPowerW}
	return all[int(s.byte())%len(all)]
}

// FuzzDuty: any duty is refused with its place, or can be walked: times never
// go back, every demand is a finite number, and no walk panics.
func FuzzDuty(f *testing.F) {
	f.Add([]byte{1, 1, 200, 0, 0, 0, 0, 210, 0, 3})
	f.Add([]byte{2, 8, 0, 0, 0, 0, 0, 2, 0, 2, 1, 200, 0, 0, 0, 0, 210, 0, 3, 0, 0, 180, 0, 0, 0, 0, 1, 0, 3, 0, 200, 150, 0, 0, 0, 180, 180})
	f.Add([]byte{1, 5, 0, 150, 0, 0, 0, 9, 3, 0, 0, 8, 0, 8, 0, 1, 0, 2, 0, 3, 0})
	f.Add([]byte{1, 7, 0, 0, 0, 0, 0, 200, 0, 1, 0, 0})
	f.Add([]byte{1, 4, 0, 0, 0, 0, 0, 200, 0, 200, 200, 130, 130, 200, 130, 1, 0, 5})
	f.Fuzz(func(t *testing.T, b []byte) {
		s := source{b}
		d := &duty.Duty{Legs: s.legs(0)}
		p, err := duty.Compile(d, 5)
		if err != nil {
			var v *duty.ValueError
			if !errors.As(err, &v) || v.Key == "" || v.Found == "" || v.Allowed == "" {
				t.Fatalf("refused without a place: %v", err)
			}
			return
		}
		if total, exact := p.TotalS(); !(total > 0) || exact && math.IsInf(total, 1) {
			t.Fatalf("lasts %g s (%t)", total, exact)
		}
		p.Warnings(1)
		atS := 0.0
		c := p.Start()
		for n := 0; n < 2000 && !c.Done(); n++ {
			m := c.Demand()
			if !(m.EndS >= atS-1e-9*math.Abs(atS)) || math.IsNaN(m.Value) || math.IsInf(m.Value, 0) || c.Leg() < 1 || c.Leg() > len(d.Legs) {
				t.Fatalf("demand %d at %g s: %+v, leg %d", n, atS, m, c.Leg())
			}
			stops := c.Stops()
			if len(stops) == 0 && math.IsInf(m.EndS, 1) {
				t.Fatalf("demand %d at %g s: %+v never ends", n, atS, m)
			}
			if len(stops) > 0 && (math.IsInf(m.EndS, 1) || s.byte() > 200) {
				c.Leave(stops[int(s.byte())%len(stops)].Depth, atS)
				continue
			}
			atS = m.EndS
			c.Next()
		}
	})
}
