package main

import (
	"io"
	"sync"
	"time"

	"github.com/schollz/progressbar/v3"

	"example.org/guardring/pkg/cell"
)

// bars draws one progress bar at a time; work may report from any goroutine.
type bars struct {
	mu    sync.Mutex
	w     io.Writer
	label string
	bar   *progressbar.ProgressBar
}

func (b *bars) show(p cell.Progress) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.bar == nil || b.label != p.Label {
		b.end()
		total := p.Total
		if total == 0 {
			total = -1
		}
		b.label = p.Label
		b.bar = progressbar.NewOptions64(total, progressbar.OptionSetWriter(b.w), progressbar.OptionSetDescription(p.Label),
			progressbar.OptionThrottle(100*time.Millisecond), progressbar.OptionClearOnFinish(), progressbar.OptionSetWidth(30),
			progressbar.OptionSetPredictTime(true))
	}
	// A bar that can't be drawn is no reason to stop the work.
	_ = b.bar.Set64(p.Done)
}

func (b *bars) end() {
	if b.bar != nil {
		_ = b.bar.Clear()
		b.bar = nil
	}
}

// finish takes the bar away.
func (b *bars) finish() {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.end()
}
