package kernel

import "example.org/guardring/pkg/cell"

func progress(label string, done, total int64) cell.Progress {
	return cell.Progress{Label: label, Done: done, Total: total}
}
