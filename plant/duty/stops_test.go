package duty_test

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"soctrial/plant/duty"
)

// event is a demand's beginning on a walk with stops.
type event struct{ atS, value, endS float64 }

// Legs that follow one without an end of its own count from where its stop was
// met, each of them.
func TestLegsAfterAStopCountFromIt(t *testing.T) {
	open := current(1, nan)
	open.UntilSOC = 0.5
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{open, current(2, 10), current(3, 10), open, current(4, 5), current(5, 5)}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	if total, exact := p.TotalS(); exact || !math.IsInf(total, 1) {
		t.Errorf("TotalS: %g, %t", total, exact)
	}
	c := p.Start()
	c.Leave(0, 7)
	var got []event
	at := 7.0
	for !c.Done() {
		m := c.Demand()
		got = append(got, event{at, m.Value, m.EndS})
		at = m.EndS
		if math.IsInf(at, 1) {
			at = 40
			c.Leave(0, at)
			continue
		}
		c.Next()
	}
	want := []event{{7, 2, 17}, {17, 3, 27}, {27, 1, math.Inf(1)}, {40, 4, 45}, {45, 5, 50}}
	if len(got) != len(want) {
		t.Fatalf("%+v, want %+v", got, want)
	}
	for k := range want {
		if got[k] != want[k] {
			t.Errorf("demand %d: %+v, want %+v", k, got[k], want[k])
		}
	}
}

// leaving is a naive walk of legs in which the n-th demand (from 0) of the walk
// meets a stop of the leg at depth after half of its time.
type leaving struct {
	at, depth int
	seen      int
	nowS      float64
	out       []event
}

// walk runs legs at a depth and returns the depth of the leg that was left, or
// -1.
func (w *leaving) walk(legs []duty.Leg, depth int) int {
	for i := range legs {
		l := &legs[i]
		for range max(1, l.Repeat) {
			left := -1
			if l.Kind == duty.Group {
				left = w.walk(l.Legs, depth+1)
			} else {
				end := w.nowS + l.DurationS
				w.out = append(w.out, event{w.nowS, l.CurrentA, end})
				if w.seen == w.at {
					end = (w.nowS + end) / 2
					left = min(w.depth, depth)
				}
				w.seen++
				w.nowS = end
			}
			if left >= 0 && left < depth {
				return left
			}
			if left == depth {
				break
			}
		}
	}
	return -1
}

// A walk in which one stop is met anywhere equals plain recursion that breaks
// out there.
func TestLeavingAnywhereEqualsPlainRecursion(t *testing.T) {
	var draw func(t *rapid.T, depth int) []duty.Leg
	draw = func(t *rapid.T, depth int) []duty.Leg {
		var out []duty.Leg
		for range rapid.IntRange(1, 3).Draw(t, "legs") {
			l := current(float64(rapid.IntRange(-9, 9).Draw(t, "a")), float64(rapid.IntRange(1, 50).Draw(t, "s")))
			if depth < 3 && rapid.IntRange(0, 2).Draw(t, "group") == 0 {
				l = leg(duty.Group)
				l.Legs = draw(t, depth+1)
			}
			l.UntilSOC, l.Repeat = 0.5, rapid.IntRange(1, 3).Draw(t, "repeat")
			out = append(out, l)
		}
		return out
	}
	rapid.Check(t, func(t *rapid.T) {
		d := &duty.Duty{Legs: draw(t, 0)}
		w := leaving{at: rapid.IntRange(0, 20).Draw(t, "demand"), depth: rapid.IntRange(0, 3).Draw(t, "depth")}
		w.walk(d.Legs, 0)
		p, err := duty.Compile(d, 5)
		if err != nil {
			t.Fatal(err)
		}
		at, c := 0.0, p.Start()
		for k, want := range w.out {
			m := c.Demand()
			if c.Done() || m.Value != want.value || math.Abs(at-want.atS) > 1e-9 || math.Abs(m.EndS-want.endS) > 1e-9 {
				t.Fatalf("demand %d: at %g %+v (done %t), want %+v", k, at, m, c.Done(), want)
			}
			stops := c.Stops()
			for j, s := range stops {
				if s.Depth != j {
					t.Fatalf("demand %d: stops %+v, want one a depth", k, stops)
				}
			}
			if k != w.at {
				at = m.EndS
				c.Next()
				continue
			}
			at = (at + m.EndS) / 2
			c.Leave(min(w.depth, len(stops)-1), at)
		}
		if !c.Done() {
			t.Fatalf("goes on with %+v", c.Demand())
		}
	})
}

// A stop around many passes, or beside them, moves none of them: their times
// are products, not running sums.
func TestManyPassesUnderAStopDoNotDrift(t *testing.T) {
	g := leg(duty.Group)
	g.Legs, g.Repeat, g.UntilSOC = []duty.Leg{current(1, 0.1), current(-1, 0.3)}, 100_000, 0.2
	p, err := duty.Compile(&duty.Duty{Legs: []duty.Leg{g, current(2, 1)}}, 5)
	if err != nil {
		t.Fatal(err)
	}
	c, passes := p.Start(), 0
	for c.Leg() == 1 {
		if got, want := c.Demand().EndS, 0.4*float64(passes)+0.1; math.Abs(got-want) > 4e-15*(1+want) {
			t.Fatalf("pass %d: the first leg ends at %.17g s, want %.17g", passes, got, want)
		}
		c.Next()
		c.Next()
		passes++
	}
	if got := c.Demand().EndS; passes != 100_000 || math.Abs(got-40001) > 4e-15*40001 {
		t.Errorf("%d passes, the next leg ends at %.17g s", passes, got)
	}
}
