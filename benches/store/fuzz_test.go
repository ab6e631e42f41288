package store

import (
	"bytes"
	"testing"
)

// fuzzTable runs a reader on bytes as if they were a file: a panic, or memory
// beyond the limit the fuzz runs under, fails it.
func fuzzTable(f *testing.F, seeds [][]byte, read func(*table) error) {
	for _, s := range seeds {
		f.Add(s)
	}
	f.Add([]byte{})
	f.Add([]byte("PAR1PAR1PAR1"))
	f.Fuzz(func(t *testing.T, b []byte) {
		// An error is as good as content here; that content is right is for other tests.
		_ = withInput("fuzz.parquet", bytes.NewReader(b), int64(len(b)), tight, read)
	})
}

func FuzzReadSet(f *testing.F) {
	fuzzTable(f, [][]byte{smallSet(f), smallResults(f)}, func(t *table) error {
		s, err := readSet(t)
		if err != nil {
			return err
		}
		return checkSet(s.Rows, s.Texts)
	})
}

func FuzzReadResults(f *testing.F) {
	fuzzTable(f, [][]byte{smallResults(f)}, func(t *table) error {
		_, _, err := readResults(t)
		return err
	})
}

func FuzzReadTraces(f *testing.F) {
	fuzzTable(f, [][]byte{smallTraces(f)}, func(t *table) error {
		held, err := listTraces(t)
		for _, k := range held {
			if _, err := readTrace(t, k.ScenarioID, k.Estimator); err != nil {
				return err
			}
		}
		return err
	})
}
