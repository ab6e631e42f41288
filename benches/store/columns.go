package store

import (
	"errors"
	"fmt"
	"io"
	"math"
	"slices"

	"soctrial/benches/scenario"
	"soctrial/plant/record"
)

// ReadColumns reads some columns of numbers, named by their exact headings,
// from a CSV or Parquet file. They have one length; an empty cell or a null is
// NaN. Delimiter, comments and lines before the headings are found as
// ReadRecord finds them.
func ReadColumns(path string, names []string) (map[string][]float64, error) {
	f, size, err := openInput(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	out := map[string][]float64{}
	if isParquet(f, size) {
		err = withInput(path, f, size, usual, func(t *table) error {
			for _, name := range names {
				v, err := t.need(name, scenario.Number, true)
				if err != nil {
					return err
				}
				for i := range v.null {
					if v.null[i] {
						v.nums[i] = math.NaN()
					}
				}
				out[name] = v.nums
			}
			return nil
		})
	} else if err = textColumns(f, names, out); err != nil {
		err = fmt.Errorf("store: %s: %w", path, err)
	}
	if err != nil {
		return nil, err
	}
	return out, nil
}

func textColumns(in io.Reader, names []string, out map[string][]float64) error {
	s, err := openSheet(in, &record.Map{}, func(row []string) bool {
		return !slices.ContainsFunc(names, func(n string) bool { return !slices.Contains(row, n) })
	})
	if err != nil {
		return err
	}
	at := make([]int, len(names))
	columns := make([][]float64, len(names))
	for k, name := range names {
		if at[k] = slices.Index(s.heads, name); at[k] < 0 {
			return fmt.Errorf("column %q is missing; the nearest is %q of %s", name, scenario.Closest(name, s.heads), quoted(s.heads))
		}
		if slices.Contains(s.heads[at[k]+1:], name) {
			return fmt.Errorf("two columns are called %q", name)
		}
	}
	for {
		fields, line, err := s.next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return err
		}
		for k, i := range at {
			x, err := s.number(fields[i], line, names[k])
			if err != nil {
				return err
			}
			columns[k] = append(columns[k], x)
		}
	}
	for k, name := range names {
		out[name] = columns[k]
	}
	return nil
}
