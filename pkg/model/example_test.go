package model_test

import (
	"fmt"

	"example.org/guardring/pkg/model"
)

// What a bench of a kind reads, and what it may correct.
func ExampleLookup() {
	k, err := model.Lookup("plate-charge")
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(k.Title)
	for _, c := range k.Channels {
		fmt.Printf("%s in %s\n", c.Name, c.Unit.Symbol)
	}
	// Output:
	// Charge or capacitance of guarded plates
	// voltage in kV
	// gap in mm
	// hold in s
	// charge in nC
	// capacitance in pF
}
