package gum

import (
	"context"
	"fmt"
	"runtime"
	"sync"
	"sync/atomic"

	"example.org/guardring/pkg/cell"
)

// A runner spreads blocks over workers.
type runner struct {
	plan   *plan
	s      Settings
	worker []*worker
	total  int64        // trials for progress
	done   atomic.Int64 // trials done
}

func newRunner(p *plan, s Settings) (*runner, error) {
	n := runtime.GOMAXPROCS(0)
	if p.model.Serial {
		n = 1
	}
	r := &runner{plan: p, s: s, total: s.Trials}
	for range n {
		w, err := p.newWorker()
		if err != nil {
			return nil, err
		}
		r.worker = append(r.worker, w)
	}
	return r, nil
}

// blocks runs blocks first to last−1, of trials in all, and gives each worker's
// chunks in order to use, with the worker's number, the block, and the trial's
// place in the block. Blocks come in no particular order. end, if there is one, is
// called after each block.
func (r *runner) blocks(ctx context.Context, first, last, trials int64, count bool,
	use func(worker int, block int64, from int, out [][]float64), end func(worker int, block int64)) error {
	var next atomic.Int64
	next.Store(first)
	work := func(k int) error {
		w := r.worker[k]
		for {
			b := next.Add(1) - 1
			if b >= last {
				return nil
			}
			w.start(r.s.Seed, uint64(b))
			n := int(min(BlockTrials, trials-b*BlockTrials))
			for from := 0; from < n; from += chunk {
				if err := ctx.Err(); err != nil {
					return err
				}
				w.next(min(chunk, n-from))
				use(k, b, from, w.out)
			}
			if end != nil {
				end(k, b)
			}
			if count {
				cell.Report(ctx, "Monte Carlo", r.done.Add(int64(n)), r.total)
			}
		}
	}
	n := int(min(int64(len(r.worker)), last-first))
	if n <= 1 {
		return r.stopped(work(0))
	}
	errs := make([]error, n)
	var wg sync.WaitGroup
	for k := 1; k < n; k++ {
		wg.Go(func() { errs[k] = work(k) })
	}
	errs[0] = work(0)
	wg.Wait()
	for _, err := range errs {
		if err != nil {
			return r.stopped(err)
		}
	}
	return nil
}

// stopped says how far a run came that its context ended.
func (r *runner) stopped(err error) error {
	switch {
	case err == nil:
		return nil
	case r.total > 0:
		return cell.Stopped(fmt.Sprintf("after %d of %d Monte Carlo trials", r.done.Load(), r.total), err)
	}
	return cell.Stopped(fmt.Sprintf("after %d Monte Carlo trials", r.done.Load()), err)
}

// blockCount returns how many blocks hold n trials.
func blockCount(n int64) int64 { return (n + BlockTrials - 1) / BlockTrials }
