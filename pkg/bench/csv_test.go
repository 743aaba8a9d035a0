package bench

import (
	"bytes"
	"crypto/sha256"
	"encoding/csv"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"testing/iotest"
)

func TestReadCSVForms(t *testing.T) {
	for _, c := range []struct {
		name, text string
		set        CSVSettings
		want       string // columns as Go prints them
	}{
		{"plain", "a,b\n1,2\n3,4\n", CSVSettings{}, "[a b] [[1 3] [2 4]]"},
		{"no line end at the end", "a,b\n1,2\n3,4", CSVSettings{}, "[a b] [[1 3] [2 4]]"},
		{"CR LF", "a,b\r\n1,2\r\n3,4\r\n", CSVSettings{}, "[a b] [[1 3] [2 4]]"},
		{"byte order mark", "\xef\xbb\xbfa,b\n1,2\n", CSVSettings{}, "[a b] [[1] [2]]"},
		{"semicolon", "a;b\n1;2\n", CSVSettings{}, "[a b] [[1] [2]]"},
		{"tab", "a\tb\n1\t2\n", CSVSettings{}, "[a b] [[1] [2]]"},
		{"semicolon and decimal comma", "a;b\n1,5;-2,25e1\n", CSVSettings{DecimalComma: true}, "[a b] [[1.5] [-22.5]]"},
		{"comma and decimal comma", "a,b\n\"1,5\",2\n", CSVSettings{DecimalComma: true}, "[a b] [[1.5] [2]]"},
		{"tab that is stated", "a,1\tb\n1\t2\n", CSVSettings{Separator: '\t'}, "[a,1 b] [[1] [2]]"},
		{"quotes", "\"a\",\"b \"\"x\"\"\"\n\"1\",\" 2 \"\n", CSVSettings{}, "[a b \"x\"] [[1] [2]]"},
		{"blanks", " a , b \n 1 ,\t2\n", CSVSettings{}, "[a b] [[1] [2]]"},
		{"blank lines", "\na,b\n\n1,2\n\r\n3,4\n\n", CSVSettings{}, "[a b] [[1 3] [2 4]]"},
		{"missing", "a,b\n,2\n3,NA\n", CSVSettings{Missing: []string{"NA"}}, "[a b] [[NaN 3] [2 NaN]]"},
		{"one column", "a\n1\n2\n", CSVSettings{}, "[a] [[1 2]]"},
		{"a line end in a quoted cell", "a,b\n\"1\n\",2\n3,4\n", CSVSettings{Numbers: []string{"b"}}, "[a b] [[] [2 4]]"},
		{"a separator in a quoted cell", "a,b\n\"x,y\",2\n", CSVSettings{Numbers: []string{"b"}}, "[a b] [[] [2]]"},
		{"a column without header", "a,,b\n1,2,3\n", CSVSettings{Numbers: []string{"a", "b"}}, "[a  b] [[1] [] [3]]"},
		{"signs and exponents", "a,b\n+1e-3,-.5E+2\n", CSVSettings{}, "[a b] [[0.001] [-50]]"},
	} {
		// In pieces of one byte too, as a slow source gives them.
		for _, r := range []io.Reader{strings.NewReader(c.text), iotest.OneByteReader(strings.NewReader(c.text))} {
			tab, err := ReadCSV(r, "x.csv", c.set)
			if err != nil {
				t.Errorf("%s: %v", c.name, err)
				continue
			}
			if got := fmt.Sprintf("%v %v", tab.Header, tab.Number); got != c.want {
				t.Errorf("%s:\n got %s\nwant %s", c.name, got, c.want)
			}
			sum := sha256.Sum256([]byte(c.text))
			if tab.SHA256 != hex.EncodeToString(sum[:]) {
				t.Errorf("%s: wrong SHA-256", c.name)
			}
		}
	}
}

func TestReadCSVWords(t *testing.T) {
	tab, err := ReadCSV(strings.NewReader("k,x\nb,1\na,2\n\"b\",3\n,4\nb,5\n"), "x.csv", CSVSettings{Numbers: []string{"x"}, Words: []string{"k"}})
	if err != nil {
		t.Fatal(err)
	}
	w := tab.Word[0]
	if fmt.Sprint(w.Words, w.Index) != "[b a ] [0 1 0 2 0]" || w.At(2) != "b" || tab.Number[0] != nil || tab.Word[1] != nil {
		t.Errorf("words %q %v", w.Words, w.Index)
	}
	if tab.Line(0) != 2 || tab.Line(4) != 6 || tab.Column("x") != 1 || tab.Column("y") != -1 {
		t.Errorf("lines %d %d", tab.Line(0), tab.Line(4))
	}
}

// TestLines checks the line of every record where blank lines and quoted line
// ends stand between them.
func TestLines(t *testing.T) {
	text := "a,b\n1,x\n\n2,\"y\nz\"\n3,x\n\r\n\n4,x\n"
	tab, err := ReadCSV(strings.NewReader(text), "x.csv", CSVSettings{Numbers: []string{"a"}, Words: []string{"b"}})
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []int{2, 4, 6, 9} {
		if got := tab.Line(i); got != want {
			t.Errorf("record %d: line %d, want %d", i, got, want)
		}
	}
}

// messyCSV is a file large enough for many parts, with everything in it that
// makes cutting hard. The numbers are returned as text.
func messyCSV(rows int) (text []byte, cells [][2]string) {
	src := rand.New(rand.NewPCG(3, 4))
	var b bytes.Buffer
	b.WriteString("n,word,x\n")
	for i := range rows {
		word := []string{"up", "down", "\"with, comma\"", "\"with\nline\"", "\"with \"\"quotes\"\"\"", ""}[src.IntN(6)]
		x := strconv.FormatFloat((src.Float64()-0.5)*math.Pow(10, float64(src.IntN(20)-10)), 'g', 1+src.IntN(18), 64)
		if src.IntN(50) == 0 {
			x = "\"" + x + "\""
		}
		n := strconv.Itoa(i)
		fmt.Fprintf(&b, "%s,%s,%s", n, word, x)
		if src.IntN(3) == 0 {
			b.WriteString("\r")
		}
		b.WriteString("\n")
		if src.IntN(100) == 0 {
			b.WriteString("\n")
		}
		cells = append(cells, [2]string{n, strings.Trim(x, "\"")})
	}
	return b.Bytes(), cells
}

// TestPartsDoNotShow: the same table whatever the number of cores, and the one
// that encoding/csv and strconv give.
func TestPartsDoNotShow(t *testing.T) {
	text, cells := messyCSV(60_000) // seven parts
	records, err := csv.NewReader(bytes.NewReader(text)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	records = records[1:]
	// The size of the file as it is, not known, and wrong both ways, as when a file
	// grows or its first part is not like the others.
	for k, size := range []int{0, len(text), len(text) / 3, 4 * len(text), len(text)} {
		cores := []int{1, 2, 5}[k%3]
		was := runtime.GOMAXPROCS(cores)
		tab, err := readCSV(bytes.NewReader(text), "x.csv", int64(size), CSVSettings{}, nil, func(l *layout) error {
			l.modes = []mode{number, wordy, number}
			return nil
		}, maxRecords)
		runtime.GOMAXPROCS(was)
		if err != nil {
			t.Fatal(err)
		}
		if tab.N != len(cells) || len(records) != tab.N {
			t.Fatalf("%d cores: %d records, want %d", cores, tab.N, len(cells))
		}
		for i, c := range cells {
			want, err := strconv.ParseFloat(c[1], 64)
			if err != nil {
				t.Fatal(err)
			}
			if tab.Number[0][i] != float64(i) || math.Float64bits(tab.Number[2][i]) != math.Float64bits(want) {
				t.Fatalf("%d cores, record %d: %v %v, want %s %s", cores, i, tab.Number[0][i], tab.Number[2][i], c[0], c[1])
			}
			if got, want := tab.Word[1].At(i), strings.ReplaceAll(records[i][1], "\r\n", "\n"); got != want {
				t.Fatalf("%d cores, record %d: word %q, want %q", cores, i, got, want)
			}
		}
	}
}

// TestFirstErrorsAreTold wherever they stand, in order, whatever the cores.
func TestFirstErrorsAreTold(t *testing.T) {
	var b strings.Builder
	b.WriteString("x\n")
	for i := range 400_000 {
		if i%20_000 == 19_999 {
			b.WriteString("bad\n")
		} else {
			b.WriteString("1.25\n")
		}
	}
	for _, cores := range []int{1, 3} {
		was := runtime.GOMAXPROCS(cores)
		_, err := ReadCSV(strings.NewReader(b.String()), "x.csv", CSVSettings{})
		runtime.GOMAXPROCS(was)
		wantError(t, err, "x.csv:20001:", "x.csv:200001:")
		if n := strings.Count(err.Error(), "bad"); n != maxErrors {
			t.Errorf("%d errors, want %d", n, maxErrors)
		}
	}
}

// TestSameInEveryLine: one cause in line after line is told once, with its number
// and its hint.
func TestSameInEveryLine(t *testing.T) {
	for _, c := range []struct{ line, want string }{
		{"1,5;2\n", `x.csv:2: column x: "1,5" is not a number; if this is a decimal comma, say decimal = "comma" in [[readings]] (fit --decimal comma); the same in 4 more lines`},
		{"1.5;2;3\n", `x.csv:2: the record has 3 cells, the header 2; the same in 4 more lines`},
	} {
		_, err := ReadCSV(strings.NewReader("x;y\n"+strings.Repeat(c.line, 5)), "x.csv", CSVSettings{})
		if err == nil || err.Error() != c.want {
			t.Errorf("error\n%v\nwant\n%s", err, c.want)
		}
	}
}

func TestReadCSVFailures(t *testing.T) {
	_, err := ReadCSV(io.MultiReader(strings.NewReader("a\n"+strings.Repeat("1\n", 1<<20)), iotest.ErrReader(errors.New("disk gone"))), "x.csv", CSVSettings{})
	wantError(t, err, "x.csv: reading failed: disk gone")
	_, err = ReadCSV(strings.NewReader("a,b\n1,2\n"), "x.csv", CSVSettings{Numbers: []string{"c"}})
	wantError(t, err, `x.csv:1: there is no column "c"`)
	_, err = ReadCSV(strings.NewReader(strings.Repeat("a,", 5000)+"\n1\n"), "x.csv", CSVSettings{})
	wantError(t, err, "at most 4096")
	_, err = ReadCSV(strings.NewReader("a\n\""+strings.Repeat("x\n", 1<<20)), "x.csv", CSVSettings{})
	wantError(t, err, "the line is longer than 1048576 bytes")
	many := "a\n" + strings.Repeat("1\n", 1000)
	_, err = readCSV(strings.NewReader(many), "x.csv", 0, CSVSettings{}, nil, func(l *layout) error { l.modes[0] = number; return nil }, 999)
	wantError(t, err, "more than 999 data records")
}

func TestTimeStamps(t *testing.T) {
	text := strings.NewReplacer("\n0,", "\n2026-03-04T10:00:00Z,", "\n10,", "\n2026-03-04T11:00:10.5+01:00,", "\n20,", "\n2026-03-04T10:00:20Z,",
		"\n30,", "\n,", "\n40,", "\n2026-03-04T09:59:59.75Z,").Replace(goodReadings)
	b, err := OpenWith(testKind(), dataset(t, map[string]string{"bench.toml": goodBench, "readings.csv": text}))
	if err != nil {
		t.Fatal(err)
	}
	if got := fmt.Sprint(b.Rows.Time); got != "[0 10.5 20 NaN -0.25]" {
		t.Errorf("times %s", got)
	}
	if got := b.Rows.Epoch.Format("2006-01-02T15:04:05Z"); got != "2026-03-04T10:00:00Z" || !b.Rows.HasTime {
		t.Errorf("epoch %s", got)
	}
}

// TestMillionRows: more than a million records load, on lines that are right to
// the last.
func TestMillionRows(t *testing.T) {
	const rows = 1_100_000
	tab, err := ReadCSV(strings.NewReader("x\n"+strings.Repeat("2.5\n", rows)), "x.csv", CSVSettings{})
	if err != nil {
		t.Fatal(err)
	}
	if tab.N != rows || tab.Line(rows-1) != rows+1 || len(tab.Number[0]) != rows || tab.Number[0][rows-1] != 2.5 {
		t.Errorf("%d records, last on line %d", tab.N, tab.Line(rows-1))
	}
}
