package bench

import "example.org/guardring/pkg/model"

// Starter returns a commented bench file with every key that the kind takes and
// the header line of a readings file that fits it.
func Starter(kind *model.Kind) (benchTOML, csvHeader []byte) { return nil, nil }
