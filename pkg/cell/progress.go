package cell

import "context"

// Progress is one report of how far a piece of work has come.
type Progress struct {
	Label string // what is being done, in a few words: "Monte Carlo"
	Done  int64  // units finished so far
	Total int64  // units in all; 0 means unknown
}

type progressKey struct{}

// WithProgress returns a context whose work reports to sink. The sink is called from whatever goroutine does the
// work, several at a time if several work, so it must be safe for that; it should return at once.
// A nil sink silences work that would otherwise report to a sink further out.
func WithProgress(ctx context.Context, sink func(Progress)) context.Context {
	return context.WithValue(ctx, progressKey{}, sink)
}

// Report tells the sink of ctx, if there is one, that done of total units are finished; total 0 means that the total
// is unknown. Without a sink it costs one context look-up. It may be called from any goroutine.
func Report(ctx context.Context, label string, done, total int64) {
	if sink, _ := ctx.Value(progressKey{}).(func(Progress)); sink != nil {
		sink(Progress{Label: label, Done: done, Total: total})
	}
}
