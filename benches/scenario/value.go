package scenario

import (
	"fmt"
	"math"
	"strconv"
)

// ValueError says which value was refused, what was found and what is allowed.
type ValueError struct {
	Key     string // a column of a row, or a key of a plan, e.g. vary[0].column
	Found   string
	Allowed string
}

// Error implements error.
func (e *ValueError) Error() string {
	return fmt.Sprintf("scenario: %s: found %s, allowed is %s", e.Key, e.Found, e.Allowed)
}

// KeyPath returns the key the error belongs to.
func (e *ValueError) KeyPath() string { return e.Key }

func bad(key, found, allowed string) error {
	return &ValueError{Key: key, Found: found, Allowed: allowed}
}

// Kind is what a column holds.
type Kind uint8

// What a column holds.
const (
	Number Kind = iota // double
	Int                // whole number, int64
	Text               // string
)

// String names the kind as messages do.
func (k Kind) String() string {
	switch k {
	case Int:
		return "whole number"
	case Text:
		return "text"
	}
	return "number"
}

// Value is one cell of a set's table. Only the field of its Kind counts; the
// zero Value of a kind is 0 or "". Null: nothing stands there.
type Value struct {
	Kind   Kind
	Null   bool
	Number float64
	Int    int64
	Text   string
}

// NumberValue returns v as a value; NaN is null.
func NumberValue(v float64) Value { return Value{Kind: Number, Number: v, Null: math.IsNaN(v)} }

// IntValue returns v as a value.
func IntValue(v int64) Value { return Value{Kind: Int, Int: v} }

// TextValue returns v as a value; the empty text is not null.
func TextValue(v string) Value { return Value{Kind: Text, Text: v} }

// NullValue returns the value of a place where nothing stands.
func NullValue(k Kind) Value { return Value{Kind: k, Null: true} }

// String prints the value as messages do: text quoted, null as "null".
func (v Value) String() string {
	switch {
	case v.Null:
		return "null"
	case v.Kind == Int:
		return strconv.FormatInt(v.Int, 10)
	case v.Kind == Text:
		return strconv.Quote(v.Text)
	}
	return strconv.FormatFloat(v.Number, 'g', -1, 64)
}

// exactInt is the size up to which every whole double is a whole number that
// was meant: beyond 2^53 neighbours fall together.
const exactInt = 1 << 53

// whole returns x as a whole number, and whether it is one without loss.
func whole(x float64) (int64, bool) {
	return int64(x), x == math.Trunc(x) && math.Abs(x) <= exactInt
}

// Range is the numbers a column allows; an end that is infinite is always open.
type Range struct {
	Low, High         float64
	LowOpen, HighOpen bool
}

// Holds tells whether x is in the range. NaN and infinities never are.
func (g Range) Holds(x float64) bool {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return false
	}
	return (x > g.Low || x == g.Low && !g.LowOpen) && (x < g.High || x == g.High && !g.HighOpen)
}

// String prints the range as messages do: "[0, 1]", "> 0", "any finite number".
func (g Range) String() string {
	low, high := !math.IsInf(g.Low, -1), !math.IsInf(g.High, 1)
	num := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	switch {
	case low && high:
		open, end := "[", "]"
		if g.LowOpen {
			open = "("
		}
		if g.HighOpen {
			end = ")"
		}
		return open + num(g.Low) + ", " + num(g.High) + end
	case low && g.LowOpen:
		return "> " + num(g.Low)
	case low:
		return "≥ " + num(g.Low)
	case high && g.HighOpen:
		return "< " + num(g.High)
	case high:
		return "≤ " + num(g.High)
	}
	return "any finite number"
}
