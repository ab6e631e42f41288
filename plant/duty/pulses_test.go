package duty_test

import (
	"encoding/csv"
	"fmt"
	"log"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"soctrial/plant/duty"
	"soctrial/testdata"
)

// The full Hybrid Pulse Power Characterization test of DOE/ID-11069: nine
// times a tenth of the capacity taken at C/3, an hour's rest and the pulses.
func ExampleCompile_hybridPulseTest() {
	step := duty.NewLeg(duty.Current)
	step.CRate, step.DurationS = 1.0/3, 0.1*3*3600
	rest := duty.NewLeg(duty.Rest)
	rest.DurationS = 3600
	pulses := duty.NewLeg(duty.Profile)
	pulses.ProfileName, pulses.CRate = "hppc", 2
	test := duty.NewLeg(duty.Group)
	test.Legs, test.Repeat, test.UntilVoltageV = []duty.Leg{step, rest, pulses}, 9, 2.6

	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{test}}, 4.8)
	if err != nil {
		log.Fatal(err)
	}
	c := p.Start()
	for range 5 { // of 45 demands
		fmt.Printf("%4.1f A until %g s\n", c.Demand().Value, c.Demand().EndS)
		c.Next()
	}
	longestS, _ := p.TotalS()
	fmt.Printf("at most %g s\n", longestS)
	// Output:
	//  1.6 A until 1080 s
	//  0.0 A until 4680 s
	//  9.6 A until 4690 s
	//  0.0 A until 4730 s
	// -7.2 A until 4740 s
	// at most 42660 s
}

// rules reads hppc_sequence_rules.csv: what public pages say of the sequence.
func rules(t *testing.T) map[string]string {
	t.Helper()
	f, err := os.Open(testdata.Reference(t, "hppc_sequence_rules.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]string{}
	for _, r := range rows[1:] {
		out[r[0]] = r[1]
	}
	return out
}

func number(t *testing.T, text string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(text, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// The same test as one pulses leg: the spacing and the rests of the published
// rules, and as much charge as they say.
func TestHybridPulseTest(t *testing.T) {
	rule := rules(t)
	step := number(t, rule["depth-of-discharge spacing between pulse profiles"]) / 100
	restS := number(t, rule["rest before each pulse profile"]) * 3600
	l := leg(duty.Pulses)
	l.CRate, l.PulseS, l.RestS, l.Count, l.ReturnRatio = 1, 10, 40, 9, 0.75
	l.SOCStep, l.StepCRate, l.StepRestS = step, 1.0/3, restS
	steps := walk(t, &duty.Duty{Legs: []duty.Leg{l}}, 5)
	var moved float64
	for k, s := range steps {
		if math.Abs(s.value-5.0/3) > 1e-12 {
			continue
		}
		moved += s.value * (s.endS - s.fromS) / 3600 / 5
		if next := steps[k+1]; next.value != 0 || math.Abs(next.endS-next.fromS-3600) > 1e-9 {
			t.Errorf("after the step at %g s: %+v, want an hour's rest", s.fromS, next)
		}
	}
	if math.Abs(moved-0.8) > 1e-12 { // between nine groups lie eight steps
		t.Errorf("steps move %g of the capacity", moved)
	}
	if end := steps[len(steps)-1].endS; math.Abs(end-(9*100+8*(0.1*3*3600+3600))) > 1e-9 {
		t.Errorf("lasts %g s", end)
	}
}

// ISO 12405 tests at stated levels of SOC; by its own figure, 108 s at C/3 are
// 1 %: from the first level to the next.
func TestISOPulseTestSteps(t *testing.T) {
	rule := rules(t)
	levels := strings.Split(rule["ISO 12405 SOC levels for pulse test"], ";")
	down := number(t, levels[0]) - number(t, levels[1])
	l := leg(duty.Pulses)
	l.CurrentA, l.PulseS, l.RestS, l.Count = -10, 18, 40, 2
	l.SOCStep, l.StepCRate, l.StepRestS = down/100, 1.0/3, 60*number(t, rule["ISO 12405 rest after each C/3 SOC adjustment"])
	want := []step{{0, -10, 0, 18}, {0, 0, 18, 58}, {0, -1, 58, 58 + 108*down}, {0, 0, 58 + 108*down, 58 + 108*down + 1800},
		{0, -10, 1858 + 108*down, 1876 + 108*down}, {0, 0, 1876 + 108*down, 1916 + 108*down}} // pulses of charge step by charge
	got := walk(t, &duty.Duty{Legs: []duty.Leg{l}}, 3)
	if len(got) != len(want) {
		t.Fatalf("%+v, want %+v", got, want)
	}
	for k, w := range want {
		if g := got[k]; math.Abs(g.value-w.value) > 1e-12 || math.Abs(g.fromS-w.fromS) > 1e-9 || math.Abs(g.endS-w.endS) > 1e-9 {
			t.Errorf("%d: %+v, want %+v", k, g, w)
		}
	}
}

// What is over within a sample is told once a leg, with key and values.
func TestWarnings(t *testing.T) {
	p := leg(duty.Pulses)
	p.CurrentA, p.PulseS, p.RestS, p.Count = 2, 0.5, 100, 4
	short := current(1, 0.25)
	tr := leg(duty.Trace)
	tr.TimeS, tr.TraceA = []float64{0, 1, 1.25, 1.75, 3}, []float64{1, 2, 3, 4, 0}
	g := leg(duty.Group)
	g.Legs, g.Repeat = []duty.Leg{current(1, 5), tr}, 3
	dst := profile("dst")
	dst.PeakPowerW = 40
	open := current(1, nan)
	open.UntilSOC = 0.5
	prog, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{p, short, g, dst, open}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	want := []string{
		"leg[0].pulse_s is 0.5, shorter than the sample period 1 s",
		"leg[1] lasts 0.25 s, shorter than the sample period 1 s",
		"leg[2].leg[1]: 2 of 4 values hold for a time shorter than the sample period 1 s, the shortest for 0.25 s from 1 s on",
	}
	got := prog.Warnings(1)
	if len(got) != len(want) {
		t.Fatalf("%q", got)
	}
	for k := range want {
		if !strings.HasPrefix(got[k], want[k]+": ") {
			t.Errorf("%q, want %q …", got[k], want[k])
		}
	}
	if got := prog.Warnings(0.25); got != nil {
		t.Errorf("at 0.25 s: %q", got)
	}
}
