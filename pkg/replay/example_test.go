package replay_test

import (
	"context"
	"fmt"
	"log"
	"os"
	"path/filepath"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/replay"
)

// A dataset becomes one file, which verifies and replays anywhere.
func Example() {
	ctx := context.Background()
	dataset := filepath.Join("..", "..", "datasets", "attracted-disc") // invented readings
	p, err := replay.Pack(ctx, dataset, replay.PackSettings{Date: "2026-03-04", Reduce: reduce.Settings{Trials: 500}})
	if err != nil {
		log.Fatal(err)
	}
	dir, err := os.MkdirTemp("", "example-")
	if err != nil {
		log.Fatal(err)
	}
	defer os.RemoveAll(dir)
	file := filepath.Join(dir, "attracted-disc.zip")
	f, err := os.Create(file)
	if err != nil {
		log.Fatal(err)
	}
	if err := p.Write(f); err != nil {
		log.Fatal(err)
	}
	if err := f.Close(); err != nil {
		log.Fatal(err)
	}
	all, err := replay.RunPack(ctx, file, replay.Settings{})
	if err != nil {
		log.Fatal(err)
	}
	for _, c := range all {
		fmt.Println(c.Same(), c.Within, c.Different)
	}
	// Output:
	// true 0 0
}

// Settings are given as names and values; strings need no quotes.
func ExampleParseAssignment() {
	a, err := replay.ParseAssignment("dataset=../datasets/plate-charge")
	fmt.Println(a.Name, a.Value, err)
	_, err = replay.ParseAssignment("seven")
	fmt.Println(err)
	// Output:
	// dataset ../datasets/plate-charge <nil>
	// "seven": NAME=VALUE is due, with a name of the notebook's settings
}
