package job

import (
	"encoding/json"
	"io"
	"os"
	"time"

	"soctrial/benches"
	"soctrial/benches/store"
)

const (
	timingFormat = "soctrial/timing/1"
	timeFormat   = "2006-01-02T15:04:05Z"
)

// Timing is timing.json: what differs from one run of the same to the next, and
// so stands in no other file.
type Timing struct {
	Format     string          `json:"format"` // soctrial/timing/1
	Version    string          `json:"version"`
	Workers    int             `json:"workers"`
	Runs       int             `json:"runs"` // 1 and one more for each time it was continued
	StartedAt  string          `json:"started_at"`
	ElapsedS   float64         `json:"elapsed_s"` // of all runs that came to an end of their own
	Scenarios  int             `json:"scenarios"` // timed in them
	Estimators []EstimatorCost `json:"estimators"`
}

// EstimatorCost is what one estimator's arithmetic took.
type EstimatorCost struct {
	Name        string   `json:"name"`
	Samples     int64    `json:"samples"`
	ElapsedS    float64  `json:"elapsed_s"`
	NsPerSample *float64 `json:"ns_per_sample"` // null where nothing was timed
}

// ReadTiming reads a timing.json.
func ReadTiming(path string) (*Timing, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, wrong(err)
	}
	var t Timing
	if err := json.Unmarshal(data, &t); err != nil {
		return nil, wrongf("%s: %w", path, err)
	}
	return &t, nil
}

func writeTiming(path string, t *Timing) error {
	data, err := json.MarshalIndent(t, "", "  ")
	if err != nil {
		return err
	}
	return writeBytes(path, append(data, '\n'))
}

func writeBytes(path string, data []byte) error {
	return store.WriteFile(path, func(w io.Writer) error {
		_, err := w.Write(data)
		return err
	})
}

// costOf turns sums into what a file and a table show.
func costOf(name string, c benches.Cost) EstimatorCost {
	e := EstimatorCost{Name: name, Samples: c.Samples, ElapsedS: float64(c.Nanos) / 1e9}
	if c.Samples > 0 && c.Nanos > 0 {
		ns := float64(c.Nanos) / float64(c.Samples)
		e.NsPerSample = &ns
	}
	return e
}

// writeTiming adds this run's figures to those of the ones before it.
func (r *running) writeTiming() error {
	path := r.ledger.folder.path(TimingFile)
	t := &Timing{}
	if r.found > 0 {
		if before, err := ReadTiming(path); err == nil { // a killed run left none
			t = before
		}
	}
	runs := max(t.Runs, min(r.found, 1)) + 1
	for i, s := range r.in.specs {
		for _, e := range t.Estimators {
			if e.Name == s.Name {
				r.costs[i].Samples += e.Samples
				r.costs[i].Nanos += int64(e.ElapsedS * 1e9)
			}
		}
	}
	now := Timing{Format: timingFormat, Version: r.o.Version, Workers: r.o.workers(), Runs: runs,
		StartedAt: r.began.UTC().Format(timeFormat), ElapsedS: t.ElapsedS + time.Since(r.began).Seconds(),
		Scenarios: t.Scenarios + len(r.ledger.rows) - r.found}
	for i, s := range r.in.specs {
		now.Estimators = append(now.Estimators, costOf(s.Name, r.costs[i]))
	}
	return writeTiming(path, &now)
}
