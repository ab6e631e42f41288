package kalman

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant/record"
)

// run1 is run2 for one branch.
func (f *EKF) run1(in *record.Readings, out *estimator.Estimate, k int) (next int, why stop) {
	cur := in.CurrentA[k:]
	volt := in.VoltageV[k:][:len(cur)]
	soc, free, std := out.SOC[k:][:len(cur)], out.SOCFree[k:][:len(cur)], out.SOCStd[k:][:len(cur)]
	pred, inno, innoStd := out.VoltagePredictedV[k:][:len(cur)], out.InnovationV[k:][:len(cur)], out.InnovationStdV[k:][:len(cur)]

	mean := in.CurrentReading == record.IntervalMean
	inf := math.Inf(1)

	z, v1 := f.x[0], f.x[1]
	p00, p01, p11 := f.p[0][0], f.p[0][1], f.p[1][1]
	held := f.heldA
	g := f.view.Segment(z)
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
		// predict
		if !(z >= g.Lo && z < g.Hi) {
			why = leftInterval
			break
		}
		after := z - held*f.perA[math.Float64bits(held)>>63]
		if !(after >= g.Lo && after < g.Hi) {
			break
		}
		t := z - g.Ref
		tt := t * t
		b1 := f.rise[0] * ((g.R[0].Y + t*g.R[0].B) + tt*(g.R[0].C+t*g.R[0].D))
		z = after
		v1 = f.decay[0]*v1 + b1*held
		held = i
		p00 += f.socVar
		p01 *= f.decay[0]
		p11 = p11*f.both[0][0] + f.branchV

		// update
		t = z - g.Ref
		tt = t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		predicted := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - r0*i - v1
		h := ((g.OCV.B - i*g.R0.B) + (t+t)*(g.OCV.C-i*g.R0.C)) + 3*tt*(g.OCV.D-i*g.R0.D)
		c0 := h*p00 - p01
		c1 := h*p01 - p11
		bh := h*f.bSOC - b1
		ub := bh * f.currentVarA2
		s = (h*c0 + ((f.voltageVarV2 + r0*r0*f.currentVarA2) - c1)) + ub*bh
		c0 += f.bSOC * ub
		c1 += b1 * ub
		p00 += f.bSOC * f.bSOCVar
		p01 += b1 * f.bSOCVar
		u1 := b1 * f.currentVarA2
		p11 += b1 * u1
		is := 1 / s
		y = volts - predicted
		e := is * y
		z += c0 * e
		v1 += c1 * e
		w := is * (s*is - 2) // - K gᵀ - g Kᵀ + S K Kᵀ is w g gᵀ, with K = g/S
		p00 += w * (c0 * c0)
		p01 += w * (c0 * c1)
		p11 += w * (c1 * c1)

		if !(s > 0) || !(p00 >= 0) || !(p11 >= 0) || !(y*y+z*z < inf) {
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
	f.x[0], f.x[1] = z, v1
	f.p[0][0], f.p[0][1], f.p[1][1] = p00, p01, p11
	f.heldA = held
	return f.leave(in, k, j, why, s, y)
}
