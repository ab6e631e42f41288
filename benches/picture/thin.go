package picture

import "math"

// point is one place of a line, in the units of its axes.
type point struct{ x, y float64 }

// runs splits a line where either axis has no place for its values. Columns of
// different length are cut to the shorter.
func runs(xa, ya *axis, x, y []float64) [][]point {
	var out [][]point
	var run []point
	for i := range min(len(x), len(y)) {
		if !xa.drawable(x[i]) || !ya.drawable(y[i]) && !(ya.floor > 0 && y[i] >= 0 && y[i] < ya.floor) {
			if run != nil {
				out = append(out, run)
			}
			run = nil
			continue
		}
		run = append(run, point{x[i], y[i]})
	}
	if run != nil {
		out = append(out, run)
	}
	return out
}

// thin keeps of all neighbouring points that fall into one of n columns along
// the axis the first, the least, the greatest and the last. The lines through
// what it keeps and through all points cover the same pixels.
func thin(points []point, xa *axis, n int) []point {
	if len(points) <= 4 || n < 1 {
		return points
	}
	column := func(p point) float64 { return math.Floor(xa.share(p.x) * float64(n)) }
	out := points[:0:0]
	for from := 0; from < len(points); {
		to, at := from+1, column(points[from])
		least, most := from, from
		for to < len(points) && column(points[to]) == at {
			if points[to].y < points[least].y {
				least = to
			}
			if points[to].y > points[most].y {
				most = to
			}
			to++
		}
		kept := [4]int{from, min(least, most), max(least, most), to - 1}
		for i, k := range kept {
			if i == 0 || k != kept[i-1] {
				out = append(out, points[k])
			}
		}
		from = to
	}
	return out
}

// steps turns values that each hold until the next time into the line that
// shows them so; the last holds to until.
func steps(x, y []float64, until float64) (sx, sy []float64) {
	n := min(len(x), len(y))
	for i := range n {
		sx, sy = append(sx, x[i]), append(sy, y[i])
		end := until
		if i+1 < n {
			end = x[i+1]
		}
		if end > x[i] {
			sx, sy = append(sx, end), append(sy, y[i])
		}
	}
	return sx, sy
}
