//go:build !linux

package kernel

// ReleaseProgramPages does nothing: the system decides by itself which pages of a program stay in memory.
func ReleaseProgramPages() error { return nil }
