package store

import (
	"errors"
	"math"
	"math/big"
	"strconv"

	"soctrial/benches/scenario"
)

// decimal adds the decimal whose mantissa is b: two's complement, the most
// significant byte first.
func (r *columnReader) decimal(b []byte) error {
	m := new(big.Int).SetBytes(b)
	if len(b) > 0 && b[0]&0x80 != 0 {
		m.Sub(m, new(big.Int).Lsh(big.NewInt(1), uint(8*len(b))))
	}
	if r.out.kind == scenario.Int {
		if !m.IsInt64() {
			return errors.New("a decimal is beyond 64 bits")
		}
		r.work.ints = append(r.work.ints, m.Int64())
		return nil
	}
	r.work.nums = append(r.work.nums, scaled(m, r.f.scale))
	return nil
}

// scaled returns m / 10^scale, correctly rounded.
func scaled(m *big.Int, scale int) float64 {
	// Both sides exact in a double: one division rounds once.
	if m.IsInt64() && scale <= 22 && math.Abs(float64(m.Int64())) < 1<<53 {
		return float64(m.Int64()) / pow10[scale]
	}
	x, err := strconv.ParseFloat(m.String()+"e-"+strconv.Itoa(scale), 64)
	if err != nil {
		return math.Inf(m.Sign())
	}
	return x
}

// pow10 holds the powers of ten that a double keeps exactly.
var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// half returns the half-precision number (IEEE 754 binary16: 1 sign, 5
// exponent and 10 fraction bits) in two bytes, the least significant first.
func half(b []byte) float64 {
	bits := uint16(b[0]) | uint16(b[1])<<8
	fraction, exponent := float64(bits&0x3ff), int(bits>>10&0x1f)
	var x float64
	switch exponent {
	case 0:
		x = math.Ldexp(fraction, -24)
	case 0x1f:
		if x = math.Inf(1); fraction != 0 {
			x = math.NaN()
		}
	default:
		x = math.Ldexp(1024+fraction, exponent-25)
	}
	if bits>>15 == 1 {
		return -x
	}
	return x
}
