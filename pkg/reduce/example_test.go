package reduce_test

import (
	"context"
	"fmt"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

// The main job: from the folder of a bench to its result.
func ExampleRun() {
	b, err := bench.Open("../../datasets/attracted-disc")
	if err != nil {
		fmt.Println(err)
		return
	}
	r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(r)
	// Output:
	// permittivity = 8.8595(39) pF/m
	// relative_permittivity = 1.00059(44)
	// vacuum_permittivity = 8.8539(39) pF/m
}
