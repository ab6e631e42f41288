package main

import (
	"fmt"
	"io"
	"log/slog"
	"os"
	"sync"
	"sync/atomic"
	"time"

	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"
	"golang.org/x/term"

	"soctrial/benches/job"
)

// quietEvery is how often a log without a terminal hears of progress.
const quietEvery = 30 * time.Second

// progress shows how far a job is: a bar on a terminal, now and then a line in
// a log.
type progress struct {
	w      io.Writer
	latest atomic.Pointer[job.Progress] // read while a bar is drawn

	mu       sync.Mutex
	terminal bool
	bars     *mpb.Progress
	bar      *mpb.Bar
	stage    string
	log      *slog.Logger
	lastLine time.Time
}

func newProgress(w io.Writer) *progress {
	return &progress{w: w, terminal: isTerminal(w), log: slog.New(slog.NewTextHandler(w, nil)), lastLine: time.Now()}
}

func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

// reporter hands a job what it tells its progress to.
func (p *progress) reporter() job.Reporter {
	return job.Reporter{Progress: p.show, Warn: p.warn}
}

// reporter is for commands that show no progress.
func reporter(s streams) job.Reporter {
	return job.Reporter{Warn: func(text string) { fmt.Fprintln(s.err, "soctrial: note:", text) }}
}

func (p *progress) warn(text string) {
	p.mu.Lock()
	defer p.mu.Unlock()
	line := "soctrial: note: " + text + "\n"
	if p.bars != nil { // above the bar
		io.WriteString(p.bars, line)
		return
	}
	io.WriteString(p.w, line)
}

func (p *progress) show(now job.Progress) {
	p.latest.Store(&now)
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.terminal {
		p.showBar(now)
		return
	}
	if time.Since(p.lastLine) < quietEvery {
		return
	}
	p.lastLine = time.Now()
	p.log.Info("progress", "stage", now.Stage, "done", now.Done, "of", now.Total, "rate", rate(now), "left", left(now).String())
}

func (p *progress) showBar(now job.Progress) {
	if p.bars == nil {
		p.bars = mpb.New(mpb.WithOutput(p.w), mpb.WithWidth(72), mpb.WithRefreshRate(200*time.Millisecond))
	}
	if p.stage != now.Stage {
		if p.bar != nil {
			p.bar.SetTotal(-1, true)
		}
		p.stage = now.Stage
		p.bar = p.bars.AddBar(int64(now.Total),
			mpb.PrependDecorators(decor.Name(now.Stage+" "), decor.CountersNoUnit("%d of %d")),
			mpb.AppendDecorators(decor.Any(func(decor.Statistics) string { return p.tail() })))
	}
	p.bar.SetCurrent(int64(now.Done))
}

// tail is the end of the bar's line: rate and time left.
func (p *progress) tail() string {
	now := *p.latest.Load()
	return fmt.Sprintf(" %s, %s left", rate(now), left(now))
}

// rate says how fast it goes.
func rate(p job.Progress) string {
	s := p.Elapsed.Seconds()
	if s <= 0 {
		return "-"
	}
	if p.Samples > 0 {
		return fmt.Sprintf("%.3g Msamples/s", float64(p.Samples)/s/1e6)
	}
	return fmt.Sprintf("%.3g/s", float64(p.Done-p.Found)/s)
}

// left estimates the time to the end from the mean rate so far.
func left(p job.Progress) time.Duration {
	ran := p.Done - p.Found
	if ran <= 0 {
		return 0
	}
	d := time.Duration(float64(p.Elapsed) / float64(ran) * float64(p.Total-p.Done))
	return d.Round(time.Second)
}

// done leaves the terminal as other output wants it.
func (p *progress) done() {
	p.mu.Lock()
	bars, bar := p.bars, p.bar
	p.bars = nil
	p.mu.Unlock()
	if bars == nil {
		return
	}
	if now := p.latest.Load(); now.Done >= now.Total {
		bar.SetTotal(-1, true)
	} else {
		bar.Abort(false)
	}
	bars.Wait()
}
