package duty

import "math"

// frame is a leg on the way: the root of the program at the bottom, a leaf on
// top.
type frame struct {
	n           *node
	child       int // which of a group's legs is under way
	pass        int
	startS      float64 // when the leg began
	passS       float64 // when its present pass began
	capS        float64 // when a group's pass ends at the latest
	anchorS     float64 // when leg anchorChild began or, after a stop, could begin
	anchorChild int
}

// Cursor walks a Program. It is a plain value; copies walk on their own.
type Cursor struct {
	demand  Demand
	at      []float64 // the present pass's changes …
	value   []float64 // … and values
	stepS   float64   // of even changes; else 0
	k       int       // which of them holds
	passS   float64   // when the pass began
	endS    float64   // when it ends by itself
	capS    float64   // when a group around it ends it
	stops   []Stop
	entered int
	top     int // the leaf's frame; -1: done
	frames  [MaxDepth + 2]frame
}

// Start returns a cursor at the duty's beginning.
func (p *Program) Start() Cursor {
	c := Cursor{}
	c.frames[0] = frame{n: &p.root, capS: math.Inf(1)}
	c.entered = noneEntered
	c.enter(1, &p.root.children[0], 0)
	c.settleEntered()
	return c
}

const noneEntered = math.MaxInt

// Done reports whether the duty is over.
func (c *Cursor) Done() bool { return c.top < 0 }

// Demand returns what holds now.
func (c *Cursor) Demand() Demand { return c.demand }

// EndS returns when the present demand changes.
func (c *Cursor) EndS() float64 { return c.demand.EndS }

// Stops returns the active stops, outermost first. The slice is shared and not
// to be written to.
func (c *Cursor) Stops() []Stop { return c.stops }

// Entered returns the smallest depth of a leg that began with the last Start,
// Next or Leave; -1 where none did.
func (c *Cursor) Entered() int { return c.entered }

// AtLimit returns what the innermost leg that says so does at a limit.
func (c *Cursor) AtLimit() AtLimit { return c.frames[max(c.top, 0)].n.atLimit }

// Leg returns which leg of the duty is under way, from 1.
func (c *Cursor) Leg() int { return c.frames[max(c.top, 0)].n.topLeg }

// Next goes on where the present demand's time is up. Once the duty is done it
// does nothing.
func (c *Cursor) Next() {
	if c.k+1 < len(c.at) && c.demand.EndS < c.capS {
		c.k++
		c.entered = -1
		c.load()
		return
	}
	c.next()
}

// load puts value k into the demand.
func (c *Cursor) load() {
	c.demand.Value = c.value[c.k]
	end := c.endS
	if c.k+1 < len(c.at) {
		end = c.passS + c.at[c.k+1]
	}
	c.demand.EndS = min(end, c.capS)
}

func (c *Cursor) next() {
	if c.top < 0 {
		return
	}
	end := c.demand.EndS
	c.entered = noneEntered
	for i := 1; i < c.top; i++ { // a group's own end comes before its legs'
		if c.frames[i].capS <= end {
			c.passOver(i, c.frames[i].capS)
			c.settleEntered()
			return
		}
	}
	c.passOver(c.top, end)
	c.settleEntered()
}

// Leave says that a stop of the leg at depth was met at atS: that leg is over,
// with all its repeats.
func (c *Cursor) Leave(depth int, atS float64) {
	if c.top < 0 || depth+1 > c.top {
		return
	}
	c.entered = noneEntered
	c.over(depth+1, atS, false)
	c.settleEntered()
}

func (c *Cursor) settleEntered() {
	if c.entered == noneEntered {
		c.entered = -1
	}
}

// passOver ends the present pass of frame i at endS.
func (c *Cursor) passOver(i int, endS float64) {
	f := &c.frames[i]
	f.pass++
	if f.pass >= f.n.repeat {
		c.over(i, endS, f.n.regular)
		return
	}
	start := endS
	if f.n.regular {
		// from the leg's start, so that many passes do not drift
		start = f.startS + float64(f.pass)*f.n.eachS
	}
	c.begin(i, start)
}

// begin starts a pass of frame i.
func (c *Cursor) begin(i int, startS float64) {
	f := &c.frames[i]
	f.passS, f.child, f.anchorS, f.anchorChild = startS, 0, startS, 0
	f.capS = math.Inf(1)
	if i > 0 {
		f.capS = c.frames[i-1].capS
	}
	if f.n.kind == Group {
		f.capS = min(f.capS, startS+f.n.passS)
		c.enter(i+1, &f.n.children[0], startS)
		return
	}
	c.top = i
	c.at, c.value, c.stepS, c.k = f.n.at, f.n.value, f.n.stepS, 0
	c.passS, c.endS, c.capS = startS, startS+f.n.passS, f.capS
	c.stops = f.n.stops
	c.demand.Quantity = f.n.quantity
	c.load()
}

// enter begins leg n in frame i.
func (c *Cursor) enter(i int, n *node, startS float64) {
	c.frames[i] = frame{n: n, startS: startS}
	c.entered = min(c.entered, i-1)
	c.begin(i, startS)
}

// over ends the leg in frame i; full says that it took all its totalS.
func (c *Cursor) over(i int, endS float64, full bool) {
	if i == 0 {
		c.top, c.stops = -1, nil
		c.demand = Demand{EndS: math.Inf(1)}
		return
	}
	p := &c.frames[i-1]
	p.child++
	if p.child >= len(p.n.children) {
		c.passOver(i-1, endS)
		return
	}
	start := endS
	if full {
		start = p.anchorS + (p.n.offset[p.child] - p.n.offset[p.anchorChild])
	} else {
		p.anchorS, p.anchorChild = endS, p.child
	}
	c.enter(i, &p.n.children[p.child], start)
}

// Currents tells at once what a current demand holds at consecutive samples: it
// fills dst from sample number on, samples at number·periodS, for as long as
// changes lie on samples, to within tolS, and belong to the present pass of one
// leg. It returns how many samples it filled in. The cursor must stand at the
// present sample's demand; it is left at the demand of the sample after the
// last one filled in, or at one whose time is up there.
func (c *Cursor) Currents(dst []float64, number int64, periodS, tolS float64) int {
	if c.top < 0 || c.demand.Quantity != CurrentDemand {
		return 0
	}
	at, k := c.at, c.k
	value := c.value[:len(at)]
	passS, capS, last := c.passS, c.capS, min(c.endS, c.capS)
	n := 0
	// Changes as far apart as samples, in step with them: all but the last at once.
	if all := min(len(dst), len(at)-1-k); all > 0 && c.stepS == periodS && passS+at[k+all] < last &&
		math.Abs(passS+at[k]-float64(number)*periodS) <= tolS/2 {
		n = copy(dst, value[k:k+all])
		k += n
	}
	for n < len(dst) && k < len(at) {
		next := float64(number+int64(n)+1) * periodS
		end, more := last, false
		if k+1 < len(at) {
			if e := passS + at[k+1]; e < capS {
				end, more = e, true
			}
		}
		if end < next-tolS {
			break
		}
		dst[n] = value[k]
		n++
		if end <= next+tolS {
			if !more {
				break
			}
			k++
		}
	}
	if k != c.k {
		c.k = k
		c.load()
	}
	c.entered = -1
	return n
}
