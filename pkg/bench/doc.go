// Package bench reads and checks bench files, budget files and the readings
// they name, and writes a bench file to start from.
package bench
