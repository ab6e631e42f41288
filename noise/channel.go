package noise

import (
	"math"

	"soctrial/plant/stream"
)

// channel is one sensor in operation. Its methods pass over a block once a
// link; links that are idle are not called.
type channel struct {
	set   Channel
	gain  float64 // 1 + gain error
	plain bool    // at most gain, offset, noise and quantum
	ideal bool    // nothing at all ahead of stuck

	noise, walk    stream.Source
	walked         float64 // where the walk is
	walking        bool    // the first sample, where it is 0, has passed
	stuck, dropout spell
	good           float64 // the last reading made when not stuck
	haveGood       bool
	phase          int // samples until the next reading
}

// spacing says how far apart the samples of a block are.
type spacing struct {
	periodS float64   // even, where dtS is nil
	dtS     []float64 // each sample after the one before, ≥ 0; the run's first is not looked at
}

func (c *channel) reset(seed uint64, set Channel, names *channelStreams) {
	*c = channel{set: set, gain: 1 + set.GainError, stuck: c.stuck, dropout: c.dropout}
	c.plain = set.WalkPerSqrtS == 0 && set.OffsetPerK == 0 && set.Range == 0
	c.ideal = c.plain && set.GainError == 0 && set.Offset == 0 && set.Noise == 0 && set.Quantum == 0
	if set.Noise > 0 {
		c.noise = stream.New(seed, names.noise)
	}
	if set.WalkPerSqrtS > 0 {
		c.walk = stream.New(seed, names.walk)
	}
	c.stuck.reset(seed, names.stuck, set.StuckShare, set.StuckS)
	c.dropout.reset(seed, names.dropout, set.DropoutShare, set.DropoutS)
}

// channelStreams names a channel's streams, once, so that a reset joins no
// strings.
type channelStreams struct{ noise, walk, stuck, dropout string }

var (
	channelNames = [...]string{"current", "voltage", "temperature"}
	streams      = [...]channelStreams{
		{"current.noise", "current.walk", "current.stuck", "current.dropout"},
		{"voltage.noise", "voltage.walk", "voltage.stuck", "voltage.dropout"},
		{"temperature.noise", "temperature.walk", "temperature.stuck", "temperature.dropout"},
	}
)

// read writes to out what the channel reads of in, which may be out itself.
// aboveRefK is T - T_ref; work is scratch; all have one length.
func (c *channel) read(in, aboveRefK, out, work []float64, dt spacing) {
	if len(in) == 0 {
		return
	}
	switch {
	case c.ideal:
		copy(out, in)
	case c.plain && c.set.Noise > 0 && c.set.Quantum > 0:
		c.noise.Normals(work)
		c.readPlain(in, out, work)
	default:
		c.readLinks(in, aboveRefK, out, work, dt)
	}
	if c.set.StuckShare > 0 {
		c.stick(out, dt)
	}
	if c.set.DropoutShare > 0 {
		c.drop(out, dt)
	}
	if c.set.Every > 1 {
		c.thin(out)
	}
}

// readPlain is the usual sensor in one pass.
func (c *channel) readPlain(in, out, normal []float64) {
	gain, offset, std, quantum := c.gain, c.set.Offset, c.set.Noise, c.set.Quantum
	out, normal = out[:len(in)], normal[:len(in)]
	for k, v := range in {
		v = gain*v + offset + std*normal[k]
		out[k] = math.RoundToEven(v/quantum) * quantum
	}
}

// readLinks is any sensor, a pass a link.
func (c *channel) readLinks(in, aboveRefK, out, work []float64, dt spacing) {
	gain, offset := c.gain, c.set.Offset
	for k, v := range in {
		out[k] = gain*v + offset
	}
	if c.set.WalkPerSqrtS > 0 {
		c.addWalk(out, work, dt)
	}
	if perK := c.set.OffsetPerK; perK != 0 {
		for k, t := range aboveRefK {
			out[k] += perK * t
		}
	}
	if c.set.Noise > 0 {
		c.noise.Normals(work)
		c.convert(out, work)
		return
	}
	clear(work)
	c.convert(out, work)
}

// convert is what the converter makes of out and its noise: saturated, then
// quantised. A missing value stays missing.
func (c *channel) convert(out, normal []float64) {
	std, limit, quantum := c.set.Noise, c.set.Range, c.set.Quantum
	if limit == 0 {
		limit = math.Inf(1)
	}
	normal = normal[:len(out)]
	for k, v := range out {
		v += std * normal[k]
		if v > limit {
			v = limit
		} else if v < -limit {
			v = -limit
		}
		if quantum > 0 {
			v = math.RoundToEven(v/quantum) * quantum
		}
		out[k] = v
	}
}

// addWalk adds the random walk of the offset.
func (c *channel) addWalk(out, work []float64, dt spacing) {
	from := 0
	if !c.walking {
		c.walking, from = true, 1
	}
	c.walk.Normals(work[from:])
	w, std := c.walked, c.set.WalkPerSqrtS*math.Sqrt(dt.periodS)
	for k := from; k < len(out); k++ {
		if dt.dtS != nil {
			std = c.set.WalkPerSqrtS * math.Sqrt(dt.dtS[k])
		}
		w += std * work[k]
		out[k] += w
	}
	c.walked = w
}

// stick repeats the last good reading while the channel is stuck. Between the
// readings of a channel that makes fewer, nothing is held.
func (c *channel) stick(out []float64, dt spacing) {
	every := max(c.set.Every, 1)
	reads := func(k int) bool { return (k-c.phase)%every == 0 && out[k] == out[k] }
	from := 0
	for _, r := range c.stuck.runs(len(out), dt) {
		c.remember(out, from, r.from, reads)
		for k := r.from; k < r.to; k++ {
			switch {
			case !reads(k):
			case c.haveGood:
				out[k] = c.good
			default:
				c.good, c.haveGood = out[k], true
			}
		}
		from = r.to
	}
	c.remember(out, from, len(out), reads)
}

// remember keeps the last reading of a stretch in which nothing is stuck.
func (c *channel) remember(out []float64, from, to int, reads func(int) bool) {
	for k := to - 1; k >= from; k-- {
		if reads(k) {
			c.good, c.haveGood = out[k], true
			return
		}
	}
}

// drop loses readings while the channel drops out.
func (c *channel) drop(out []float64, dt spacing) {
	for _, r := range c.dropout.runs(len(out), dt) {
		for k := r.from; k < r.to; k++ {
			out[k] = math.NaN()
		}
	}
}

// thin leaves each n-th reading.
func (c *channel) thin(out []float64) {
	for k := range out {
		if c.phase == 0 {
			c.phase = c.set.Every
		} else {
			out[k] = math.NaN()
		}
		c.phase--
	}
}
