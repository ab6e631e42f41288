package kalman

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant/record"
)

// run2 takes samples from k on with two branches of fixed time constants, no
// hysteresis, one temperature and an even period, until a reading is missing,
// the filter is lost or the block ends. It returns where it stopped.
//
// Sums are ordered so that what is known last is added last: the loop is as
// long as its chain of dependent operations, from one covariance to the next.
func (f *EKF) run2(in *record.Readings, out *estimator.Estimate, k int) int {
	cur := in.CurrentA[k:]
	volt := in.VoltageV[k:][:len(cur)]
	soc, free, std := out.SOC[k:][:len(cur)], out.SOCFree[k:][:len(cur)], out.SOCStd[k:][:len(cur)]
	pred, inno, innoStd := out.VoltagePredictedV[k:][:len(cur)], out.InnovationV[k:][:len(cur)], out.InnovationStdV[k:][:len(cur)]

	mean := in.CurrentReading == record.IntervalMean
	perA, b0, varA, varV := f.perA, f.bSOC, f.currentVarA2, f.voltageVarV2
	a1, a2, rise1, rise2 := f.decay[0], f.decay[1], f.rise[0], f.rise[1]
	a11, a12, a22 := a1*a1, a1*a2, a2*a2
	u0, q0, qv := b0*varA, f.socVar+b0*b0*varA, f.branchV
	inf := math.Inf(1)

	z, v1, v2 := f.x[0], f.x[1], f.x[2]
	p00, p01, p02, p11, p12, p22 := f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2]
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
		b2 := rise2 * ((g.R[1].Y + t*g.R[1].B) + tt*(g.R[1].C+t*g.R[1].D))
		z -= held * perA[math.Float64bits(held)>>63]
		v1 = a1*v1 + b1*held
		v2 = a2*v2 + b2*held
		held = i
		p00 += q0
		p01 = p01*a1 + b1*u0
		p02 = p02*a2 + b2*u0
		u1 := b1 * varA
		p11 = (p11*a11 + qv) + b1*u1
		p12 = p12*a12 + b2*u1
		p22 = (p22*a22 + qv) + b2*(b2*varA)

		// update
		if !(z >= g.Lo && z < g.Hi) {
			g = f.view.Segment(z)
		}
		t = z - g.Ref
		tt = t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		predicted := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - r0*i - (v1 + v2)
		h := (g.OCV.B + t*(2*g.OCV.C+3*t*g.OCV.D)) - i*(g.R0.B+t*(2*g.R0.C+3*t*g.R0.D))
		c0 := h*p00 - (p01 + p02)
		c1 := h*p01 - (p11 + p12)
		c2 := h*p02 - (p12 + p22)
		s = h*c0 + ((varV + r0*r0*varA) - (c1 + c2))
		is := 1 / s
		y := volts - predicted
		e := is * y
		z += c0 * e
		v1 += c1 * e
		v2 += c2 * e
		w := is * (s*is - 2) // - K gᵀ - g Kᵀ + S K Kᵀ is w g gᵀ, with K = g/S
		p00 += w * (c0 * c0)
		p01 += w * (c0 * c1)
		p02 += w * (c0 * c2)
		p11 += w * (c1 * c1)
		p12 += w * (c1 * c2)
		p22 += w * (c2 * c2)

		if !(s > 0) || !(p00 >= 0) || !(p11 >= 0) || !(p22 >= 0) || !(z*z+v1*v1+v2*v2+(p00+p11+p22) < inf) {
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
	f.x[0], f.x[1], f.x[2] = z, v1, v2
	f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2] = p00, p01, p02, p11, p12, p22
	f.heldA = held
	return f.leave(in, k, j, lost, s)
}

// leave counts the samples a kernel took from k on, and the one it was lost
// at, and returns the next one to take.
func (f *EKF) leave(in *record.Readings, k, taken int, lost bool, s float64) int {
	if lost {
		taken++
	}
	if taken > 0 {
		f.begun(taken, in.TimeS[k+taken-1])
	}
	if lost {
		f.lose(s)
	}
	return k + taken
}
