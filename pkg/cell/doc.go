// Package cell is what running work may use of its surroundings: the context of the notebook cell it runs in, a place
// to report progress, rich display, and a way to end the cell with an error.
//
// Outside a notebook nobody listens: Context is context.Background, progress, displays and clears go nowhere, and
// Fail panics with a Failure. A command that wants progress on its terminal puts a sink into its context with
// WithProgress; the kernel does the same with a sink that draws one updating bar, so numeric packages report in
// one way only:
//
//	for i, block := range blocks {
//		cell.Report(ctx, "trials", int64(i), int64(len(blocks)))
//		…
//	}
//
// The package knows no numbers, no units and no wire protocol. Every floor may import it; it imports nothing but
// the standard library.
package cell
