package gointerp

import (
	"sync/atomic"
	"time"

	"github.com/cosmos72/gomacro/fast"
)

// maxDepth is how deep interpreted functions may call each other. The Go runtime ends the process when a stack
// outgrows its limit, and no recover helps: a recursion without an end must be stopped before.
const maxDepth = 100000

// depthWatch looks at the depth of calls while a cell runs.
type depthWatch struct {
	done    chan struct{}
	tooDeep atomic.Bool
}

func (w *depthWatch) stop() { close(w.done) }

// watchDepth starts to watch. The watcher reads a counter that the cell's goroutine writes; a value that is a little
// old does no harm.
func (in *Interp) watchDepth(run *fast.Run) *depthWatch {
	w := &depthWatch{done: make(chan struct{})}
	go func() {
		tick := time.NewTicker(5 * time.Millisecond)
		defer tick.Stop()
		for {
			select {
			case <-w.done:
				return
			case <-tick.C:
				if env := run.CurrEnv; env != nil && env.CallDepth > maxDepth {
					w.tooDeep.Store(true)
					in.Interrupt()
					return
				}
			}
		}
	}()
	return w
}
