// Package lsq estimates parameters from readings by least squares.
package lsq
