package kernel

import (
	"fmt"
	"html"
	"sync"
	"time"

	"example.org/guardring/pkg/cell"
)

const progressPause = 100 * time.Millisecond // between two updates of a bar

// bar is the one progress display of a cell. It is shown at the first report, updated as the work goes on, and left
// at its last state, so that the same work leaves the same output.
type bar struct {
	show func(forms map[string]any, update bool)

	mu    sync.Mutex
	state cell.Progress
	shown bool
	stale bool // the state is ahead of the display
	last  time.Time
}

// report takes a report of the work. Reports of several goroutines may come out of order: the bar never goes back
// while the label stays the same.
func (b *bar) report(p cell.Progress) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.shown && p.Label == b.state.Label && p.Total == b.state.Total && p.Done < b.state.Done {
		return
	}
	b.state = p
	b.stale = true
	if !b.shown || time.Since(b.last) >= progressPause {
		b.draw()
	}
}

// finish brings the display to the last state.
func (b *bar) finish() {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.stale {
		b.draw()
	}
}

func (b *bar) draw() {
	b.show(progressForms(b.state), b.shown)
	b.shown, b.stale, b.last = true, false, time.Now()
}

func progressForms(p cell.Progress) map[string]any {
	label := p.Label
	if label == "" {
		label = "working"
	}
	if p.Total <= 0 {
		text := fmt.Sprintf("%s: %d", label, p.Done)
		return map[string]any{"text/plain": text, "text/html": "<div><progress></progress> " + html.EscapeString(text) + "</div>"}
	}
	done := min(max(p.Done, 0), p.Total)
	percent := int(float64(done) / float64(p.Total) * 100)
	text := fmt.Sprintf("%s: %d of %d (%d %%)", label, done, p.Total, percent)
	return map[string]any{
		"text/plain": text,
		"text/html": fmt.Sprintf(`<div><progress value="%d" max="100" style="width:16em;vertical-align:middle"></progress> %s</div>`,
			percent, html.EscapeString(text)),
	}
}
