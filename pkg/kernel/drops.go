package kernel

import (
	"fmt"
	"io"
	"sync"
	"time"
)

// drops counts what is thrown away and writes it down, at most one line a second.
type drops struct {
	mu     sync.Mutex
	w      io.Writer
	count  int64 // in all
	unsaid int64 // since the latest line
	last   time.Time
	now    func() time.Time
}

func newDrops(w io.Writer) *drops { return &drops{w: w, now: time.Now} }

// add counts one thing dropped at a place ("shell") for a reason.
func (d *drops) add(where string, reason any) {
	d.mu.Lock()
	defer d.mu.Unlock()
	d.count++
	d.unsaid++
	if now := d.now(); now.Sub(d.last) >= time.Second {
		d.last = now
		// Nothing can be done about a standard error that can't be written.
		_, _ = fmt.Fprintf(d.w, "guardring-kernel: dropped %d (%d in all), latest on %s: %.300s\n", d.unsaid, d.count, where, fmt.Sprint(reason))
		d.unsaid = 0
	}
}
