package picture

import (
	"math"
	"strconv"
	"strings"
)

// tick is one mark on an axis; without a label it is a minor one.
type tick struct {
	value float64
	label string
}

// linearTicks marks lo to hi in steps of 1, 2 or 5 times a power of ten, with
// at most most labels and minor marks between.
func linearTicks(lo, hi float64, most int) []tick {
	step, parts := niceStep(hi-lo, most)
	var out []tick
	minor := step / float64(parts)
	first, last := math.Ceil(lo/minor-1e-6), math.Floor(hi/minor+1e-6)
	if last-first > float64(20*most) || first+1 == first {
		return []tick{{lo, number(lo, 0)}, {hi, number(hi, 0)}}
	}
	for k := first; k <= last; k++ {
		t := tick{value: k * minor}
		if math.Mod(k, float64(parts)) == 0 {
			t.value = k / float64(parts) * step
			t.label = number(t.value, step)
		}
		out = append(out, t)
	}
	return out
}

// niceStep returns the least step of 1, 2 or 5 times a power of ten that cuts
// span into at most most parts, and into how many parts minor marks cut it.
func niceStep(span float64, most int) (step float64, parts int) {
	raw := span / float64(max(most, 1))
	power := math.Pow(10, math.Floor(math.Log10(raw)))
	for _, m := range []struct {
		times float64
		parts int
	}{{1, 5}, {2, 4}, {5, 5}} {
		if raw <= m.times*power*(1+1e-9) {
			return m.times * power, m.parts
		}
	}
	return 10 * power, 5
}

// number shows v with the digits that steps of step need; 0: what it takes.
func number(v, step float64) string {
	size := math.Max(math.Abs(v), step)
	switch {
	case v == 0:
		return "0"
	case step == 0:
		return strings.ReplaceAll(strconv.FormatFloat(v, 'g', 4, 64), "-", "−")
	case size >= 1e6 || step < 1e-5:
		digits := max(0, int(math.Floor(math.Log10(size)))-int(math.Floor(math.Log10(step)+1e-9)))
		return exponent(strconv.FormatFloat(v, 'e', min(digits, 12), 64))
	}
	s := strconv.FormatFloat(v, 'f', max(0, -int(math.Floor(math.Log10(step)+1e-9))), 64)
	if strings.Trim(s, "-0.") == "" {
		return "0"
	}
	return strings.Replace(s, "-", "−", 1)
}

// exponent tidies 1.50e+06 to 1.5e6.
func exponent(s string) string {
	mantissa, power, _ := strings.Cut(s, "e")
	if strings.Contains(mantissa, ".") {
		mantissa = strings.TrimRight(strings.TrimRight(mantissa, "0"), ".")
	}
	if n, err := strconv.Atoi(power); err == nil {
		power = strconv.Itoa(n)
	}
	return strings.ReplaceAll(mantissa+"e"+power, "-", "−")
}

// decadeTicks marks lo to hi, both above 0, at whole decades, with minor marks
// at 2 to 9; over less than about two decades 2 and 5 are labelled too, over
// less than one a linear axis' marks are used.
func decadeTicks(lo, hi float64, most int) []tick {
	decades := math.Log10(hi) - math.Log10(lo)
	if decades < 1 {
		return linearTicks(lo, hi, most)
	}
	every := max(1, int(math.Ceil(decades/float64(max(most, 1)))))
	var out []tick
	for e := int(math.Floor(math.Log10(lo))); e <= int(math.Ceil(math.Log10(hi))); e++ {
		for m := 1; m <= 9; m++ {
			v := power10(float64(m), e)
			if v < lo*(1-1e-9) || v > hi*(1+1e-9) || m > 1 && every > 1 {
				continue
			}
			t := tick{value: v}
			if m == 1 && e%every == 0 || 3*decades <= float64(most)+0.5 && (m == 2 || m == 5) {
				t.label = strings.Replace(strconv.FormatFloat(v, 'g', -1, 64), "e-0", "e-", 1)
				if v >= 1e6 || v < 1e-4 {
					t.label = exponent(strconv.FormatFloat(v, 'e', 0, 64))
				}
			}
			out = append(out, t)
		}
	}
	return out
}

// power10 is m·10^e, rounded once.
func power10(m float64, e int) float64 {
	v, err := strconv.ParseFloat(strconv.FormatFloat(m, 'f', -1, 64)+"e"+strconv.Itoa(e), 64)
	if err != nil {
		return math.Inf(1)
	}
	return v
}
