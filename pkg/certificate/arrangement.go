package certificate

import (
	"math"
	"sort"
	"strings"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/figure"
	"example.org/guardring/pkg/reduce"
)

// condition states a quantity of the environment; its coverage factor is 2.
func condition(e bench.Condition) Quantity {
	u := e.Dist.U
	q := Quantity{Name: figure.Words(e.Name), Unit: e.Unit, value: e.Dist.Value, expanded: 2 * u, k: 2}
	if u > 0 {
		q.Value, q.Expanded = round(e.Unit.FromSI(e.Dist.Value), e.Unit.DeltaFromSI(2*u), 0)
		q.K = "2"
	} else {
		q.Value = significant(e.Unit.FromSI(e.Dist.Value), 6)
	}
	return q
}

func itemFacts(i bench.Item) []Fact {
	var out []Fact
	for _, f := range []Fact{{"description", i.Description}, {"maker", i.Maker}, {"model", i.Model}, {"serial number", i.Serial},
		{"client's mark", i.Identification}, {"firmware", i.Firmware}, {"range", i.Range}, {"accessories", i.Accessories}, {"condition as received", i.Condition}} {
		if f.Text != "" {
			out = append(out, f)
		}
	}
	return out
}

// setup tells how the bench stood.
func setup(r *reduce.Result) []Fact {
	b := r.Bench
	var out []Fact
	add := func(label string, parts ...string) {
		var some []string
		for _, p := range parts {
			if p != "" {
				some = append(some, p)
			}
		}
		if len(some) > 0 {
			out = append(out, Fact{label, strings.Join(some, "; ")})
		}
	}
	add("mounting", b.Mounting.Kind, b.Mounting.Description)
	add("reference plane", b.Mounting.ReferencePlane)
	add("orientation", b.Mounting.Orientation)
	add("sign convention", b.Mounting.SignConvention)
	plates := ""
	if w := scalar(b, "corrections.finite_plates.width"); w != nil && w.Given {
		plates = "square plates, width " + with(significant(w.Unit.FromSI(w.Dist.Value), 4), w.Unit)
	}
	add("plates", b.Spacing.Description, plates)
	add("spacing", spacings(b), b.Spacing.Method)
	if b.Drive.Kind != "" {
		add("drive", strings.ReplaceAll(b.Drive.Kind, "-", " "), b.Drive.Waveform)
	}
	switch b.Drive.Value {
	case "dc":
		add("voltage", "dc")
	case "":
	default:
		text := "alternating; values are " + b.Drive.Value
		if b.Drive.Value == "peak" {
			text = "alternating; values are peak values"
		}
		add("voltage", text)
	}
	if f := b.Drive.Frequency; f.Given {
		add("frequency", stateQuantity(f))
	}
	if t := b.Drive.THD; t.Given {
		add("distortion or ripple", stateQuantity(t))
	}
	return out
}

// stateQuantity writes a quantity of the bench with its expanded uncertainty.
func stateQuantity(q bench.Quantity) string {
	x := q.Unit.FromSI(q.Dist.Value)
	if !(q.Dist.U > 0) {
		return with(significant(x, 6), q.Unit)
	}
	v, u := round(x, q.Unit.DeltaFromSI(2*q.Dist.U), 0)
	return "(" + shown(v) + " ± " + u + ")" + with("", q.Unit) + ", k = 2"
}

func scalar(b *bench.Bench, name string) *bench.Scalar {
	for i := range b.Scalars {
		if b.Scalars[i].Name == name {
			return &b.Scalars[i]
		}
	}
	return nil
}

// spacings lists the spacings that the readings were taken at, as read; readings
// within 3 % of each other are one spacing, given as its mean.
func spacings(b *bench.Bench) string {
	var ch *bench.Channel
	for i := range b.Channels {
		if b.Channels[i].Name == "gap" {
			ch = &b.Channels[i]
		}
	}
	if ch == nil {
		return ""
	}
	var d []float64
	for i, x := range ch.Readings {
		if !math.IsNaN(x) && !b.Rows.Excluded[i] {
			d = append(d, x)
		}
	}
	sort.Float64s(d)
	var out []string
	for len(d) > 0 {
		n, sum := 0, 0.0
		for n < len(d) && d[n] <= 1.03*d[0] {
			sum += d[n]
			n++
		}
		out = append(out, with(significant(ch.Unit.FromSI(sum/float64(n)), 5), ch.Unit))
		d = d[n:]
	}
	text := strings.Join(out, " and ")
	if p := b.Spacing.Points; len(p) > 0 {
		var at []string
		for _, x := range p {
			t := significant(ch.Unit.FromSI(x), 6)
			if strings.Contains(t, ".") {
				t = strings.TrimRight(strings.TrimRight(t, "0"), ".")
			}
			at = append(at, t)
		}
		text += "; measured at " + strings.Join(at, ", ") + " " + unitText(ch.Unit)
	}
	return text
}
