// Package demo holds the definitions of the demo and the order in which they
// are used: the works department of Oskerhaven, an invented harbour town, tries
// estimators for the pack of its electric quay sweeper on two invented cells,
// and then on a published one.
//
// The package only tells; it draws, runs and writes nothing. Whoever runs it
// writes the files out, so that they can be changed and run again.
package demo

import (
	"embed"
	"fmt"
)

//go:embed definitions/*.toml
var definitions embed.FS

// File is one definition: its name within a folder, and its text.
type File struct{ Name, Text string }

// Files returns every definition, sorted by name.
func Files() ([]File, error) {
	entries, err := definitions.ReadDir("definitions")
	if err != nil {
		return nil, fmt.Errorf("demo: %w", err)
	}
	var out []File
	for _, e := range entries {
		text, err := definitions.ReadFile("definitions/" + e.Name())
		if err != nil {
			return nil, fmt.Errorf("demo: %w", err)
		}
		out = append(out, File{e.Name(), string(text)})
	}
	return out, nil
}

// Step is one scenario set: drawn from a plan, run, and shown.
type Step struct {
	Name       string // of the set and of its folder
	About      string // what it asks
	Plan       string // files, by name
	Estimators []string
	Pictured   []string  // cells and duties to be drawn
	Tracks     []Track   // scenarios to be traced and drawn
	Limit      [2]string // the metric and estimator whose limit the pictures show
	MeantFail  string    // what its failing limit shows; empty: none is meant to fail
}

// Track is a scenario whose course is worth a look.
type Track struct {
	ScenarioID int64
	What       string // why it is worth it
	File       string // of its picture, without ending
}

// Steps returns the story in order. Of each of the sweeper's cells it tracks a
// scenario in which the filter's worst error is the median, and the one in
// which it is the largest.
func Steps() []Step {
	estimators := []string{"ekf.toml", "coulomb.toml", "rest-ocv.toml"}
	return []Step{
		{
			Name: "sweeper", Plan: "sweeper.toml", Estimators: estimators,
			About:    "The quay sweeper's day, with a steep and with a flat cell: fresh and aged, cold and warm, a current sensor that drifts off, a wrong start.",
			Pictured: []string{"quay-sweeper-21.toml", "quay-sweeper-flat-50.toml", "rounds.toml"},
			Tracks: []Track{
				{121, "the median of the steep cell", "track-steep-median"},
				{17, "ekf's worst, steep cell", "track-steep-worst"},
				{230, "the median of the flat cell", "track-flat-median"},
				{367, "ekf's worst, flat cell", "track-flat-worst"},
			},
			Limit:     [2]string{"settled_max_abs", "ekf"},
			MeantFail: "on a flat open-circuit voltage a few millivolts are many percent of charge",
		},
		{
			Name: "published", Plan: "published.toml", Estimators: estimators,
			About:     "A published cell under two published profiles, a stress test and a driving cycle, on a tester's meters.",
			Pictured:  []string{"published-850.toml", "stress-test.toml", "driving-cycle.toml"},
			Tracks:    []Track{{15, "ekf's worst under the test", "track-published-dst"}, {36, "ekf's worst on the cycle", "track-published-nedc"}},
			Limit:     [2]string{"settled_max_abs", "ekf"},
			MeantFail: "who only counts keeps the error it starts with",
		},
	}
}
