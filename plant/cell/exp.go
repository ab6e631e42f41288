package cell

import "math"

// smallExp is the size below which a polynomial of degree 8 is exact to the
// last digit or so: the next term is below 5e-17.
const smallExp = 1.0 / 16

// Exp returns exp(x), fast where x is as small as a step makes it.
func Exp(x float64) float64 {
	if x > -smallExp && x < smallExp {
		return 1 + x*(1+x*(1.0/2+x*(1.0/6+x*(1.0/24+x*(1.0/120+x*(1.0/720+x*(1.0/5040+x*(1.0/40320))))))))
	}
	return math.Exp(x)
}
