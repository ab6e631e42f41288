// Package job is what the commands call: load the files a person names, run
// them through the bench, write what came out, and continue what was broken
// off.
//
// It holds the files and the clock that the packages beneath it refuse. Every
// file appears whole or not at all, and a results folder is never half of one
// run and half of another.
//
// The package prints nothing and knows no terminal: it returns values, and
// tells its progress to whoever asked.
package job

import (
	"errors"
	"fmt"
	"time"
)

// Error is a mistake in the input or the call: a file that does not read, a
// folder that exists, a disk that is full. Any other error of this package is
// the tool's own.
type Error struct{ err error }

// Error implements error.
func (e *Error) Error() string { return e.err.Error() }

// Unwrap returns what went wrong.
func (e *Error) Unwrap() error { return e.err }

func wrong(err error) error {
	if err == nil {
		return nil
	}
	return &Error{err}
}

func wrongf(format string, args ...any) error { return &Error{fmt.Errorf(format, args...)} }

// ErrInterrupted says that the context ended before the job did. What was
// finished is written.
var ErrInterrupted = errors.New("interrupted")

// Progress is how far a job has come.
type Progress struct {
	Stage   string // "scenarios", "traces"
	Done    int    // of Total, those found finished included
	Total   int
	Found   int   // of Done, those an earlier run had finished
	Samples int64 // samples gone through estimators in this run, of every estimator
	Elapsed time.Duration
}

// Reporter is told what goes on. A nil function is not called.
type Reporter struct {
	Progress func(Progress) // from one goroutine at a time, after every scenario
	Warn     func(string)   // once a thing worth knowing
}

func (r *Reporter) progress(p Progress) {
	if r.Progress != nil {
		r.Progress(p)
	}
}

func (r *Reporter) warn(format string, args ...any) {
	if r.Warn != nil {
		r.Warn(fmt.Sprintf(format, args...))
	}
}
