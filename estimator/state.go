package estimator

import (
	"encoding/binary"
	"fmt"
	"math"
)

// stateMagic begins every saved state; its last byte is the layout's version.
const stateMagic = "socstate\x01"

// PackState lays out a saved state: a mark, the kind, and the values' exact
// bits, little-endian. Whole numbers below 2^53 may be values too.
func PackState(kind string, values []float64) []byte {
	b := make([]byte, 0, len(stateMagic)+1+len(kind)+8*len(values))
	b = append(b, stateMagic...)
	b = append(b, byte(len(kind)))
	b = append(b, kind...)
	for _, v := range values {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
	}
	return b
}

// UnpackState reads back what PackState laid out into values. It returns an
// error when state is not a saved state, is of another version or kind, or
// does not hold len(values) values; values are then untouched.
func UnpackState(kind string, state []byte, values []float64) error {
	head := len(stateMagic)
	switch {
	case len(state) < head+1 || string(state[:head-1]) != stateMagic[:head-1]:
		return fmt.Errorf("estimator: %d bytes are not a saved estimator state", len(state))
	case state[head-1] != stateMagic[head-1]:
		return fmt.Errorf("estimator: saved state has version %d, allowed is %d", state[head-1], stateMagic[head-1])
	}
	body := state[head+1:]
	k := int(state[head])
	if len(body) < k {
		return fmt.Errorf("estimator: saved state ends inside its kind after %d bytes", len(state))
	}
	if got := string(body[:k]); got != kind {
		return fmt.Errorf("estimator: saved state is of kind %q, allowed here is %q", got, kind)
	}
	body = body[k:]
	if len(body) != 8*len(values) {
		return fmt.Errorf("estimator: saved %s state holds %d bytes of numbers, allowed here is %d", kind, len(body), 8*len(values))
	}
	for i := range values {
		values[i] = math.Float64frombits(binary.LittleEndian.Uint64(body[8*i:]))
	}
	return nil
}
