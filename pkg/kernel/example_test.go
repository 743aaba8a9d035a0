package kernel_test

import (
	"context"
	"fmt"
	"log"
	"time"

	"example.org/guardring/pkg/kernel"
	"example.org/guardring/pkg/kernel/gointerp"
)

// A cell runs in a kernel, and its outputs come back as a notebook holds them. Here
// the kernel is this program itself; LaunchOf is the launch of a compiled one.
func ExampleClient_Execute() {
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	c, err := kernel.Start(ctx, testLaunch())
	if err != nil {
		log.Fatal(err)
	}
	defer c.Kill()
	e, err := c.Execute(ctx, "gap := 4e-3\ngap * 2", kernel.ExecuteOptions{})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(e.Status, e.Count, e.Result())
	e, err = c.Execute(ctx, "gap * width", kernel.ExecuteOptions{})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(e.Status, e.Count, e.EName)
	// Output:
	// ok 1 0.008
	// error 2 CompileError
}

func ExampleIsComplete() {
	in, err := gointerp.New(nil, nil)
	if err != nil {
		log.Fatal(err)
	}
	for _, code := range []string{"gap := 4e-3", "for i := 0; i < 3; i++ {", "gap := := 4"} {
		status, indent := kernel.IsComplete(in, code)
		fmt.Printf("%s %q\n", status, indent)
	}
	// Output:
	// complete ""
	// incomplete "\t"
	// invalid ""
}

func ExampleComplete() {
	in, err := gointerp.New(nil, nil)
	if err != nil {
		log.Fatal(err)
	}
	if _, err := in.Run(context.Background(), kernel.Cell{Code: "plate_voltage, plate_gap := 4.2e3, 4e-3"}); err != nil {
		log.Fatal(err)
	}
	matches, start, end := kernel.Complete(in, "x := plate_", 11)
	for _, m := range matches {
		fmt.Println(m.Text, m.Kind, m.Type)
	}
	fmt.Println(start, end)
	// Output:
	// plate_gap var float64
	// plate_voltage var float64
	// 5 11
}
