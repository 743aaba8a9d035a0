package bench

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"example.org/guardring/pkg/model"
)

// read loads the readings and makes rows and channels of them.
func (l *loader) read() error {
	b := l.b
	columns := map[string][]float64{} // as in the files, by header
	b.Rows.Labels = map[string]*Labels{}
	var epoch time.Time
	stamped := -1 // file in which times are stamps or not: 0 no, 1 yes
	for i := range l.files {
		f := &l.files[i]
		t, err := l.readFile(f, maxRecords-b.Rows.N)
		if err != nil {
			return err
		}
		for _, s := range t.starts {
			b.Rows.spans = append(b.Rows.spans, span{first: b.Rows.N + s.record, file: i, line: s.line})
		}
		b.Rows.Files = append(b.Rows.Files, f.name)
		for _, u := range l.columns {
			c := t.Column(u.header)
			switch u.as {
			case number:
				if len(columns[u.header]) == b.Rows.N { // once for all that use it
					columns[u.header] = appendColumn(columns[u.header], t.Number[c])
				}
			case timely:
				tc := &t.times[c]
				is := 0
				if tc.stamped {
					is = 1
				}
				if stamped >= 0 && stamped != is {
					return &Error{File: f.name, Key: "column " + u.header, Problem: fmt.Sprintf("times are seconds in one file and time stamps in the other (%s); use one form", l.files[i-1].name)}
				}
				stamped = is
				b.Rows.Time = appendColumn(b.Rows.Time, tc.seconds(&epoch))
				b.Rows.HasTime = true
			}
		}
		for role, header := range l.roles {
			if role != "time" {
				b.Rows.Labels[role] = b.Rows.Labels[role].join(t.Word[t.Column(header)])
			}
		}
		b.Rows.N += t.N
		b.Inputs = append(b.Inputs, Input{File: f.name, SHA256: t.SHA256, Rows: t.N, Separator: t.separator, DecimalComma: f.settings.DecimalComma})
	}
	b.Rows.Epoch = epoch
	b.Rows.Columns = maps.Clone(l.roles)
	for _, w := range b.Rows.Labels {
		w.known = nil
	}
	if b.Rows.Time == nil {
		b.Rows.Time = make([]float64, b.Rows.N)
		for i := range b.Rows.Time {
			b.Rows.Time[i] = math.NaN()
		}
	}
	l.average(columns)
	l.rows()
	l.fill(columns)
	return l.errs.err()
}

// appendColumn appends, without a copy when there is nothing to append to.
func appendColumn(dst, src []float64) []float64 {
	if dst == nil {
		return src
	}
	return append(dst, src...)
}

// join appends the words of more to l, which may be nil.
func (l *Labels) join(more *Labels) *Labels {
	if l == nil {
		// Clipped: the next file must not grow into the slices of another role
		// that reads the same column.
		return &Labels{Column: more.Column, Words: slices.Clip(more.Words), Index: slices.Clip(more.Index)}
	}
	into := make([]int32, len(more.Words))
	for i, w := range more.Words {
		into[i] = l.intern(w)
	}
	for _, k := range more.Index {
		l.Index = append(l.Index, into[k])
	}
	return l
}

// readFile reads one readings file.
func (l *loader) readFile(f *readingsFile, limit int) (*Table, error) {
	file, size, err := l.openReadings(f)
	if err != nil {
		e, ok := err.(*Error)
		if !ok {
			return nil, err
		}
		return nil, &Error{File: l.file, Line: f.node.field("file").vline, Column: f.node.field("file").vcol, Key: f.node.path + ".file",
			Problem: fmt.Sprintf("%s: %s", f.name, e.Problem), Err: err}
	}
	defer file.Close()
	wanted := make([]string, len(l.columns))
	for i, u := range l.columns {
		wanted[i] = u.header
	}
	before, err := file.Stat()
	if err != nil {
		return nil, &Error{File: f.name, Problem: cause(err), Err: err}
	}
	t, err := readCSV(file, f.name, size, f.settings, wanted, func(lay *layout) error {
		var errs errorList
		for _, u := range l.columns {
			c := slices.Index(lay.header, u.header)
			if c < 0 {
				e := l.errorf(u.node, "%s: %s", f.name, missingColumn(lay.header, u.header))
				errs.add(e)
				continue
			}
			m, ok := lay.modes[c].also(u.as)
			if !ok {
				errs.add(l.errorf(u.node, "column %s is used as times and as something else", quoted(u.header)))
				continue
			}
			lay.modes[c] = m
		}
		return errs.err()
	}, limit)
	if err != nil {
		return nil, err
	}
	// What was parsed is what was hashed; but a file that grows under our hands
	// is no record of a measurement that has ended.
	if after, err := file.Stat(); err != nil || after.Size() != before.Size() || !after.ModTime().Equal(before.ModTime()) {
		return nil, &Error{File: f.name, Problem: "the file changed while it was read; run again when it is complete"}
	}
	if f.pin != "" && f.pin != t.SHA256 {
		return nil, l.errorf(f.node.field("sha256"), "the pin does not match: %s has SHA-256 %s; restore the file, or put in the new sum if the change is meant", f.name, t.SHA256)
	}
	return t, nil
}

// rows fills kinds and exclusions.
func (l *loader) rows() {
	r := &l.b.Rows
	r.Kind = make([]RowKind, r.N)
	r.Excluded = make([]bool, r.N)
	r.reasons = map[int]string{}
	if kinds := r.Labels["kind"]; kinds != nil {
		delete(r.Labels, "kind")
		known := []string{"reading", "zero", "blank", "overrange"}
		of := make([]RowKind, len(kinds.Words))
		for i, w := range kinds.Words {
			k := slices.Index(known, w)
			if k < 0 {
				row := slices.Index(kinds.Index, int32(i))
				l.rowError(row, kinds.Column, fmt.Sprintf("%s is no kind of row%s", quoted(w), didYouMean(w, known)))
				continue
			}
			of[i] = RowKind(k)
		}
		for i, k := range kinds.Index {
			r.Kind[i] = of[k]
		}
	}
	if q := r.Labels["quality"]; q != nil && len(l.reject) > 0 {
		bad := make([]string, len(q.Words))
		for _, w := range l.reject {
			if i := slices.Index(q.Words, w); i >= 0 {
				bad[i] = "quality mark " + w
			}
		}
		for i, k := range q.Index {
			if bad[k] != "" {
				r.leaveOut(i, bad[k])
			}
		}
	}
	for _, e := range l.exclude {
		if e.row > r.N {
			l.fail(e.node.field("row"), "row %d is excluded, but there are %s", e.row, plural(r.N, "data record"))
			continue
		}
		r.leaveOut(e.row-1, e.reason)
	}
}

func (r *Rows) leaveOut(i int, reason string) {
	r.Excluded[i] = true
	if r.reasons[i] == "" {
		r.reasons[i] = reason
	}
}

func (l *loader) rowError(i int, column, problem string) {
	file, line := l.b.Rows.Place(i)
	l.errs.add(&Error{File: file, Line: line, Key: "column " + column, Problem: problem})
}

// fill gives the channels their readings, checks them and forms the groups.
func (l *loader) fill(columns map[string][]float64) {
	b := l.b
	users := map[string]int{}
	for i := range b.Channels {
		users[b.Channels[i].Column]++
	}
	for i := range b.Channels {
		c := &b.Channels[i]
		k := &l.kind.Channels[l.kind.Channel(c.Name)]
		xs := columns[c.Column]
		if users[c.Column] > 1 {
			xs = slices.Clone(xs)
		}
		for j, x := range xs {
			xs[j] = c.Unit.ToSI(x)
		}
		c.Readings = xs
		l.gaps(c)
		l.inRange(c, k)
	}
	shared := map[string]*Grouped{}
	for i := range b.Channels {
		for j := range b.Channels[i].Grouped {
			g := &b.Channels[i].Grouped[j]
			if s := shared[g.By]; s != nil {
				g.Group, g.Labels, g.Count = s.Group, s.Labels, s.Count
				continue
			}
			words := b.Rows.Labels[g.By]
			l.unlabelled(words, g.By)
			g.Labels, g.Count = words.Words, len(words.Words)
			g.Group = words.Index
			shared[g.By] = g
		}
	}
	b.count()
	if !slices.ContainsFunc(b.Rows.Excluded, func(x bool) bool { return !x }) {
		l.errs.add(&Error{File: l.file, Problem: "every data record is excluded"})
	}
}

// unlabelled refuses readings whose group is not said: all of them would share
// one error.
func (l *loader) unlabelled(words *Labels, role string) {
	r := &l.b.Rows
	empty := int32(slices.Index(words.Words, ""))
	if empty < 0 {
		return
	}
	n := 0
	for i, k := range words.Index {
		if k == empty && r.Kind[i] == Reading && !r.Excluded[i] {
			l.rowError(i, words.Column, "the cell is empty, but errors are grouped by "+role)
			if n++; n == maxErrors {
				return
			}
		}
	}
}

// gaps leaves out readings without a value, and says so.
func (l *loader) gaps(c *Channel) {
	r := &l.b.Rows
	first, n := 0, 0
	for i, x := range c.Readings {
		if math.IsNaN(x) && r.Kind[i] == Reading && !r.Excluded[i] {
			if n == 0 {
				first = i
			}
			n++
			r.leaveOut(i, "no value in column "+c.Column)
		}
	}
	if n > 0 {
		file, line := r.Place(first)
		l.warn = append(l.warn, &Error{File: file, Line: line, Key: "column " + c.Column,
			Problem: fmt.Sprintf("%s without a value left out, the first here", plural(n, "reading"))})
	}
}

// inRange refuses readings that can't be: infinite in SI, or not above zero
// where the kind needs that.
func (l *loader) inRange(c *Channel, k *model.Channel) {
	r := &l.b.Rows
	n := 0
	for i, x := range c.Readings {
		if math.IsInf(x, 0) {
			l.rowError(i, c.Column, "the reading is beyond the range of numbers in SI units")
			n++
		} else if k.Positive && !(x > 0) && !math.IsNaN(x) && r.Kind[i] == Reading && !r.Excluded[i] {
			l.rowError(i, c.Column, fmt.Sprintf("%s: %s must be above zero", c.Unit.Format(x), describe(k)))
			n++
		}
		if n >= maxErrors {
			return
		}
	}
}

func describe(k *model.Channel) string {
	if k.Doc != "" {
		return k.Doc
	}
	return strings.ReplaceAll(k.Name, "_", " ")
}

// count fills Inputs[i].Excluded.
func (b *Bench) count() {
	i := 0
	for f := range b.Inputs {
		in := &b.Inputs[f]
		if f == 0 {
			continue
		}
		in.Excluded = 0
		for end := i + in.Rows; i < end; i++ {
			if b.Rows.Excluded[i] {
				in.Excluded++
			}
		}
	}
}

// Exclude returns a copy of the bench in which data record row, counted from 1
// over all files, is left out for the given reason. The bench itself does not
// change.
func (b *Bench) Exclude(row int, reason string) (*Bench, error) {
	switch {
	case row < 1 || row > b.Rows.N:
		return nil, fmt.Errorf("row %d: there are %s, counted from 1", row, plural(b.Rows.N, "data record"))
	case strings.TrimSpace(reason) == "":
		return nil, fmt.Errorf("row %d: no reading is left out without a reason", row)
	case b.Rows.Excluded[row-1]:
		file, line := b.Rows.Place(row - 1)
		return nil, fmt.Errorf("row %d (%s:%d) is excluded already: %s", row, file, line, b.Rows.Reason(row-1))
	}
	c := b.clone()
	if c.Rows.reasons == nil {
		c.Rows.reasons = map[int]string{}
	}
	c.Rows.leaveOut(row-1, reason)
	c.count()
	return c, nil
}
