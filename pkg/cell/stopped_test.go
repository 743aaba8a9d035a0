package cell_test

import (
	"context"
	"errors"
	"fmt"

	"example.org/guardring/pkg/cell"
)

func ExampleStopped() {
	err := cell.Stopped("after 3 of 5 benches", context.Canceled)
	fmt.Println(err, errors.Is(err, context.Canceled))
	// Output: interrupted after 3 of 5 benches true
}
