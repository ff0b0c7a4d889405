package main

import (
	"io"
	"os"
	"sync"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// patience is how long a job may take without a progress bar.
const patience = time.Second

// progress shows a bar on a terminal for a job that outlasts the patience.
// Its methods may be called from several goroutines.
type progress struct {
	mu    sync.Mutex
	w     io.Writer // nil when there is no terminal
	title string
	start time.Time
	bar   *progressbar.ProgressBar
}

func newProgress(w io.Writer, title string) *progress {
	p := &progress{title: title, start: time.Now()}
	if f, ok := w.(*os.File); ok && term.IsTerminal(int(f.Fd())) {
		p.w = w
	}
	return p
}

// update tells of finished work out of all work, in any unit.
func (p *progress) update(done, all int64) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.w == nil || time.Since(p.start) < patience || all <= 0 {
		return
	}
	if p.bar == nil {
		p.bar = progressbar.NewOptions64(all,
			progressbar.OptionSetWriter(p.w),
			progressbar.OptionSetDescription(p.title),
			progressbar.OptionSetWidth(30),
			progressbar.OptionSetPredictTime(true),
			progressbar.OptionThrottle(100*time.Millisecond),
			progressbar.OptionClearOnFinish())
	}
	// It fails when the terminal is gone, which is no reason to stop.
	_ = p.bar.Set64(done)
}

// close takes the bar off the terminal.
func (p *progress) close() {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.bar != nil {
		_ = p.bar.Clear()
		p.bar = nil
	}
	p.w = nil
}
