package reduce

import (
	"encoding/csv"
	"fmt"
	"strings"

	"example.org/guardring/pkg/bench"
)

// separators are the words for what separates the cells of a file of readings.
var separators = map[byte]string{',': "comma", ';': "semicolon", '\t': "tab"}

// csvOptions is how a file was read, as a record's options have it; what is usual
// (a decimal point, a separator found from the header) is left out. The words that
// mean a missing value are one line of CSV.
func csvOptions(s bench.CSVSettings) map[string]string {
	out := map[string]string{}
	if s.DecimalComma {
		out["decimal"] = "comma"
	}
	if w, ok := separators[s.Separator]; ok {
		out["separator"] = w
	}
	if len(s.Missing) > 0 {
		var b strings.Builder
		w := csv.NewWriter(&b)
		if err := w.Write(s.Missing); err == nil {
			w.Flush()
			out["missing"] = strings.TrimSuffix(b.String(), "\n")
		}
	}
	return out
}

// CSVOptions reads the options "separator", "decimal" and "missing" of a fit's
// record; each may be empty, as in records written before there were any.
func CSVOptions(separator, decimal, missing string) (bench.CSVSettings, error) {
	var s bench.CSVSettings
	switch decimal {
	case "", "point":
	case "comma":
		s.DecimalComma = true
	default:
		return s, fmt.Errorf("decimal: %q is neither point nor comma", decimal)
	}
	for c, w := range separators {
		if w == separator {
			s.Separator = c
		}
	}
	if separator != "" && s.Separator == 0 {
		return s, fmt.Errorf("separator: %q is neither comma, semicolon nor tab", separator)
	}
	if missing != "" {
		words, err := csv.NewReader(strings.NewReader(missing)).Read()
		if err != nil {
			return s, fmt.Errorf("missing: %q is no line of words between commas: %w", missing, err)
		}
		s.Missing = words
	}
	return s, nil
}
