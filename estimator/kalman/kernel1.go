package kalman

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant/record"
)

// run1 is run2 for one branch.
func (f *EKF) run1(in *record.Readings, out *estimator.Estimate, k int) int {
	cur := in.CurrentA[k:]
	volt := in.VoltageV[k:][:len(cur)]
	soc, free, std := out.SOC[k:][:len(cur)], out.SOCFree[k:][:len(cur)], out.SOCStd[k:][:len(cur)]
	pred, inno, innoStd := out.VoltagePredictedV[k:][:len(cur)], out.InnovationV[k:][:len(cur)], out.InnovationStdV[k:][:len(cur)]

	mean := in.CurrentReading == record.IntervalMean
	perA, b0, varA, varV := f.perA, f.bSOC, f.currentVarA2, f.voltageVarV2
	a1, rise1 := f.decay[0], f.rise[0]
	a11 := a1 * a1
	u0, q0, qv := b0*varA, f.socVar+b0*b0*varA, f.branchV
	inf := math.Inf(1)

	z, v1 := f.x[0], f.x[1]
	p00, p01, p11 := f.p[0][0], f.p[0][1], f.p[1][1]
	held := f.heldA
	g := f.view.Segment(z)
	var s float64
	j, lost := 0, false
	for ; j < len(cur); j++ {
		i, volts := cur[j], volt[j]
		if i != i || volts != volts {
			break
		}
		if mean {
			held = i
		}
		// predict
		if !(z >= g.Lo && z < g.Hi) {
			g = f.view.Segment(z)
		}
		t := z - g.Ref
		tt := t * t
		b1 := rise1 * ((g.R[0].Y + t*g.R[0].B) + tt*(g.R[0].C+t*g.R[0].D))
		z -= held * perA[math.Float64bits(held)>>63]
		v1 = a1*v1 + b1*held
		held = i
		p00 += q0
		p01 = p01*a1 + b1*u0
		p11 = (p11*a11 + qv) + b1*(b1*varA)

		// update
		if !(z >= g.Lo && z < g.Hi) {
			g = f.view.Segment(z)
		}
		t = z - g.Ref
		tt = t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		predicted := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - r0*i - v1
		h := (g.OCV.B + t*(2*g.OCV.C+3*t*g.OCV.D)) - i*(g.R0.B+t*(2*g.R0.C+3*t*g.R0.D))
		c0 := h*p00 - p01
		c1 := h*p01 - p11
		s = h*c0 + ((varV + r0*r0*varA) - c1)
		is := 1 / s
		y := volts - predicted
		e := is * y
		z += c0 * e
		v1 += c1 * e
		w := is * (s*is - 2) // - K gᵀ - g Kᵀ + S K Kᵀ is w g gᵀ, with K = g/S
		p00 += w * (c0 * c0)
		p01 += w * (c0 * c1)
		p11 += w * (c1 * c1)

		if !(s > 0) || !(p00 >= 0) || !(p11 >= 0) || !(z*z+v1*v1+(p00+p11) < inf) {
			lost = true
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
	return f.leave(in, k, j, lost, s)
}
