package duty_test

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant/duty"
)

func current(a, durationS float64) duty.Leg {
	l := leg(duty.Current)
	l.CurrentA, l.DurationS = a, durationS
	return l
}

// drawLegs draws legs of current, traces and nested groups, without stops.
func drawLegs(t *rapid.T, depth int) []duty.Leg {
	var out []duty.Leg
	for range rapid.IntRange(1, 3).Draw(t, "legs") {
		l := current(float64(rapid.IntRange(-9, 9).Draw(t, "a")), float64(rapid.IntRange(1, 50).Draw(t, "s")))
		switch k := rapid.IntRange(0, 3).Draw(t, "kind"); {
		case k == 0 && depth < 3:
			l = leg(duty.Group)
			l.Legs = drawLegs(t, depth+1)
			if rapid.Bool().Draw(t, "cap") {
				l.DurationS = float64(rapid.IntRange(1, 80).Draw(t, "cap s"))
			}
		case k == 1:
			l = leg(duty.Trace)
			at := 0.0
			for range rapid.IntRange(2, 6).Draw(t, "points") {
				l.TimeS, l.TraceA = append(l.TimeS, at), append(l.TraceA, float64(rapid.IntRange(-9, 9).Draw(t, "a")))
				at += float64(rapid.IntRange(0, 9).Draw(t, "gap"))
			}
			l.TimeS, l.TraceA = append(l.TimeS, at+1), append(l.TraceA, 3)
			if rapid.Bool().Draw(t, "longer or shorter") {
				l.DurationS = float64(rapid.IntRange(1, 60).Draw(t, "trace s"))
			}
		}
		l.Repeat = rapid.IntRange(1, 3).Draw(t, "repeat")
		out = append(out, l)
	}
	return out
}

// expand lists what legs ask for each second, by plain recursion.
func expand(legs []duty.Leg) []float64 {
	var out []float64
	for _, l := range legs {
		var pass []float64
		switch l.Kind {
		case duty.Current:
			for range int(l.DurationS) {
				pass = append(pass, l.CurrentA)
			}
		case duty.Trace:
			end := l.TimeS[len(l.TimeS)-1]
			if !math.IsNaN(l.DurationS) {
				end = l.DurationS
			}
			for s := range int(end) {
				v := 0.0
				for k, at := range l.TimeS {
					if at <= float64(s) {
						v = l.TraceA[k]
					}
				}
				pass = append(pass, v)
			}
		case duty.Group:
			pass = expand(l.Legs)
			if !math.IsNaN(l.DurationS) && int(l.DurationS) < len(pass) {
				pass = pass[:int(l.DurationS)]
			}
		}
		for range max(1, l.Repeat) {
			out = append(out, pass...)
		}
	}
	return out
}

func TestCursorWalksWhatTheLegsSay(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := &duty.Duty{Legs: drawLegs(t, 0)}
		want := expand(d.Legs)
		p, err := duty.Compile(d, 5)
		if err != nil {
			t.Fatal(err)
		}
		if total, exact := p.TotalS(); !exact || total != float64(len(want)) {
			t.Fatalf("lasts %g s (%t), want %d", total, exact, len(want))
		}
		c := p.Start()
		for s, v := range want {
			for c.Demand().EndS <= float64(s) {
				c.Next()
			}
			if c.Done() || c.Demand().Value != v {
				t.Fatalf("%d s: %+v (done %t), want %g", s, c.Demand(), c.Done(), v)
			}
		}
		for !c.Done() && c.Demand().EndS <= float64(len(want)) {
			c.Next()
		}
		if !c.Done() {
			t.Fatalf("goes on after %d s: %+v", len(want), c.Demand())
		}
		// many at a time
		c = p.Start()
		for s := 0; s < len(want); {
			for c.Demand().EndS <= float64(s)+1e-12 {
				c.Next()
			}
			room := make([]float64, rapid.IntRange(1, 20).Draw(t, "room"))
			n := c.Currents(room, int64(s), 1, 1e-12)
			if n == 0 {
				t.Fatalf("%d s: nothing told", s)
			}
			for k, v := range room[:n] {
				if s+k >= len(want) || v != want[s+k] {
					t.Fatalf("%d s: %g told", s+k, v)
				}
			}
			s += n
		}
	})
}

// Where changes do not lie on samples, Currents stops short of them.
func TestCurrentsStopsAtChangesBetweenSamples(t *testing.T) {
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{current(1, 3.5), current(2, 3)}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	c := p.Start()
	room := make([]float64, 10)
	if n := c.Currents(room, 0, 1, 1e-12); n != 3 {
		t.Errorf("%d samples told, want 3: the fourth has a change inside", n)
	}
}

func TestLeaveEndsRepeatsAndKeepsDepths(t *testing.T) {
	inner := current(4, 10)
	inner.Repeat, inner.UntilSOC = 100, 0.5
	g := leg(duty.Group)
	g.Repeat, g.UntilVoltageV = 7, 3
	g.Legs = []duty.Leg{inner, current(-1, 5)}
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{g, current(9, 2)}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	c := p.Start()
	if c.Entered() != 0 || len(c.Stops()) != 2 || c.Stops()[0].Quantity != duty.StopVoltage || c.Stops()[0].Depth != 0 ||
		c.Stops()[0].Side != duty.SideAsBegun || c.Stops()[1].Depth != 1 || c.Stops()[1].Side != duty.SideFalling {
		t.Fatalf("at the start: entered %d, stops %+v", c.Entered(), c.Stops())
	}
	c.Next()
	if c.Entered() != -1 || c.Demand().EndS != 20 {
		t.Errorf("a repeat of the same leg: entered %d, %+v", c.Entered(), c.Demand())
	}
	c.Leave(1, 13.5)
	if c.Entered() != 1 || c.Demand().Value != -1 || c.Demand().EndS != 18.5 || len(c.Stops()) != 1 {
		t.Errorf("after leaving the inner leg: entered %d, %+v", c.Entered(), c.Demand())
	}
	c.Next() // the group's second pass
	if c.Entered() != 1 || c.Demand().Value != 4 || c.Demand().EndS != 28.5 {
		t.Errorf("second pass: entered %d, %+v", c.Entered(), c.Demand())
	}
	c.Leave(0, 21)
	if c.Entered() != 0 || c.Demand().Value != 9 || c.Demand().EndS != 23 || c.Leg() != 2 {
		t.Errorf("after leaving the group: entered %d, %+v", c.Entered(), c.Demand())
	}
	c.Next()
	if !c.Done() {
		t.Error("not done")
	}
	c.Next()
	c.Leave(0, 50)
	if !c.Done() {
		t.Error("done is not for ever")
	}
}

// A million passes of a tenth of a second end where multiplication says.
func TestManyPassesDoNotDrift(t *testing.T) {
	l := leg(duty.Trace)
	l.TimeS, l.TraceA, l.Repeat = []float64{0, 0.03, 0.1}, []float64{1, -1, 0}, 1_000_000
	steps := 0
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{l}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	end := 0.0
	for c := p.Start(); !c.Done(); c.Next() {
		end = c.Demand().EndS
		steps++
	}
	if steps != 2_000_000 || math.Abs(end-1e5) > 1e-9 {
		t.Errorf("%d demands to %.12g s", steps, end)
	}
}

func TestCursorsAllocateNothing(t *testing.T) {
	l := leg(duty.Trace)
	for k := range 1000 {
		l.TimeS, l.TraceA = append(l.TimeS, float64(k)), append(l.TraceA, float64(k%7))
	}
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{l}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	if n := testing.AllocsPerRun(10, func() {
		for c := p.Start(); !c.Done(); c.Next() {
			_ = c.Demand()
		}
	}); n != 0 {
		t.Errorf("%g allocations", n)
	}
}
