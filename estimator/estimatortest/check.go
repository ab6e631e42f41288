// Package estimatortest holds the laws every estimator must pass. A new kind
// is done when Check passes on it; what else holds for a family is tested with
// the family.
//
// Only tests import it. It simulates its own readings through cell.View, so
// that it needs neither the plant nor the sensor chain.
package estimatortest

import (
	"errors"
	"fmt"
	"math"
	"testing"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// Builder makes an estimator; it is a kind's public constructor.
type Builder func(estimator.Setup) (estimator.Estimator, error)

// Check runs the laws on what build makes of spec, over a plain cell and one
// with everything, instant and interval-mean readings, even and uneven.
func Check(t *testing.T, build Builder, spec estimator.Spec) {
	laws := []struct {
		name string
		hold func(*testing.T, *subject)
	}{
		{"a cut into blocks changes nothing", cuts},
		{"a restored state continues with the same numbers", restored},
		{"a reset estimator is as new", reset},
		{"later readings change nothing earlier", causal},
		{"Advance allocates nothing", frugal},
		{"a missing voltage leaves the prediction", gap},
		{"missing readings never give NaN", blind},
		{"reported SOC is limited, and follows the free one", limited},
		{"readings beyond all measure never give NaN", absurd},
		{"a foreign state is refused", foreign},
	}
	for _, c := range []*cell.Cell{PlainCell(), RichCell()} {
		for _, reading := range []record.CurrentReading{record.Instant, record.IntervalMean} {
			for _, even := range []bool{true, false} {
				s := &subject{build: build, spec: spec, cell: c, options: Options{Samples: 700, Reading: reading, Even: even, SOC: 0.62}}
				for _, law := range laws {
					t.Run(fmt.Sprintf("%s, %s, even %t/%s", c.Name, reading, even, law.name), func(t *testing.T) { law.hold(t, s) })
				}
			}
		}
	}
}

// subject is one case the laws are tried on.
type subject struct {
	build   Builder
	spec    estimator.Spec
	cell    *cell.Cell
	options Options
}

func (s *subject) setup() estimator.Setup {
	period := 0.0
	if s.options.Even {
		period = 1
	}
	return estimator.Setup{Spec: s.spec, Cell: s.cell, SOCStart: s.options.SOC - 0.15, PeriodS: period}
}

func (s *subject) fresh(t *testing.T) estimator.Estimator {
	t.Helper()
	e, err := s.build(s.setup())
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// readings are noisy and have gaps.
func (s *subject) readings(t *testing.T) record.Readings {
	t.Helper()
	course, err := Run(s.cell, s.options, 11)
	if err != nil {
		t.Fatal(err)
	}
	Spoil(&course.Readings, 0.02, 0.002, 12)
	return course.Readings
}

// follow advances e over in, cut at the given places.
func follow(t *testing.T, e estimator.Estimator, in record.Readings, at ...int) estimator.Estimate {
	t.Helper()
	out := estimator.MakeEstimate(in.Len())
	from := 0
	for _, to := range append(at, in.Len()) {
		i, o := in.Slice(from, to), out.Slice(from, to)
		if err := e.Advance(&i, &o); err != nil {
			t.Fatal(err)
		}
		from = to
	}
	return out
}

func columns(e *estimator.Estimate) map[string][]float64 {
	return map[string][]float64{"SOC": e.SOC, "SOCFree": e.SOCFree, "SOCStd": e.SOCStd,
		"VoltagePredictedV": e.VoltagePredictedV, "InnovationV": e.InnovationV, "InnovationStdV": e.InnovationStdV}
}

// same demands the same bits, NaN being NaN.
func same(t *testing.T, got, want estimator.Estimate) {
	t.Helper()
	if got.Len() != want.Len() {
		t.Fatalf("%d estimates, want %d", got.Len(), want.Len())
	}
	w := columns(&want)
	for name, g := range columns(&got) {
		for k := range g {
			if a, b := g[k], w[name][k]; math.Float64bits(a) != math.Float64bits(b) && (a == a || b == b) {
				t.Fatalf("%s[%d] is %v, want %v", name, k, a, b)
			}
		}
	}
}

func cuts(t *testing.T, s *subject) {
	in := s.readings(t)
	whole := follow(t, s.fresh(t), in)
	for _, at := range [][]int{{0, 0, 1}, {1, 2, 3}, {256, 512}, {100, 100, 101, 699}} {
		same(t, follow(t, s.fresh(t), in, at...), whole)
	}
	var each []int
	for k := range in.Len() {
		each = append(each, k)
	}
	same(t, follow(t, s.fresh(t), in, each...), whole)
}

func restored(t *testing.T, s *subject) {
	in := s.readings(t)
	whole := follow(t, s.fresh(t), in)
	for _, at := range []int{0, 1, 255, 640} {
		first := s.fresh(t)
		follow(t, first, in.Slice(0, at))
		state, err := first.MarshalBinary()
		if err != nil {
			t.Fatal(err)
		}
		second := s.fresh(t)
		follow(t, second, in.Slice(0, 77)) // must be forgotten
		if err := second.UnmarshalBinary(state); err != nil {
			t.Fatal(err)
		}
		same(t, follow(t, second, in.Slice(at, in.Len())), whole.Slice(at, in.Len()))
	}
}

func reset(t *testing.T, s *subject) {
	e := s.fresh(t)
	again, ok := e.(estimator.Resetter)
	if !ok {
		return // a Resetter is optional
	}
	in := s.readings(t)
	want := follow(t, e, in)
	other := s.setup()
	other.Cell, other.SOCStart, other.HysteresisStart = PlainCell(), 0.3, 0.5
	for _, setup := range []estimator.Setup{other, s.setup()} {
		if err := again.Reset(setup); err != nil {
			t.Fatal(err)
		}
		follow(t, e, in.Slice(0, 50))
	}
	if err := again.Reset(s.setup()); err != nil {
		t.Fatal(err)
	}
	same(t, follow(t, e, in), want)
	setup := s.setup()
	if n := testing.AllocsPerRun(10, func() { _ = again.Reset(setup) }); n != 0 {
		t.Errorf("Reset to the same cell allocates %g times", n)
	}
}

func causal(t *testing.T, s *subject) {
	in := s.readings(t)
	before := follow(t, s.fresh(t), in)
	const at = 301
	for k := at; k < in.Len(); k++ {
		in.CurrentA[k] += 3
		in.VoltageV[k] -= 0.1
		in.TemperatureC[k] += 5
	}
	after := follow(t, s.fresh(t), in)
	same(t, after.Slice(0, at), before.Slice(0, at))
	if after.SOCFree[in.Len()-1] == before.SOCFree[in.Len()-1] {
		t.Errorf("other readings from sample %d on changed nothing at all", at)
	}
}

func frugal(t *testing.T, s *subject) {
	in := s.readings(t)
	e := s.fresh(t)
	out := estimator.MakeEstimate(in.Len())
	from := 0
	var i record.Readings // outside, for a block handed over an interface is on the heap
	var o estimator.Estimate
	n := testing.AllocsPerRun(in.Len()/50-2, func() {
		i, o = in.Slice(from, from+50), out.Slice(from, from+50)
		if err := e.Advance(&i, &o); err != nil {
			t.Error(err)
		}
		from += 50
	})
	if n != 0 {
		t.Errorf("Advance allocates %g times a block", n)
	}
}

// gap takes all voltages away from a place on: SOC must then move by the
// charge read, by step 1 of the design, and no innovation be stated.
func gap(t *testing.T, s *subject) {
	course, err := Run(s.cell, s.options, 13)
	if err != nil {
		t.Fatal(err)
	}
	in := course.Readings
	with := follow(t, s.fresh(t), in)
	const at = 200
	for k := at; k < in.Len(); k++ {
		in.VoltageV[k] = math.NaN()
	}
	out := follow(t, s.fresh(t), in)
	same(t, out.Slice(0, at), with.Slice(0, at))
	if a, b := out.VoltagePredictedV[at], with.VoltagePredictedV[at]; !(math.Abs(a-b) <= 1e-12) && (a == a || b == b) {
		t.Errorf("predicted voltage is %v without the reading, %v with it", a, b)
	}
	for k := at; k < in.Len(); k++ {
		i := in.CurrentA[k-1]
		if in.CurrentReading == record.IntervalMean {
			i = in.CurrentA[k]
		}
		if i < 0 {
			i *= s.cell.CoulombicEfficiency
		}
		moved := out.SOCFree[k-1] - out.SOCFree[k]
		if want := i * (in.TimeS[k] - in.TimeS[k-1]) / (3600 * s.cell.CapacityAh); math.Abs(moved-want) > 1e-12 {
			t.Fatalf("SOC moved by %v at sample %d, the charge read by %v", moved, k, want)
		}
		if out.InnovationV[k] == out.InnovationV[k] || out.InnovationStdV[k] == out.InnovationStdV[k] {
			t.Fatalf("an innovation of %v ± %v without a voltage at sample %d", out.InnovationV[k], out.InnovationStdV[k], k)
		}
		if out.SOCStd[k] < out.SOCStd[k-1] {
			t.Fatalf("SOC became more certain without a voltage at sample %d", k)
		}
	}
}

func blind(t *testing.T, s *subject) {
	in := s.readings(t)
	for k := range in.TimeS {
		in.CurrentA[k], in.VoltageV[k], in.TemperatureC[k] = math.NaN(), math.NaN(), math.NaN()
	}
	e := s.fresh(t)
	out := follow(t, e, in)
	for k := range out.SOC {
		if out.SOC[k] != s.setup().SOCStart || out.SOCFree[k] != s.setup().SOCStart {
			t.Fatalf("SOC[%d] is %v (free %v) with nothing read, want the told %v", k, out.SOC[k], out.SOCFree[k], s.setup().SOCStart)
		}
	}
}

func limited(t *testing.T, s *subject) {
	in := s.readings(t)
	for k := range in.CurrentA { // over and under, far
		in.CurrentA[k] = s.cell.CapacityAh * 30 * math.Sin(float64(k)/60)
	}
	out := follow(t, s.fresh(t), in)
	stated := out.SOCStd[0] == out.SOCStd[0]
	for k, z := range out.SOCFree {
		if want := min(max(z, 0), 1); out.SOC[k] != want {
			t.Fatalf("SOC[%d] is %v, want %v limited to [0, 1]", k, out.SOC[k], z)
		}
		if has := out.SOCStd[k] == out.SOCStd[k]; has != stated {
			t.Fatalf("SOCStd[%d] is %v, SOCStd[0] is %v: a kind states it always or never", k, out.SOCStd[k], out.SOCStd[0])
		}
	}
}

func absurd(t *testing.T, s *subject) {
	const at, untouched = 120, -7.5
	for _, what := range []struct{ a, v float64 }{{0, 1e300}, {0, -1e300}, {0, math.Inf(1)}, {0, math.Inf(-1)}, {1e300, 3.5}, {math.Inf(1), 3.5}, {math.Inf(-1), math.NaN()}, {1e308, 1e308}} {
		in := s.readings(t)
		for k := at; k < in.Len(); k++ {
			in.CurrentA[k], in.VoltageV[k] = what.a, what.v
		}
		out := estimator.MakeEstimate(in.Len())
		for _, col := range columns(&out) {
			for k := range col {
				col[k] = untouched
			}
		}
		e := s.fresh(t)
		err := e.Advance(&in, &out)
		written := in.Len()
		var lost *estimator.LostError
		switch {
		case errors.As(err, &lost):
			written = lost.Sample
			if lost.TimeS != in.TimeS[lost.Sample] || lost.Sample < at || lost.Cause == "" {
				t.Errorf("%g A, %g V: %v, want a sample from %d on, its time and a cause", what.a, what.v, lost, at)
			}
			if again := e.Advance(&in, &out); again == nil {
				t.Errorf("%g A, %g V: a lost estimator went on", what.a, what.v)
			}
		case err != nil:
			t.Errorf("%g A, %g V: %v is not a LostError", what.a, what.v, err)
		}
		for k := range in.Len() {
			wrote := out.SOC[k] != untouched
			if wrote != (k < written) {
				t.Errorf("%g A, %g V: sample %d written: %t, lost at %d", what.a, what.v, k, wrote, written)
				break
			}
			if k < written && (!finite(out.SOC[k]) || !finite(out.SOCFree[k])) {
				t.Errorf("%g A, %g V: SOC[%d] is %v (free %v)", what.a, what.v, k, out.SOC[k], out.SOCFree[k])
				break
			}
			for name, col := range columns(&out) {
				if math.IsInf(col[k], 0) {
					t.Errorf("%g A, %g V: %s[%d] is %v", what.a, what.v, name, k, col[k])
				}
			}
		}
	}
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func foreign(t *testing.T, s *subject) {
	in := s.readings(t)
	e := s.fresh(t)
	want := follow(t, e, in.Slice(0, 300))
	state, err := e.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	e = s.fresh(t)
	version := append([]byte(nil), state...)
	version[8]++
	for name, bad := range map[string][]byte{"nothing": nil, "a text": []byte("state of charge"), "a part": state[:len(state)-8],
		"a byte more": append(append([]byte(nil), state...), 0), "another kind": estimator.PackState("no such kind", []float64{1}),
		"another version": version, "only a head": state[:9]} {
		if e.UnmarshalBinary(bad) == nil {
			t.Errorf("%s was restored as a state", name)
		}
	}
	same(t, follow(t, e, in.Slice(0, 300)), want) // and left it alone
}
