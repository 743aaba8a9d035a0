package figure

import (
	"encoding/json"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// fixture reads an invented reduction of an attracted disc: 72 readings at four
// gaps, each set three times.
func fixture(t testing.TB) *Data {
	t.Helper()
	b, err := os.ReadFile("testdata/record.json")
	if err != nil {
		t.Fatal(err)
	}
	rec := new(reduce.Record)
	if err := json.Unmarshal(b, rec); err != nil {
		t.Fatal(err)
	}
	d := FromRecord(rec)
	d.Rows.PredictorNames = []string{"voltage", "gap"}
	for i := range d.Rows.Predictors {
		d.Rows.Predictors[i] = d.Rows.Predictors[i][:0]
	}
	for _, row := range rec.Rows {
		for c, n := range d.Rows.PredictorNames {
			d.Rows.Predictors[c] = append(d.Rows.Predictors[c], float64(row.Channels[n]))
		}
	}
	d.Rows.ResponseName = "force"
	d.Units = map[string]si.Unit{"voltage": si.MustUnit("kV"), "gap": si.MustUnit("mm")}
	for i := range d.Rows.N {
		d.Groups = append(d.Groups, strconv.Itoa(1+i/6))
	}
	r := rand.New(rand.NewPCG(1, 2))
	for _, m := range rec.Measurands {
		y := make([]float64, m.MonteCarlo.Trials)
		for i := range y {
			y[i] = float64(m.Value) + float64(m.U)*r.NormFloat64()
		}
		d.Trials = append(d.Trials, y)
	}
	return d
}
