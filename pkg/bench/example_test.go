package bench_test

import (
	"fmt"
	"log"
	"os"
	"path/filepath"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/model"
)

// A dataset is a folder: here one that Starter has begun, with two invented
// rows.
func ExampleOpen() {
	kind, err := model.Lookup("attracted-disc")
	if err != nil {
		log.Fatal(err)
	}
	dir, err := os.MkdirTemp("", "bench")
	if err != nil {
		log.Fatal(err)
	}
	defer os.RemoveAll(dir)
	text, header := bench.Starter(kind)
	rows := string(header) + "0,reading,1,4.0,5.0,0.9\n10,reading,1,-4.0,5.0,0.9\n"
	for name, data := range map[string]string{"bench.toml": string(text), "readings.csv": rows} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(data), 0o644); err != nil {
			log.Fatal(err)
		}
	}
	b, err := bench.Open(dir)
	if err != nil {
		log.Fatal(err)
	}
	b, err = b.Exclude(2, "door opened")
	if err != nil {
		log.Fatal(err)
	}
	voltage := b.Channels[0]
	fmt.Println(b.Rows.N, "records of", b.Kind.Name)
	fmt.Println(voltage.Name, voltage.Readings, "V")
	file, line := b.Rows.Place(1)
	fmt.Printf("%s:%d left out: %s\n", file, line, b.Rows.Reason(1))
	// Output:
	// 2 records of attracted-disc
	// voltage [4000 -4000] V
	// readings.csv:3 left out: door opened
}

// Numbers are exact, missing values NaN, and errors say where.
func ExampleReadCSV() {
	t, err := bench.ReadCSV(strings.NewReader("V/kV;F/mN\n2,5;0,0031\n5,0;NA\n"), "force.csv",
		bench.CSVSettings{DecimalComma: true, Missing: []string{"NA"}})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(t.Header, t.N, t.Number)
	_, err = bench.ReadCSV(strings.NewReader("V/kV;F/mN\n2,5;0,0031\n"), "force.csv", bench.CSVSettings{})
	fmt.Println(err)
	// Output:
	// [V/kV F/mN] 2 [[2.5 5] [0.0031 NaN]]
	// force.csv:2: column V/kV: "2,5" is not a number; if this is a decimal comma, say decimal = "comma" in [[readings]] (fit --decimal comma)
}

// A budget file gives the model that package gum propagates.
func ExampleOpenBudget() {
	dir, err := os.MkdirTemp("", "budget")
	if err != nil {
		log.Fatal(err)
	}
	defer os.RemoveAll(dir)
	path := filepath.Join(dir, "field.toml")
	if err := os.WriteFile(path, []byte(`format = 1
title = "Field between plates"
[inputs]
v = { value = "10 kV", relative_u = "0.01 %", dof = 50 }
d = { value = "100 mm", half_width = "0.1 mm", shape = "rectangular" }
[outputs.field]
formula = "v/d"
unit = "kV/m"
`), 0o644); err != nil {
		log.Fatal(err)
	}
	b, err := bench.OpenBudget(path)
	if err != nil {
		log.Fatal(err)
	}
	for _, q := range b.Quantities {
		fmt.Printf("%s = %g, %s, u = %.3g\n", q.Name, q.Dist.Value, q.Dist.Shape, q.Dist.U)
	}
	fmt.Println(b.Outputs[0].Name, "=", b.Outputs[0].Formula, "in", b.Outputs[0].Unit)
	// Output:
	// v = 10000, normal, u = 1
	// d = 0.1, rectangular, u = 5.77e-05
	// field = v/d in kV/m
}
