package kalman

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant/cell"
	"soctrial/plant/record"
)

// runRich2 is run2 for a cell with hysteresis or tables over temperature. It
// stops only at a missing current or voltage, when the filter is lost and at
// the block's end; a missing temperature is the last one.
func (f *EKF) runRich2(in *record.Readings, out *estimator.Estimate, k int) (next int, why stop) {
	cur := in.CurrentA[k:]
	volt, temp := in.VoltageV[k:][:len(cur)], in.TemperatureC[k:][:len(cur)]
	soc, free, std := out.SOC[k:][:len(cur)], out.SOCFree[k:][:len(cur)], out.SOCStd[k:][:len(cur)]
	pred, inno, innoStd := out.VoltagePredictedV[k:][:len(cur)], out.InnovationV[k:][:len(cur)], out.InnovationStdV[k:][:len(cur)]

	mean := in.CurrentReading == record.IntervalMean
	m := f.model
	warm, hysteretic := m.TemperatureMatters(), m.Hysteretic
	inf := math.Inf(1)
	z, v1, v2, hyst := f.x[0], f.x[1], f.x[2], f.h
	p00, p01, p02, p11, p12, p22 := f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2]
	held := f.heldA
	var s, y float64
	j := 0
	for ; j < len(cur); j++ {
		i, volts := cur[j], volt[j]
		if x := i + volts; x != x {
			break
		}
		if mean {
			held = i
		}
		g := f.view.Segment(z)
		t := z - g.Ref
		b1, b2 := f.rise[0]*g.R[0].At(t), f.rise[1]*g.R[1].At(t)
		moved := held * f.perA[math.Float64bits(held)>>63]
		if hysteretic {
			hyst = cell.StepHysteresis(hyst, held, m.Rate, moved)
		}
		z -= moved
		v1 = f.decay[0]*v1 + b1*held
		v2 = f.decay[1]*v2 + b2*held
		held = i
		u1, u2 := b1*f.currentVarA2, b2*f.currentVarA2
		p00 += f.socVar + f.bSOC*f.bSOCVar
		p01 = p01*f.decay[0] + b1*f.bSOCVar
		p02 = p02*f.decay[1] + b2*f.bSOCVar
		p11 = p11*f.both[0][0] + b1*u1 + f.branchV
		p12 = p12*f.both[0][1] + b2*u1
		p22 = p22*f.both[1][1] + b2*u2 + f.branchV

		if c := temp[j]; warm && c == c && c != f.tempC {
			f.tempC = c
			f.view.SetTemperature(c)
		}
		g = f.view.Segment(z)
		t = z - g.Ref
		tt := t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		predicted := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - r0*i - (v1 + v2)
		h := ((g.OCV.B - i*g.R0.B) + (t+t)*(g.OCV.C-i*g.R0.C)) + 3*tt*(g.OCV.D-i*g.R0.D)
		if hysteretic {
			predicted += ((g.HalfGapV.Y + t*g.HalfGapV.B) + tt*(g.HalfGapV.C+t*g.HalfGapV.D)) * hyst
			h += ((g.HalfGapV.B + (t+t)*g.HalfGapV.C) + 3*tt*g.HalfGapV.D) * hyst
		}
		c0 := h*p00 - (p01 + p02)
		c1 := h*p01 - (p11 + p12)
		c2 := h*p02 - (p12 + p22)
		s = h*c0 + ((f.voltageVarV2 + r0*r0*f.currentVarA2) - (c1 + c2))
		is := 1 / s
		y = volts - predicted
		e := is * y
		z += c0 * e
		v1 += c1 * e
		v2 += c2 * e
		w := is * (s*is - 2)
		p00 += w * (c0 * c0)
		p01 += w * (c0 * c1)
		p02 += w * (c0 * c2)
		p11 += w * (c1 * c1)
		p12 += w * (c1 * c2)
		p22 += w * (c2 * c2)
		if !(s > 0) || !(p00 >= 0) || !(p11 >= 0) || !(p22 >= 0) || !(y*y+z*z < inf) {
			why = lost
			break
		}
		limited := z
		if limited > 1 {
			limited = 1
		} else if limited < 0 {
			limited = 0
		}
		soc[j] = limited
		free[j] = z
		std[j] = math.Sqrt(p00)
		pred[j] = predicted
		inno[j] = y
		innoStd[j] = math.Sqrt(s)
	}
	f.x[0], f.x[1], f.x[2], f.h = z, v1, v2, hyst
	f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2] = p00, p01, p02, p11, p12, p22
	f.heldA = held
	return f.leave(in, k, j, why, s, y)
}
