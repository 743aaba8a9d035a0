package lab_test

import (
	"fmt"

	"github.com/go-gota/gota/dataframe"
	"github.com/go-gota/gota/series"

	"example.org/guardring/pkg/lab"
)

// The main job: open a bench, reduce it, ask for the result.
func Example() {
	b := lab.Open("../../datasets/attracted-disc")
	r := lab.Reduce(b, lab.Settings{LawOnly: true})
	m := r.Record().Measurands[0]
	fmt.Printf("%s %.4e %s, u %.1e\n", m.Name, r.Value(), m.Unit, r.U())
	fmt.Println(r.Correlations())
	// Output:
	// permittivity 8.8595e-12 F/m, u 3.9e-15
	//       parameter               1       2
	//    ────────────────────────────────────
	//    1  permittivity
	//    2  contact potential  −0.007
	//    3  gap offset         +0.934  −0.004
}

// Leaving a reading out gives a new reduction; the old one stays.
func ExampleResult_Exclude() {
	r := lab.Reduce("../../datasets/attracted-disc", lab.Settings{LawOnly: true})
	without := r.Exclude(37, "left out on trial")
	fmt.Println(r.Record().Fit.Rows, without.Record().Fit.Rows)
	fmt.Println(without.Exclusions())
	// Output:
	// 71 70
	//    reading  file          line  why it was left out
	//    ────────────────────────────────────────────────────────────────
	//         37  readings.csv    38  left out on trial
	//         40  readings.csv    41  spark at the guard noted in the log
}

// A frame carries its units in its headers; they need not be those of the file.
func ExampleWithFrame() {
	b := lab.Open("../../datasets/attracted-disc")
	df := b.Frame()
	volts := df.Col("V/kV").Float()
	for i := range volts {
		volts[i] *= 1000
	}
	df = df.Drop("V/kV").Mutate(series.New(volts, series.Float, "voltage/V"))
	r := lab.Reduce(df, b, lab.Settings{LawOnly: true})
	s := lab.Reduce(b, lab.Settings{LawOnly: true})
	fmt.Println(r.Value() == s.Value(), r.U() == s.U())
	// Output:
	// true true
}

// Readings selected in a frame are reduced with the same bench.
func ExampleReadFrame() {
	df := lab.ReadFrame("../../datasets/attracted-disc/readings.csv")
	fmt.Println(df.Nrow(), df.Names())
	wide := df.Filter(dataframe.F{Colname: "gap/mm", Comparator: ">", Comparando: 5.5})
	fmt.Println(wide.Nrow())
	// Output:
	// 91 [t/s kind gap_no polarity V/kV gap/mm m/g]
	// 61
}
