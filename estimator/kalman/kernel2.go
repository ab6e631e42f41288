package kalman

import (
	"math"

	"soctrial/estimator"
	"soctrial/plant/record"
)

// run2 takes samples from k on with two branches of fixed time constants, no
// hysteresis, one temperature and an even period. It stops, and returns where
// and why, at a missing reading, when SOC leaves the interval of the tables it
// was in, when the filter is lost and at the block's end.
//
// The loop is as long as its chain of dependent operations from one covariance
// to the next. So sums are ordered that what is known last is added last: the
// input noise b bᵀ, which waits for SOC, joins P Hᵀ and S when they are there
// but for it. And nothing is called, so that the state stays in registers.
func (f *EKF) run2(in *record.Readings, out *estimator.Estimate, k int) (next int, why stop) {
	cur := in.CurrentA[k:]
	volt := in.VoltageV[k:][:len(cur)]
	soc, free, std := out.SOC[k:][:len(cur)], out.SOCFree[k:][:len(cur)], out.SOCStd[k:][:len(cur)]
	pred, inno, innoStd := out.VoltagePredictedV[k:][:len(cur)], out.InnovationV[k:][:len(cur)], out.InnovationStdV[k:][:len(cur)]

	mean := in.CurrentReading == record.IntervalMean
	inf := math.Inf(1)

	z, v1, v2 := f.x[0], f.x[1], f.x[2]
	p00, p01, p02, p11, p12, p22 := f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2]
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
		b2 := f.rise[1] * ((g.R[1].Y + t*g.R[1].B) + tt*(g.R[1].C+t*g.R[1].D))
		z = after
		v1 = f.decay[0]*v1 + b1*held
		v2 = f.decay[1]*v2 + b2*held
		held = i
		p00 += f.socVar
		p01 *= f.decay[0]
		p02 *= f.decay[1]
		p11 = p11*f.both[0][0] + f.branchV
		p12 *= f.both[0][1]
		p22 = p22*f.both[1][1] + f.branchV

		// update
		t = z - g.Ref
		tt = t * t
		r0 := (g.R0.Y + t*g.R0.B) + tt*(g.R0.C+t*g.R0.D)
		predicted := (g.OCV.Y + t*g.OCV.B) + tt*(g.OCV.C+t*g.OCV.D) - r0*i - (v1 + v2)
		h := ((g.OCV.B - i*g.R0.B) + (t+t)*(g.OCV.C-i*g.R0.C)) + 3*tt*(g.OCV.D-i*g.R0.D)
		c0 := h*p00 - (p01 + p02)
		c1 := h*p01 - (p11 + p12)
		c2 := h*p02 - (p12 + p22)
		bh := h*f.bSOC - (b1 + b2)
		ub := bh * f.currentVarA2
		s = (h*c0 + ((f.voltageVarV2 + r0*r0*f.currentVarA2) - (c1 + c2))) + ub*bh
		c0 += f.bSOC * ub
		c1 += b1 * ub
		c2 += b2 * ub
		p00 += f.bSOC * f.bSOCVar
		p01 += b1 * f.bSOCVar
		p02 += b2 * f.bSOCVar
		u1 := b1 * f.currentVarA2
		p11 += b1 * u1
		p12 += b2 * u1
		u2 := b2 * f.currentVarA2
		p22 += b2 * u2
		is := 1 / s
		y = volts - predicted
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
	f.x[0], f.x[1], f.x[2] = z, v1, v2
	f.p[0][0], f.p[0][1], f.p[0][2], f.p[1][1], f.p[1][2], f.p[2][2] = p00, p01, p02, p11, p12, p22
	f.heldA = held
	return f.leave(in, k, j, why, s, y)
}

// stop is why a kernel stopped before the block's end.
type stop uint8

const (
	needsStep    stop = iota // a sample is to be taken by the general step
	leftInterval             // SOC has moved to another interval of the tables
	lost
)

// leave counts the samples a kernel took from k on, and the one it was lost
// at, and returns the next one to take.
func (f *EKF) leave(in *record.Readings, k, taken int, why stop, s, innovationV float64) (next int, again stop) {
	if why == lost {
		taken++
	}
	if taken > 0 {
		f.begun(taken, in.TimeS[k+taken-1])
	}
	if why == lost {
		f.lose(s, innovationV)
	}
	if taken == 0 {
		why = needsStep // no interval holds what is not a number
	}
	return k + taken, why
}
