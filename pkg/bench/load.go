package bench

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"example.org/guardring/pkg/model"
)

// loader turns the document of a bench into a Bench.
type loader struct {
	reader
	folder  *folder
	instead *givenReadings // instead of the files that the bench names
	kind    *model.Kind
	b       *Bench

	files    []readingsFile
	columns  []columnUse // columns that the readings must have
	roles    map[string]string
	exclude  []exclusion
	reject   []string // words of the quality column
	ambients []ambientColumn
}

// readingsFile is a [[readings]] table.
type readingsFile struct {
	node     *node
	name     string
	pin      string
	settings CSVSettings
}

// columnUse is a column that something reads, for messages when it is missing.
type columnUse struct {
	node   *node // the key that names it
	header string
	as     mode
}

type exclusion struct {
	node   *node
	row    int
	reason string
}

// kindGrammar is everything a bench of a kind may hold.
func kindGrammar(kind *model.Kind) *grammar {
	g := &grammar{}
	g.add(benchDoc)
	for _, p := range []string{"channels.*.gain", "channels.*.offset", "drive.frequency", "drive.thd", "spacing.centre", "instruments.*.calibration_temperature"} {
		g.at(p).makeQuantity(&quantityDoc)
	}
	g.at("channels").each = nil
	for i := range kind.Channels {
		c := &grammar{}
		g.at("channels").child(kind.Channels[i].Name)
		*c = *channelGrammar()
		g.at("channels").children[kind.Channels[i].Name] = c
	}
	environment := g.at("environment")
	for _, name := range environment.order {
		environment.children[name].makeQuantity(&quantityDoc, &columnDoc)
	}
	g.at("corrections").each = nil
	for i := range kind.Corrections {
		g.at("corrections." + kind.Corrections[i].Name).child("use").leaf = true
	}
	for i := range kind.Scalars {
		s := &kind.Scalars[i]
		q := g.at(s.Table + "." + s.Name)
		if s.Table == "environment" {
			q.makeQuantity(&quantityDoc, &columnDoc)
		} else {
			q.makeQuantity(&quantityDoc)
		}
	}
	for i := range kind.Options {
		o := g.at(kind.Options[i].Key)
		o.leaf = o.children == nil
	}
	return g
}

// channelGrammar is what [channels.NAME] may hold.
func channelGrammar() *grammar {
	g := &grammar{}
	for _, t := range benchDoc {
		if rest, ok := strings.CutPrefix(t.path, "channels.*"); ok {
			n := g.at(strings.TrimPrefix(rest, "."))
			for _, k := range t.keys {
				c := n.child(k.name)
				c.leaf = c.children == nil
			}
		}
	}
	for _, k := range []string{"gain", "offset"} {
		g.at(k).makeQuantity(&quantityDoc)
	}
	return g
}

// load decodes bench.toml and reads the files it names.
func (f *folder) load(kind *model.Kind, dir string, data []byte, sum string, given *givenReadings) (*Bench, error) {
	root, err := document(benchFile, data)
	if err != nil {
		return nil, err
	}
	l := &loader{reader: reader{file: benchFile, root: root}, folder: f, instead: given, roles: map[string]string{}}
	l.b = &Bench{Dir: dir, Inputs: []Input{{File: benchFile, SHA256: sum}}, Options: map[string]string{}, Corrections: map[string]bool{}}
	if l.kind, err = l.header(kind); err != nil {
		return nil, err
	}
	l.b.Kind = l.kind
	l.grammar = kindGrammar(l.kind)
	l.check(root, l.grammar)

	l.instruments()
	l.readings()
	l.rowColumns()
	l.options()
	l.channels()
	l.corrections()
	l.scalars()
	l.correlations()
	l.job()
	l.exclusions()
	names := make([]string, len(l.b.Instruments))
	for i := range l.b.Instruments {
		names[i] = l.b.Instruments[i].Name
	}
	l.checkCited(names)
	if err := l.errs.err(); err != nil {
		return nil, err
	}
	if err := l.read(); err != nil {
		return nil, err
	}
	if l.allowances(); l.errs.err() != nil {
		return nil, l.errs.err()
	}
	l.b.Warnings = l.warn
	return l.b, nil
}

// header reads what must be right before anything else can be: the format and
// the kind of bench.
func (l *loader) header(kind *model.Kind) (*model.Kind, error) {
	b := l.b
	if !l.format() {
		return nil, l.errs.err()
	}
	b.Format = 1
	b.Title = l.text(l.root, "title")
	if b.Title == "" && l.root.fields["title"] == nil {
		l.missing(l.root, "title", `name the bench in one line, like title = "Guarded disc, gap series"`)
	}
	b.Method = l.word(l.root, "method", "least-squares", "least-squares", "errors-in-variables")
	n := l.root.field("model")
	name := l.text(l.root, "model")
	if name == "" {
		if n == nil {
			l.missing(l.root, "model", "known: "+strings.Join(model.Names(), ", "))
		}
		return nil, l.errs.err()
	}
	if kind != nil {
		if kind.Name != name {
			l.fail(n, "model %s where %s is due", quoted(name), quoted(kind.Name))
			return nil, l.errs.err()
		}
		return kind, nil
	}
	kind, err := model.Lookup(name)
	if err != nil {
		e := l.errorf(n, "%v", err)
		e.Err = err
		l.errs.add(e)
		return nil, l.errs.err()
	}
	return kind, nil
}

// format checks the version of the file's format.
func (r *reader) format() bool {
	n := r.root.field("format")
	switch {
	case n == nil:
		r.missing(r.root, "format", "write format = 1 at the top of the file")
	case n.shape != isNumber || !n.integer:
		r.fail(n, "%s where a whole number is due; write format = 1", shown(n))
	case n.number != 1:
		r.fail(n, "format %s is not known to this version, which reads format 1; a newer guardring may read it", n.text)
	default:
		return true
	}
	return false
}

// readings reads [[readings]].
func (l *loader) readings() {
	if l.root.fields["readings"] == nil {
		l.missing(l.root, "readings", `name the readings: [[readings]] and file = "readings.csv"`)
		return
	}
	tables := l.tables(l.root, "readings")
	if len(tables) > 1000 {
		l.fail(tables[1000], "more than 1000 files of readings")
		return
	}
	seen := map[string]bool{}
	for _, t := range tables {
		f := readingsFile{node: t, name: l.text(t, "file"), pin: l.pin(t), settings: l.csvSettings(t)}
		if t.fields["file"] == nil {
			l.missing(t, "file", `like file = "readings.csv"`)
		}
		if f.name != "" && seen[f.name] {
			l.fail(t.field("file"), "%s is read twice", quoted(f.name))
		}
		seen[f.name] = true
		l.files = append(l.files, f)
	}
	if len(tables) == 0 && len(l.errs.list) == 0 {
		l.fail(l.root.field("readings"), `no file is named; write [[readings]] and file = "readings.csv"`)
	}
	if l.instead != nil && len(l.files) > 0 {
		l.files = []readingsFile{{node: l.files[0].node, name: l.instead.name}}
	}
}

// pin reads sha256.
func (r *reader) pin(t *node) string {
	s := strings.ToLower(r.text(t, "sha256"))
	if s != "" && (len(s) != 64 || strings.Trim(s, "0123456789abcdef") != "") {
		r.fail(t.field("sha256"), "%s is no SHA-256: 64 hexadecimal digits are due", quoted(s))
		return ""
	}
	return s
}

// csvSettings reads how a CSV file is written.
func (r *reader) csvSettings(t *node) CSVSettings {
	var s CSVSettings
	name := r.word(t, "separator", "", "comma", "semicolon", "tab")
	for _, sep := range separators {
		if sep.name == name {
			s.Separator = sep.sign
		}
	}
	s.DecimalComma = r.word(t, "decimal", "point", "point", "comma") == "comma"
	s.Missing = r.texts(t, "missing")
	return s
}

// use notes that a column is read.
func (l *loader) use(n *node, header string, as mode) {
	l.columns = append(l.columns, columnUse{n, header, as})
}

// rowColumns reads [rows].
func (l *loader) rowColumns() {
	t := l.table(l.root, "rows")
	if t == nil {
		return
	}
	for _, role := range append([]string{"time", "kind"}, roleKeys...) {
		if header := l.text(t, role); header != "" {
			as := wordy
			if role == "time" {
				as = timely
			}
			l.use(t.field(role), header, as)
			l.roles[role] = header
		}
	}
	l.reject = l.texts(t, "quality_reject")
	if n := t.field("quality_reject"); n != nil && l.roles["quality"] == "" {
		l.fail(n, "words that reject a row need the column that holds them: quality = \"…\"")
	}
}

// options reads the words that the kind offers to choose from.
func (l *loader) options() {
	for i := range l.kind.Options {
		o := &l.kind.Options[i]
		path, key := "", o.Key
		if k := strings.LastIndexByte(o.Key, '.'); k >= 0 {
			path, key = o.Key[:k], o.Key[k+1:]
		}
		t := l.find(path)
		if t.field(key) == nil {
			if o.Default == "" && len(o.Values) > 0 {
				at := t
				if at == nil {
					at = l.root
				}
				l.errs.add(&Error{File: l.file, Line: at.line, Column: at.col, Key: o.Key,
					Problem: fmt.Sprintf("is missing; a %s must say which of %s", l.kind.Name, strings.Join(o.Values, ", "))})
				continue
			}
			l.b.Options[o.Key] = o.Default
			continue
		}
		if len(o.Values) == 0 {
			l.b.Options[o.Key] = l.text(t, key)
			continue
		}
		l.b.Options[o.Key] = l.word(t, key, o.Default, o.Values...)
	}
}

// find returns the table at a dotted path, nil when there is none; tables of
// another shape have been refused before.
func (r *reader) find(path string) *node {
	n := r.root
	if path == "" {
		return n
	}
	for part := range strings.SplitSeq(path, ".") {
		if n = n.field(part); n == nil || n.shape != isTable {
			return nil
		}
	}
	return n
}

// correlationTables reads [[correlations]] between the given names.
func (r *reader) correlationTables(known []string) []Correlation {
	tables := r.tables(r.root, "correlations")
	if len(tables) > 10000 {
		r.fail(tables[10000], "more than 10000 correlations")
		return nil
	}
	var out []Correlation
	seen := map[[2]string]int{}
	for _, t := range tables {
		between := r.texts(t, "between")
		n, f := t.field("between"), t.field("r")
		switch {
		case n == nil:
			r.missing(t, "between", `like between = ["a", "b"]`)
			continue
		case len(between) != 2:
			r.fail(n, "a correlation is between two inputs; %s named", plural(len(between), "is"))
			continue
		}
		bad := false
		for i, s := range between {
			if !slices.Contains(known, s) {
				e := n
				if n.shape == isArray {
					e = n.items[i]
				}
				r.fail(e, "input %s is not known%s", quoted(s), didYouMean(s, known))
				bad = true
			}
		}
		switch {
		case f == nil:
			r.missing(t, "r", "the correlation coefficient, from -1 to 1")
			continue
		case f.shape != isNumber || !(f.number >= -1 && f.number <= 1):
			r.fail(f, "%s is no correlation coefficient: those lie from -1 to 1", shown(f))
			continue
		}
		if bad {
			continue
		}
		if between[0] == between[1] {
			r.fail(n, "%s is named twice; an input is fully correlated with itself", quoted(between[0]))
			continue
		}
		pair := [2]string{min(between[0], between[1]), max(between[0], between[1])}
		if line, double := seen[pair]; double {
			r.fail(n, "the correlation of %s and %s is stated in line %d already", pair[0], pair[1], line)
			continue
		}
		seen[pair] = t.line
		out = append(out, Correlation{A: between[0], B: between[1], R: f.number, Line: t.line})
	}
	return out
}

func (l *loader) correlations() {
	exact := map[string]bool{}
	var known []string
	for i := range l.b.Scalars {
		s := &l.b.Scalars[i]
		known = append(known, s.Name)
		exact[s.Name] = s.Dist.IsExact()
	}
	for i := range l.b.Channels {
		c := &l.b.Channels[i]
		for _, k := range []struct {
			has  bool
			name string
			u    float64
		}{{c.HasGain, ".gain", c.Gain.U}, {c.HasOffset, ".offset", c.Offset.U}} {
			if k.has {
				known = append(known, "channels."+c.Name+k.name)
				exact["channels."+c.Name+k.name] = k.u == 0
			}
		}
	}
	for i := range l.b.Instruments {
		in := &l.b.Instruments[i]
		if in.DriftPerYear != "" {
			known = append(known, "instruments."+in.Name+".drift")
		}
		if in.PerKelvin != "" {
			known = append(known, "instruments."+in.Name+".temperature")
		}
	}
	l.b.Correlations = l.correlationTables(known)
	for _, c := range l.b.Correlations {
		for _, name := range []string{c.A, c.B} {
			if exact[name] {
				l.warn = append(l.warn, &Error{File: l.file, Line: c.Line, Key: "correlations",
					Problem: name + " has no uncertainty, so that its correlation changes nothing"})
			}
		}
	}
}

// exclusions reads [[exclude]].
func (l *loader) exclusions() {
	seen := map[int]bool{}
	for _, t := range l.tables(l.root, "exclude") {
		row, ok := l.whole(t, "row", 1, maxRecords)
		reason := l.text(t, "reason")
		if t.fields["row"] == nil {
			l.missing(t, "row", "the data record, counted from 1 over all files")
		}
		if t.fields["reason"] == nil {
			l.missing(t, "reason", "no reading is left out without one")
		}
		if ok && seen[row] {
			l.fail(t.field("row"), "row %d is excluded twice", row)
		}
		seen[row] = true
		if ok && reason != "" {
			l.exclude = append(l.exclude, exclusion{t, row, reason})
		}
	}
}

// clone returns a copy of b that shares nothing which Exclude changes.
func (b *Bench) clone() *Bench {
	c := *b
	c.Inputs = slices.Clone(b.Inputs)
	c.Rows.Excluded = slices.Clone(b.Rows.Excluded)
	c.Rows.reasons = maps.Clone(b.Rows.reasons)
	return &c
}
