package estimator_test

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"soctrial/estimator"
	"soctrial/plant/cell"
)

func TestStatesKeepEveryBit(t *testing.T) {
	want := []float64{0, math.Copysign(0, -1), math.NaN(), math.Inf(-1), 0.1, math.SmallestNonzeroFloat64, 1 << 53}
	got := make([]float64, len(want))
	if err := estimator.UnpackState("ekf", estimator.PackState("ekf", want), got); err != nil {
		t.Fatal(err)
	}
	for i := range want {
		if math.Float64bits(got[i]) != math.Float64bits(want[i]) {
			t.Errorf("value %d is %v, was %v", i, got[i], want[i])
		}
	}
}

func TestStateErrorsSayWhatIsAllowed(t *testing.T) {
	good := estimator.PackState("ekf", []float64{1, 2})
	version := bytes.Clone(good)
	version[8] = 2
	long := bytes.Clone(good)
	long[9] = 200
	for _, c := range []struct {
		state  []byte
		phrase string
	}{
		{nil, "0 bytes are not a saved"}, {[]byte("PAR1PAR1PAR1"), "not a saved"}, {version, "version 2, allowed is 1"}, {long, "ends inside"},
		{estimator.PackState("coulomb", []float64{1, 2}), `"coulomb", allowed here is "ekf"`}, {good[:len(good)-1], "15 bytes of numbers, allowed here is 16"},
	} {
		values := []float64{7, 7}
		err := estimator.UnpackState("ekf", c.state, values)
		if err == nil || !strings.Contains(err.Error(), c.phrase) {
			t.Errorf("error is %v, want one with %q", err, c.phrase)
		}
		if values[0] != 7 || values[1] != 7 {
			t.Errorf("%q: values were touched", c.phrase)
		}
	}
}

// Whatever the bytes, unpacking them either fails or packs back to the same.
func FuzzUnpackState(f *testing.F) {
	f.Add(estimator.PackState("ekf", []float64{1, 2, 3}))
	f.Add([]byte("socstate\x01\x03ekf"))
	f.Fuzz(func(t *testing.T, state []byte) {
		values := make([]float64, 3)
		if estimator.UnpackState("ekf", state, values) == nil && !bytes.Equal(estimator.PackState("ekf", values), state) {
			t.Errorf("%x came back as %v", state, values)
		}
	})
}

func TestCompile(t *testing.T) {
	tau := cell.Constant(20)
	c := &cell.Cell{Name: "one", CapacityAh: 1, CoulombicEfficiency: 1, VoltageMinV: 2, VoltageMaxV: 5, TemperatureRefC: 25,
		OCV: cell.OverSOC([]float64{0, 1}, []float64{3, 4}), R0: cell.Constant(0.01), Branches: []cell.Branch{{Ohm: cell.Constant(0.02), TauS: &tau}}}
	s := estimator.Setup{Spec: estimator.Spec{Name: "x", Branches: 0}, Cell: c, PeriodS: 2}
	m, err := s.Compile()
	if err != nil || m.N != 0 || m.PeriodS != 2 {
		t.Fatalf("model has %v, error is %v; want no branches at 2 s", m, err)
	}
	s.Model = m
	if again, err := s.Compile(); again != m || err != nil {
		t.Errorf("a model given was not kept (%v)", err)
	}
	if _, err := (&estimator.Setup{Spec: estimator.Spec{Name: "x"}}).Compile(); err == nil || !strings.Contains(err.Error(), "x has neither") {
		t.Errorf("without a cell the error is %v", err)
	}
}

func TestToldValues(t *testing.T) {
	nan := math.NaN()
	for _, s := range []estimator.Setup{{SOCStart: nan}, {SOCStart: math.Inf(-1)}, {HysteresisStart: 1.5}, {HysteresisStart: nan}, {PeriodS: -1}, {PeriodS: math.Inf(1)}} {
		if err := s.Check(); err == nil || !strings.Contains(err.Error(), "allowed") {
			t.Errorf("%g, %g, %g s: error is %v", s.SOCStart, s.HysteresisStart, s.PeriodS, err)
		}
	}
	if err := (&estimator.Setup{SOCStart: 0.5, HysteresisStart: -1, PeriodS: 0}).Check(); err != nil {
		t.Error(err)
	}
}

func TestLostErrorSaysWhere(t *testing.T) {
	err := &estimator.LostError{Sample: 12, TimeS: 6, Cause: "state not finite: soc is NaN"}
	if got := err.Error(); got != "lost at sample 12 (t = 6 s): state not finite: soc is NaN" {
		t.Errorf("error reads %q", got)
	}
}
