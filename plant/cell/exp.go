package cell

import "math"

// smallExp is the size below which a polynomial of degree 8 is exact to the
// last digit or so: the next term is below 5e-17.
const smallExp = 1.0 / 16

// Exp returns exp(x), fast where x is as small as a step makes it.
func Exp(x float64) float64 {
	if x > -smallExp && x < smallExp {
		x2 := x * x // grouped so that few operations wait for each other; what is small is added first
		x4 := x2 * x2
		r := x2*(1.0/2+x*(1.0/6)) + x4*((1.0/24+x*(1.0/120))+x2*((1.0/720+x*(1.0/5040))+x2*(1.0/40320)))
		return 1 + (x + r)
	}
	return math.Exp(x)
}
