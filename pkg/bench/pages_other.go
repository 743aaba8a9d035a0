//go:build !linux

package bench

// inLargePages is a hint that this system has no use for.
func inLargePages([]float64) {}
