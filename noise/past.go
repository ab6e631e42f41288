package noise

import "math"

// past is a delay of recorded readings at uneven times: it remembers those
// that exist, as far back as the delay.
type past struct {
	delayS float64 // 0: no delay
	timeS  []float64
	value  []float64
	head   int // the last reading at or before where we looked last

	chargeAs float64 // moved since the first reading
	firstA   float64 // the first reading, which flowed before it too
	meanA    float64 // the last mean given
}

func (p *past) reset(delayS float64) {
	*p = past{delayS: delayS, timeS: p.timeS[:0], value: p.value[:0]}
}

// remember adds a reading, the latest.
func (p *past) remember(timeS, value float64) {
	if p.head > 256 && p.head > len(p.timeS)/2 { // let go of what lies behind
		p.timeS = p.timeS[:copy(p.timeS, p.timeS[p.head:])]
		p.value = p.value[:copy(p.value, p.value[p.head:])]
		p.head = 0
	}
	p.timeS, p.value = append(p.timeS, timeS), append(p.value, value)
}

// seek puts head at the last reading at or before timeS, or at the first.
// Times never go back.
func (p *past) seek(timeS float64) {
	for p.head+1 < len(p.timeS) && p.timeS[p.head+1] <= timeS {
		p.head++
	}
}

// line returns the value at timeS, straight between readings, flat outside.
func (p *past) line(timeS float64) float64 {
	p.seek(timeS)
	h := p.head
	if h+1 == len(p.timeS) || timeS <= p.timeS[h] {
		return p.value[h]
	}
	part := (timeS - p.timeS[h]) / (p.timeS[h+1] - p.timeS[h])
	return p.value[h] + part*(p.value[h+1]-p.value[h])
}

// held writes to out the reading that held at each sample's time less the
// delay. A missing reading stays missing.
func (p *past) held(timeS, in, out []float64) {
	for k, v := range in {
		out[k] = v
		if !math.IsNaN(v) {
			p.remember(timeS[k], v)
			// A rounded difference must not fall short of the sample it means.
			p.seek(timeS[k] - p.delayS + 1e-12*(math.Abs(timeS[k])+p.delayS))
			out[k] = p.value[p.head]
		}
	}
}

// linear does the same for what runs straight between readings.
func (p *past) linear(timeS, in, out []float64) {
	for k, v := range in {
		out[k] = v
		if !math.IsNaN(v) {
			p.remember(timeS[k], v)
			out[k] = p.line(timeS[k] - p.delayS)
		}
	}
}

// mean does the same for means over the interval since the sample before,
// which was at beforeS for the first of the block: from the charge moved, the
// mean over the interval as long ago as the delay. Over no time at all the mean
// is that of the sample before.
func (p *past) mean(timeS, in, out []float64, beforeS float64) {
	for k, v := range in {
		out[k] = v
		if math.IsNaN(v) {
			beforeS = timeS[k]
			continue
		}
		if n := len(p.timeS); n == 0 {
			p.firstA, p.meanA = v, v
		} else {
			p.chargeAs += v * (timeS[k] - p.timeS[n-1])
		}
		p.remember(timeS[k], p.chargeAs)
		if to, from := timeS[k]-p.delayS, beforeS-p.delayS; to > from {
			q := p.charge(from)
			p.meanA = (p.charge(to) - q) / (to - from)
		}
		out[k] = p.meanA
		beforeS = timeS[k]
	}
}

// charge returns the charge moved by timeS since the first reading.
func (p *past) charge(timeS float64) float64 {
	q := p.line(timeS)
	if first := p.timeS[p.head]; timeS < first {
		q += p.firstA * (timeS - first)
	}
	return q
}
