package replay

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
	"unicode"
)

// wordOf is a piece of a printed line: a number or anything else.
type wordOf struct {
	text  string
	num   bool
	value float64
	u     float64 // from "8.8542(31)", 0 when there is none
}

// printedNumber is a number as people and programs print it: sign (also U+2212),
// decimal digits, the uncertainty of the last digits in brackets (GUM 7.2.2,
// example 2), exponent.
var printedNumber = regexp.MustCompile(`^([+\-−]?)(\d+(?:\.\d+)?|\.\d+)(?:\((\d+)\))?([eE][+\-]?\d+)?`)

// superPower is a power of ten in superscripts after a number: ×10⁻¹².
var superPower = regexp.MustCompile(`^\s?[×·]\s?10([⁺⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+)`)

var superscripts = strings.NewReplacer("⁺", "+", "⁻", "-", "⁰", "0", "¹", "1", "²", "2", "³", "3", "⁴", "4", "⁵", "5", "⁶", "6", "⁷", "7", "⁸", "8", "⁹", "9")

// rule reports characters that only draw: blanks, lines and bars.
func rule(r rune) bool { return unicode.IsSpace(r) || (r >= 0x2500 && r <= 0x259F) }

// wordsOf takes a line apart. Digits inside words, versions, dates and sums are no
// numbers.
func wordsOf(line string) []wordOf {
	var out []wordOf
	var word strings.Builder
	flush := func() {
		if word.Len() > 0 {
			out = append(out, wordOf{text: word.String()})
			word.Reset()
		}
	}
	prev, before := ' ', ' '
	for i := 0; i < len(line); {
		rest := line[i:]
		if n, size, ok := numberAt(rest, prev, before); ok {
			flush()
			out = append(out, n)
			consumed := []rune(rest[:size])
			prev, before = consumed[len(consumed)-1], 'x'
			i += size
			continue
		}
		r := []rune(rest[:min(len(rest), 4)])[0]
		switch {
		case rule(r):
			flush()
		case r == '<': // a tag begins
			flush()
			word.WriteRune(r)
		case r == '>':
			word.WriteRune(r)
			flush()
		default:
			word.WriteRune(r)
		}
		before, prev = prev, r
		i += len(string(r))
	}
	flush()
	return out
}

func wordish(r rune) bool { return unicode.IsLetter(r) || unicode.IsDigit(r) || r == '_' || r == '.' }

// numberAt reads the number at the start of s, which stands after prev and the
// rune before that.
func numberAt(s string, prev, before rune) (wordOf, int, bool) {
	m := printedNumber.FindStringSubmatch(s)
	if m == nil || wordish(prev) && (m[1] == "" || prev != '.') {
		return wordOf{}, 0, false
	}
	if m[1] == "" && (prev == '-' || prev == '+') && wordish(before) {
		return wordOf{}, 0, false // the second half of a date, a serial number
	}
	if prev == ':' && unicode.IsDigit(before) {
		return wordOf{}, 0, false // minutes
	}
	size := len(m[0])
	after := []rune(s[size:min(len(s), size+8)])
	if len(after) > 0 {
		next := after[0]
		if unicode.IsLetter(next) || next == '_' {
			return wordOf{}, 0, false
		}
		if (next == '.' || next == '-' || next == ':') && len(after) > 1 && unicode.IsDigit(after[1]) {
			return wordOf{}, 0, false // a version, a date, a time of day
		}
	}
	digits := m[2]
	sign := strings.ReplaceAll(m[1], "−", "-")
	exponent := m[4]
	if p := superPower.FindStringSubmatch(s[size:]); p != nil && exponent == "" {
		exponent = "e" + superscripts.Replace(p[1])
		size += len(p[0])
	}
	v, err := strconv.ParseFloat(sign+digits+exponent, 64)
	if err != nil {
		return wordOf{}, 0, false
	}
	w := wordOf{text: s[:size], num: true, value: v}
	if m[3] != "" {
		decimals := 0
		if _, frac, ok := strings.Cut(digits, "."); ok {
			decimals = len(frac)
		}
		if u, err := strconv.ParseFloat(m[3]+exponentOf(exponent, -decimals), 64); err == nil {
			w.u = u
		}
	}
	return w, size, true
}

// exponentOf is an exponent such as "e-12" with n added.
func exponentOf(e string, n int) string {
	if len(e) > 1 {
		if x, err := strconv.Atoi(strings.TrimPrefix(e[1:], "+")); err == nil {
			n += x
		}
	}
	return "e" + strconv.Itoa(n)
}

// printedLine is a line of output taken apart.
type printedLine struct {
	number   int // from 1
	text     string
	words    []wordOf
	skeleton string // with # for every number
}

func printedLines(s string) []printedLine {
	var out []printedLine
	for i, l := range strings.Split(s, "\n") {
		p := printedLine{number: i + 1, text: strings.TrimSpace(l), words: wordsOf(l)}
		if len(p.words) == 0 {
			continue
		}
		parts := make([]string, len(p.words))
		for k, w := range p.words {
			parts[k] = w.text
			if w.num {
				parts[k] = "#"
			}
		}
		p.skeleton = strings.Join(parts, " ")
		out = append(out, p)
	}
	return out
}

// label names number k of a line by the words that lead to it.
func (p *printedLine) label(k int) string {
	var words []string
	for _, w := range p.words[:k] {
		if !w.num {
			words = append(words, w.text)
		}
	}
	if len(words) > 6 {
		words = words[len(words)-6:]
	}
	name := strings.Trim(strings.Join(words, " "), " =:;,.(")
	n := 0
	for _, w := range p.words[:k+1] {
		if w.num {
			n++
		}
	}
	if name == "" {
		return fmt.Sprintf("line %d, number %d", p.number, n)
	}
	if n > 1 {
		return fmt.Sprintf("%s, number %d of the line", name, n)
	}
	return name
}

// printed compares two printed texts: every number, and the words about them.
// slack is a size below which numbers of a drawing do not differ.
func (c *Comparison) printed(place, stored, now string, slack float64) {
	if stored == now {
		for _, l := range printedLines(stored) {
			for _, w := range l.words {
				if w.num {
					c.Identical++
				}
			}
		}
		c.Identical++ // the words
		return
	}
	a, b := printedLines(stored), printedLines(now)
	before := c.Different
	for _, pair := range align(a, b) {
		c.lines(place, pair[0], pair[1], slack)
	}
	if c.Different == before {
		c.Identical++
	}
}

// lines compares two lines; one may be nil.
func (c *Comparison) lines(place string, a, b *printedLine, slack float64) {
	if a == nil || b == nil || len(a.words) != len(b.words) {
		c.differentLines(place, a, b)
		return
	}
	for k := range a.words {
		x, y := &a.words[k], &b.words[k]
		if x.num != y.num || (!x.num && x.text != y.text && !(version(x.text) && version(y.text))) {
			c.differentLines(place, a, b)
			return
		}
	}
	for k := range a.words {
		x, y := &a.words[k], &b.words[k]
		switch {
		case x.num && slack > 0 && math.Abs(x.value-y.value) <= slack && x.text != y.text:
			c.Within++
		case x.num && x.value == y.value && x.text != y.text:
			// The same number, with another uncertainty or other digits.
			c.words(place, a.label(k), x.text, y.text)
		case x.num:
			c.numbers(place, a.label(k), x.text, y.text, x.value, y.value, x.u, 0)
		case x.text != y.text:
			c.versionNote(place, "%s is now %s", a.text, b.text)
		}
	}
}

func (c *Comparison) differentLines(place string, a, b *printedLine) {
	switch {
	case a == nil && moduleLine(b):
		c.versionNote(place, "the tool now holds the module %s", b.text)
	case b == nil && moduleLine(a):
		c.versionNote(place, "the tool no longer holds the module %s", a.text)
	case moduleLine(a) && moduleLine(b):
		c.versionNote(place, "the module %s is now %s", a.text, b.text)
	case a == nil:
		c.words(place, fmt.Sprintf("line %d", b.number), "(nothing)", b.text)
	case b == nil:
		c.words(place, fmt.Sprintf("line %d", a.number), a.text, "(nothing)")
	default:
		c.words(place, fmt.Sprintf("line %d", a.number), a.text, b.text)
	}
}

// versionNote notes another build of the tool. The forms in HTML and LaTeX say
// again what the plain text of the same output says.
func (c *Comparison) versionNote(place, format string, texts ...any) {
	if strings.HasSuffix(place, ", text/html") || strings.HasSuffix(place, ", text/latex") {
		return
	}
	for i := range texts {
		texts[i] = strings.Join(strings.Fields(texts[i].(string)), " ")
	}
	c.note("%s: %s", place, fmt.Sprintf(format, texts...))
}

// versionText is a version, the sum of a module or a platform: what another build
// of the tool may say without other numbers.
var versionText = regexp.MustCompile(`^((go|v)\d+\.\d+\S*|\d+\.\d+\.\d+[-+\w.]*[,;.]?|h1:[A-Za-z0-9+/]{43}=|[a-z0-9]+/(amd64|arm64|386|arm|riscv64|ppc64le|s390x|loong64))$`)

func version(s string) bool { return versionText.MatchString(s) }

// moduleSum is the sum of a module as go.sum has it.
var moduleSum = regexp.MustCompile(`\bh1:[A-Za-z0-9+/]{43}=`)

// moduleLine reports a line that names a module with its sum.
func moduleLine(p *printedLine) bool { return p != nil && moduleSum.MatchString(p.text) }

// align pairs lines: those with the same words first, in order, then what stands
// between them one by one.
func align(a, b []printedLine) [][2]*printedLine {
	var out [][2]*printedLine
	between := func(i0, i1, j0, j1 int) {
		for i0 < i1 || j0 < j1 {
			var p [2]*printedLine
			if i0 < i1 {
				p[0] = &a[i0]
				i0++
			}
			if j0 < j1 {
				p[1] = &b[j0]
				j0++
			}
			out = append(out, p)
		}
	}
	head := 0
	for head < len(a) && head < len(b) && a[head].skeleton == b[head].skeleton {
		head++
	}
	between(0, head, 0, head)
	tail := 0
	for tail < len(a)-head && tail < len(b)-head && a[len(a)-1-tail].skeleton == b[len(b)-1-tail].skeleton {
		tail++
	}
	i0, i1, j0, j1 := head, len(a)-tail, head, len(b)-tail
	const most = 4 << 20 // cells of the table of common lines
	if n, m := i1-i0, j1-j0; n > 0 && m > 0 && n != m && n*m <= most {
		// Longest common subsequence of the words of the lines.
		length := make([][]int32, n+1)
		for i := range length {
			length[i] = make([]int32, m+1)
		}
		for i := n - 1; i >= 0; i-- {
			for j := m - 1; j >= 0; j-- {
				if a[i0+i].skeleton == b[j0+j].skeleton {
					length[i][j] = length[i+1][j+1] + 1
				} else {
					length[i][j] = max(length[i+1][j], length[i][j+1])
				}
			}
		}
		i, j, pi, pj := 0, 0, 0, 0
		for i < n && j < m {
			switch {
			case a[i0+i].skeleton == b[j0+j].skeleton:
				between(i0+pi, i0+i, j0+pj, j0+j)
				between(i0+i, i0+i+1, j0+j, j0+j+1)
				i, j = i+1, j+1
				pi, pj = i, j
			case length[i+1][j] >= length[i][j+1]:
				i++
			default:
				j++
			}
		}
		i0, j0 = i0+pi, j0+pj
	}
	between(i0, i1, j0, j1)
	between(len(a)-tail, len(a), len(b)-tail, len(b))
	return out
}
