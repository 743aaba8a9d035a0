package figure

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"example.org/guardring/pkg/model"
	"example.org/guardring/pkg/reduce"
	"example.org/guardring/pkg/si"
)

// Data is what the figures of a reduction are drawn from. Of and FromRecord make
// one.
type Data struct {
	Record *reduce.Record
	Rows   *reduce.Rows // nil when the record came without its rows
	// Trials are the Monte Carlo values of each measurand in trial order, SI; nil
	// for the law alone.
	Trials [][]float64
	// Groups names the setting of each entry of Rows; nil when the bench has
	// none.
	Groups []string
	// Number is the data record of each entry of Rows, counted from 1 over all
	// files.
	Number []int
	// Units of the channels by name; channels without one are shown in SI base
	// units of the record's model.
	Units map[string]si.Unit

	verbatim bool // names of inputs stand as they are written, because a formula has them
}

// called is how a figure calls an input or a measurand.
func (d *Data) called(key string) string {
	if d.verbatim {
		return OneLine(key)
	}
	return words(key)
}

// FromRecord takes apart a record that was written with its rows, as
// `reduce --json --rows` and notebooks write it. Figures that need trials say
// that the record has none.
func FromRecord(rec *reduce.Record) *Data {
	d := &Data{Record: rec, Units: unitsOf(rec.Model)}
	if len(rec.Rows) == 0 {
		return d
	}
	names := map[string]bool{}
	for i := range rec.Rows {
		for n := range rec.Rows[i].Channels {
			names[n] = true
		}
	}
	r := &reduce.Rows{N: len(rec.Rows)}
	r.PredictorNames = predictorsOf(rec.Model, names)
	r.Predictors = make([][]float64, len(r.PredictorNames))
	for i := range rec.Rows {
		row := &rec.Rows[i]
		for c, n := range r.PredictorNames {
			v, ok := row.Channels[n]
			if !ok {
				v = reduce.Number(math.NaN())
			}
			r.Predictors[c] = append(r.Predictors[c], float64(v))
		}
		d.Number = append(d.Number, row.Row)
		r.Record = append(r.Record, row.Row-1)
		r.Excluded = append(r.Excluded, row.Excluded)
		r.Response = append(r.Response, float64(row.Response))
		r.Fitted = append(r.Fitted, float64(row.Fitted))
		r.U = append(r.U, float64(row.U))
		r.Residual = append(r.Residual, float64(row.Residual))
		r.Standardised = append(r.Standardised, float64(row.Standardised))
		r.Leverage = append(r.Leverage, float64(row.Leverage))
		r.Studentised = append(r.Studentised, float64(row.Studentised))
	}
	d.Rows = r
	return d
}

// predictorsOf puts the channels of a record into the order of their kind; the
// alphabetical one when this version doesn't know the kind.
func predictorsOf(kind string, names map[string]bool) []string {
	var out []string
	if k, err := model.Lookup(kind); err == nil {
		for _, c := range k.Channels {
			if names[c.Name] && c.Role == model.Predictor {
				out = append(out, c.Name)
			}
		}
		if len(out) > 0 {
			return out
		}
	}
	for n := range names {
		out = append(out, n)
	}
	sort.Strings(out)
	return out
}

// unitsOf lists the units of a kind's channels.
func unitsOf(kind string) map[string]si.Unit {
	units := map[string]si.Unit{}
	if k, err := model.Lookup(kind); err == nil {
		for _, c := range k.Channels {
			units[c.Name] = c.Unit
		}
	}
	return units
}

// rows returns the rows after checking that they are there and whole.
func (d *Data) rows() (*reduce.Rows, error) {
	if d == nil || d.Record == nil {
		return nil, fmt.Errorf("figure: no reduction to draw")
	}
	r := d.Rows
	if r == nil || r.N == 0 {
		return nil, fmt.Errorf("figure: this record holds no rows; make it with --rows, or draw from the reduction itself")
	}
	for _, s := range [][]float64{r.Response, r.Fitted, r.U, r.Residual, r.Standardised, r.Leverage, r.Studentised} {
		if len(s) != r.N {
			return nil, fmt.Errorf("figure: the rows are not whole: %d of %d values", len(s), r.N)
		}
	}
	if len(r.Excluded) != r.N {
		return nil, fmt.Errorf("figure: the rows are not whole: %d of %d marks of exclusion", len(r.Excluded), r.N)
	}
	if d.Groups != nil && len(d.Groups) != r.N || d.Number != nil && len(d.Number) != r.N {
		return nil, fmt.Errorf("figure: the rows are not whole: %d names of settings and %d numbers for %d rows", len(d.Groups), len(d.Number), r.N)
	}
	for c := range r.Predictors {
		if len(r.Predictors[c]) != r.N {
			return nil, fmt.Errorf("figure: the rows are not whole: %d of %d values of %s", len(r.Predictors[c]), r.N, r.PredictorNames[c])
		}
	}
	return r, nil
}

// number is the data record of row i, counted from 1.
func (d *Data) number(i int) int {
	if d.Number != nil {
		return d.Number[i]
	}
	if i < len(d.Rows.Record) {
		return d.Rows.Record[i] + 1
	}
	return i + 1
}

// unit returns the unit of a channel.
func (d *Data) unit(channel string) si.Unit {
	if u, ok := d.Units[channel]; ok {
		return u
	}
	return si.One
}

// response returns the name of the response and the unit it is in.
func (d *Data) response() (string, si.Unit) {
	name := d.Rows.ResponseName
	if name == "" {
		name = "response"
		if k, err := model.Lookup(d.Record.Model); err == nil {
			if u, err := si.ParseUnit(d.Record.Fit.ResponseUnit); err == nil {
				for _, c := range k.Channels {
					if c.Role == model.Response && c.Unit.Dim == u.Dim {
						name = c.Name
						break
					}
				}
			}
		}
	}
	if u, err := si.ParseUnit(d.Record.Fit.ResponseUnit); err == nil {
		return words(name), u
	}
	return words(name), d.unit(name)
}

// reasons numbers the reasons of the excluded rows drawn: index by row, and the
// lines for the foot of the figure.
func (d *Data) reasons() (mark map[int]int, lines []string) {
	mark = map[int]int{}
	number := map[string]int{}
	rowsOf := map[int][]string{}
	var order []string
	why := map[int]string{}
	for _, e := range d.Record.Exclusions {
		why[e.Row] = e.Reason
	}
	for i, x := range d.Rows.Excluded {
		if !x {
			continue
		}
		r := OneLine(why[d.number(i)])
		if r == "" {
			r = "no reason stated"
		}
		n, ok := number[r]
		if !ok {
			n = len(number) + 1
			number[r] = n
			order = append(order, r)
		}
		mark[i] = n
		rowsOf[n] = append(rowsOf[n], strconv.Itoa(d.number(i)))
	}
	for n, r := range order {
		rows := rowsOf[n+1]
		more := ""
		if len(rows) > 8 {
			more = fmt.Sprintf(" and %d more", len(rows)-8)
			rows = rows[:8]
		}
		word := "reading"
		if len(rowsOf[n+1]) > 1 {
			word = "readings"
		}
		lines = append(lines, fmt.Sprintf("%d: %s %s%s left out: %s", n+1, word, strings.Join(rows, ", "), more, r))
	}
	return mark, lines
}

// series is the rows that share a look.
type series struct {
	name string
	rows []int
}

// mostSeries is the number of looks that stay apart from each other.
const mostSeries = 7

// view is a choice of what to draw against what.
type view struct {
	x      int // predictor on the axis; −1: the order of acquisition
	series []series
	joined int // series whose fitted values x alone tells apart
	plain  int // those of them whose line is a plain one
}

// choose finds the view of a fit in which the fitted values of most series lie
// on a line: it tries each predictor as the axis, in their order, with the rows
// in one series, by the clusters of each other predictor, and by setting. Among
// equals the first is taken, but of those on one axis the one with more plain lines.
func (d *Data) choose() view {
	r := d.Rows
	all := series{rows: make([]int, r.N)}
	for i := range all.rows {
		all.rows[i] = i
	}
	best := view{x: -1, series: []series{all}}
	share, straight := -1.0, -1.0
	for x, v := range r.Predictors {
		var s spanner
		for _, t := range v {
			s.add(t)
		}
		if s.n < r.N || !(s.hi-s.lo > 1e-3*math.Max(math.Abs(s.lo), math.Abs(s.hi))) {
			continue // held constant, or not known for every row
		}
		tries := [][]series{{all}}
		for c := range r.Predictors {
			if c != x {
				if g := d.byPredictor(c); g != nil {
					tries = append(tries, g)
				}
			}
		}
		if g := d.bySetting(); g != nil {
			tries = append(tries, g)
		}
		for _, t := range tries {
			n, m := 0, 0
			for _, g := range t {
				some := sparse(g.rows)
				skip := make([]bool, len(some))
				for i, k := range some {
					skip[i] = r.Excluded[k]
				}
				if _, _, ok := guide(pick(v, some), pick(r.Fitted, some), skip, &scale{}); ok {
					n++
					if plain(pick(v, some), pick(r.Fitted, some), skip) {
						m++
					}
				}
			}
			f, p := float64(n)/float64(len(t)), float64(m)/float64(len(t))
			if f > share+1e-9 || best.x == x && f > share-1e-9 && p > straight+1e-9 {
				share, straight = f, p
				best = view{x: x, series: t, joined: n, plain: m}
			}
		}
	}
	return best
}

// byPredictor parts the rows by the clusters of a predictor and names them by
// their means, with as few digits as tell them apart; nil when there are none.
func (d *Data) byPredictor(c int) []series {
	v := d.Rows.Predictors[c]
	s := clusters(v)
	if s == nil {
		return nil
	}
	means := make([]float64, len(s))
	largest := 0.0
	for i := range s {
		for _, k := range s[i].rows {
			means[i] += v[k] / float64(len(s[i].rows))
		}
		largest = math.Max(largest, math.Abs(means[i]))
	}
	_, u := si.Prefixed(largest, d.unit(d.Rows.PredictorNames[c]))
	for decimals := 0; decimals <= 9; decimals++ {
		seen := map[string]bool{}
		close := true
		for i := range s {
			x := u.FromSI(means[i])
			t := strconv.FormatFloat(x, 'f', decimals, 64)
			f, err := strconv.ParseFloat(t, 64)
			close = close && err == nil && math.Abs(f-x) <= 5e-3*math.Abs(x)
			seen[t] = true
			s[i].name = words(d.Rows.PredictorNames[c]) + " " + signed(t)
			if sym := u.Unicode(); sym != "1" && sym != "" {
				s[i].name += " " + sym
			}
		}
		if close && len(seen) == len(s) {
			break
		}
	}
	return s
}

// bySetting parts the rows by setting where there are two to seven.
func (d *Data) bySetting() []series {
	if d.Groups == nil {
		return nil
	}
	index := map[string]int{}
	var s []series
	for i, g := range d.Groups {
		k, ok := index[g]
		if !ok {
			k = len(s)
			index[g] = k
			s = append(s, series{name: "setting " + OneLine(g)})
		}
		s[k].rows = append(s[k].rows, i)
		if len(s) > mostSeries {
			return nil
		}
	}
	if len(s) < 2 {
		return nil
	}
	return s
}

// clusters parts values that fall into two to seven heaps, each at least eight
// times narrower than its distance to the next; nil when they don't.
func clusters(v []float64) []series {
	for _, x := range v {
		if !finite(x) {
			return nil
		}
	}
	if len(v) < 4 {
		return nil
	}
	sorted := append([]float64(nil), v...)
	slices.Sort(sorted)
	span := sorted[len(sorted)-1] - sorted[0]
	if span <= 0 {
		return nil
	}
	// A step between heaps is one of at least 1/60 of the whole range.
	var ends []float64 // largest value of each heap
	least, widest := math.Inf(1), 0.0
	from := sorted[0]
	for k := 1; k <= len(sorted); k++ {
		if k < len(sorted) {
			gap := sorted[k] - sorted[k-1]
			if gap <= span/60 {
				continue
			}
			least = math.Min(least, gap)
		}
		widest = math.Max(widest, sorted[k-1]-from)
		if ends = append(ends, sorted[k-1]); len(ends) > mostSeries {
			return nil
		}
		if k < len(sorted) {
			from = sorted[k]
		}
	}
	if len(ends) < 2 || widest > least/8 {
		return nil
	}
	out := make([]series, len(ends))
	for i, x := range v {
		k := sort.SearchFloat64s(ends, x)
		out[k].rows = append(out[k].rows, i)
	}
	return out
}

// sparse returns a few thousand of the rows, which show a line as well as all
// do. They are chosen by the fractional parts of multiples of the golden ratio,
// which no rhythm of the readings can fall into step with.
func sparse(rows []int) []int {
	const most = 4000
	if len(rows) <= most {
		return rows
	}
	var out []int
	for i, r := range rows {
		if _, f := math.Modf(float64(i) * math.Phi); f < most/float64(len(rows)) {
			out = append(out, r)
		}
	}
	return out
}

// pick returns the values at the rows.
func pick(v []float64, rows []int) []float64 {
	out := make([]float64, len(rows))
	for i, k := range rows {
		out[i] = v[k]
	}
	return out
}
