package lab

import (
	"io"
	"math"
	"os"
	"strconv"

	"github.com/go-gota/gota/dataframe"
	"github.com/go-gota/gota/series"

	"example.org/guardring/pkg/bench"
)

// readTable reads a CSV file: every column as words, so that nothing is lost.
func readTable(path string) (*bench.Table, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	head, err := bench.ReadCSV(f, path, bench.CSVSettings{Numbers: []string{}})
	if err != nil {
		return nil, err
	}
	if _, err := f.Seek(0, io.SeekStart); err != nil {
		return nil, err
	}
	return bench.ReadCSV(f, path, bench.CSVSettings{Words: head.Header})
}

// numbers reads a column of words as numbers; NaN where a cell is empty.
func numbers(l *bench.Labels) ([]float64, bool) {
	value := make([]float64, len(l.Words))
	for i, w := range l.Words {
		if w == "" {
			value[i] = math.NaN()
			continue
		}
		x, err := strconv.ParseFloat(w, 64)
		if err != nil {
			return nil, false
		}
		value[i] = x
	}
	out := make([]float64, len(l.Index))
	for i, k := range l.Index {
		out[i] = value[k]
	}
	return out, true
}

func readFrame(path string) (dataframe.DataFrame, error) {
	t, err := readTable(path)
	if err != nil {
		return dataframe.DataFrame{}, err
	}
	var cols []series.Series
	for c, h := range t.Header {
		if x, ok := numbers(t.Word[c]); ok {
			cols = append(cols, series.New(x, series.Float, h))
			continue
		}
		words := make([]string, t.N)
		for i := range words {
			words[i] = t.Word[c].At(i)
		}
		cols = append(cols, series.New(words, series.String, h))
	}
	df := dataframe.New(cols...)
	return df, df.Err
}
