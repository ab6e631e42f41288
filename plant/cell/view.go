package cell

import "math"

// View reads a Model at one temperature. It remembers the interval it was last
// in, and is not to be copied once used, nor shared between goroutines.
type View struct {
	m     *Model
	seg   *Segment // the interval last used; &mixed where temperature matters
	at    int
	tempC float64
	layer int     // temperature lies from layer to layer+1
	w     float64 // how far along, beyond [0, 1] outside
	mixed Segment
}

// Bind points the view at m, at temperatureC.
func (v *View) Bind(m *Model, temperatureC float64) {
	v.m, v.at, v.layer, v.tempC = m, len(m.layers[0])/2, 0, math.NaN()
	v.seg = &m.layers[0][v.at]
	if len(m.temps) > 0 {
		v.seg = &v.mixed
		v.retemper(temperatureC)
	}
}

// SetTemperature moves the view to another temperature, °C.
func (v *View) SetTemperature(temperatureC float64) {
	if len(v.m.temps) == 0 || temperatureC == v.tempC {
		return
	}
	v.retemper(temperatureC)
}

func (v *View) retemper(temperatureC float64) {
	v.tempC = temperatureC
	x := v.m.temps
	for v.layer > 0 && temperatureC < x[v.layer] {
		v.layer--
	}
	for v.layer < len(x)-2 && temperatureC >= x[v.layer+1] {
		v.layer++
	}
	v.w = (temperatureC - x[v.layer]) * v.m.perK[v.layer]
	v.mix()
}

// Segment returns the polynomials that hold at soc, valid until the view moves.
func (v *View) Segment(soc float64) *Segment {
	if s := v.seg; soc >= s.Lo && soc < s.Hi {
		return s
	}
	return v.find(soc)
}

func (v *View) find(soc float64) *Segment {
	segs := v.m.layers[0]
	if soc != soc { // not a number: any interval will carry it on
		return v.seg
	}
	for soc < segs[v.at].Lo {
		v.at--
	}
	for soc >= segs[v.at].Hi && v.at < len(segs)-1 {
		v.at++
	}
	if len(v.m.temps) == 0 {
		v.seg = &segs[v.at]
	} else {
		v.mix()
	}
	return v.seg
}

// mix blends the two layers around the temperature, for the present interval.
func (v *View) mix() {
	m := v.m
	a, b := &m.layers[v.layer][v.at], &m.layers[v.layer+1][v.at]
	flat := min(max(v.w, 0), 1)
	s := &v.mixed
	s.Lo, s.Hi, s.Ref = a.Lo, a.Hi, a.Ref
	if m.ocvByT {
		s.OCV.mix(&a.OCV, &b.OCV, v.w)
	} else {
		s.OCV = a.OCV
	}
	s.R0.mix(&a.R0, &b.R0, flat)
	for j := range m.N {
		s.R[j].mix(&a.R[j], &b.R[j], flat)
		if !m.TauFixed[j] {
			s.Tau[j].mix(&a.Tau[j], &b.Tau[j], flat)
		}
	}
	if m.Hysteretic {
		s.HalfGapV = a.HalfGapV
	}
}

// OCVSlopeVPerK returns dOCV/dT at soc and the view's temperature.
func (v *View) OCVSlopeVPerK(soc float64) float64 {
	m := v.m
	if !m.ocvByT || len(m.temps) == 0 {
		return 0
	}
	t := soc - v.Segment(soc).Ref
	a, b := &m.layers[v.layer][v.at], &m.layers[v.layer+1][v.at]
	return (b.OCV.At(t) - a.OCV.At(t)) * m.perK[v.layer]
}

// OCV returns the open-circuit voltage at soc, V, and its slope over SOC.
func (v *View) OCV(soc float64) (voltageV, slopeV float64) {
	s := v.Segment(soc)
	t := soc - s.Ref
	return s.OCV.At(t), s.OCV.Slope(t)
}

// Tau returns branch j's time constant, s, where seg holds, t above its Ref.
func (m *Model) Tau(j int, seg *Segment, t float64) float64 {
	if m.TauFixed[j] {
		return m.TauS[j]
	}
	tau := seg.Tau[j].At(t)
	if m.farad[j] {
		tau *= seg.R[j].At(t) * m.rOverR
	}
	return tau
}
