package store

import (
	"bytes"
	"errors"
	"math"
	"strconv"
	"strings"
	"unsafe"
)

var errNotNumber = errors.New("not a number")

// parseNumber reads a field of a CSV file; an empty one, or one that says that
// nothing was measured, is NaN.
func parseNumber(field []byte, decimalComma bool) (float64, error) {
	if x, ok := parsePlain(field, decimalComma); ok {
		return x, nil
	}
	if isMissing(field) {
		return math.NaN(), nil
	}
	if decimalComma {
		if bytes.IndexByte(field, '.') >= 0 {
			return 0, errNotNumber
		}
		field = bytes.Replace(bytes.Clone(field), []byte{','}, []byte{'.'}, 1)
	}
	if bytes.ContainsAny(field, "xXpP_") { // hexadecimal and digit groups are Go's, not a logger's
		return 0, errNotNumber
	}
	x, err := strconv.ParseFloat(unsafe.String(unsafe.SliceData(field), len(field)), 64)
	if err != nil || math.IsInf(x, 0) || math.IsNaN(x) {
		return 0, errNotNumber
	}
	return x, nil
}

// parsePlain reads [-]digits[.digits] where the digits and the power of ten
// are exact in a double, so that the one division rounds correctly (Clinger
// 1990, "How to read floating point numbers accurately", the fast path).
func parsePlain(field []byte, decimalComma bool) (float64, bool) {
	point := byte('.')
	if decimalComma {
		point = ','
	}
	i, negative := 0, false
	if len(field) > 0 && (field[0] == '-' || field[0] == '+') {
		negative = field[0] == '-'
		i = 1
	}
	if len(field)-i < 1 || len(field)-i > 16 {
		return 0, false
	}
	var mantissa int64
	digits, after := 0, -1
	for ; i < len(field); i++ {
		c := field[i]
		switch {
		case c >= '0' && c <= '9':
			mantissa = mantissa*10 + int64(c-'0')
			digits++
			if after >= 0 {
				after++
			}
		case c == point && after < 0:
			after = 0
		default:
			return 0, false
		}
	}
	if digits == 0 || digits > 15 {
		return 0, false
	}
	x := float64(mantissa)
	if after > 0 {
		x /= pow10[after]
	}
	if negative {
		x = -x
	}
	return x, true
}

// isMissing tells whether a field says that there is no value.
func isMissing(field []byte) bool {
	switch len(field) {
	case 0:
		return true
	case 1:
		return field[0] == '-'
	case 2, 3, 4:
		switch strings.ToLower(string(field)) {
		case "na", "nan", "n/a", "null", "none", "nil", "--", "---":
			return true
		}
	}
	return false
}

// looksNumeric tells whether a field is a number, with either decimal mark.
func looksNumeric(field []byte) bool {
	if len(field) == 0 || isMissing(field) {
		return false
	}
	_, point := parseNumber(field, false)
	_, comma := parseNumber(field, true)
	return point == nil || comma == nil
}
