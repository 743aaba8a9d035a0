package bench

import "strings"

// keyDoc documents one key of a bench or budget file. The decoder accepts the
// keys of these lists and no others, the starter file is written from them, and
// a test holds the package comment to them.
type keyDoc struct {
	name    string
	doc     string
	example string // a value as it stands in the file
}

// tableDoc lists the keys of one table. A path with "*" stands for tables that
// the user names; "[]" for an array of tables.
type tableDoc struct {
	path string
	doc  string
	keys []keyDoc
}

// roleKeys are the row columns that hold words.
var roleKeys = []string{"setting", "polarity", "direction", "mount", "range", "phase", "quality"}

// quantityDoc lists the keys of every quantity table.
var quantityDoc = tableDoc{"quantity", "a number with what is known of it; a text or a number alone is exact", []keyDoc{
	{"value", "best estimate with its unit; a plain number has the unit one", `"50.012 mm"`},
	{"u", "standard uncertainty; degC is read as K", `"1.5 um"`},
	{"relative_u", "standard uncertainty as a part of |value|", `"0.02 %"`},
	{"expanded", "expanded uncertainty, with k or probability", `"3 um"`},
	{"relative_expanded", "expanded uncertainty as a part of |value|, with k or probability", `"0.04 %"`},
	{"k", "coverage factor of expanded", `2`},
	{"probability", "coverage probability of expanded; with dof the factor is that of Student's t", `"95 %"`},
	{"half_width", "half of the width of a bounded distribution, with shape", `"2.6 um"`},
	{"relative_half_width", "half of the width as a part of |value|, with shape", `"0.1 %"`},
	{"shape", "rectangular, triangular, trapezoidal (with beta), curvilinear-trapezoid (with inexactness) or arcsine, with half_width; exponential (value is the mean of a quantity above 0) and gamma (value is a count), without u; t, with u and dof; normal", `"rectangular"`},
	{"beta", "of a trapezoid: width of its top over that of its base", `0.5`},
	{"inexactness", "of a curvilinear trapezoid: half_width is known to plus or minus this", `"0.2 um"`},
	{"dof", "degrees of freedom of u; infinite when not stated", `12`},
	{"readings", "repeated readings instead of value and u (Type A): mean, s/sqrt(n), n - 1 degrees of freedom", `["50.011 mm", "50.013 mm", "50.012 mm"]`},
	{"adjust", "true: estimated by the fit, with value and u as prior knowledge (without u: freely)", `true`},
	{"start", "where the fit begins", `"50 mm"`},
	{"instrument", "name of a table [instruments.NAME]", `"caliper"`},
	{"source", "where the value comes from", `"certificate of the caliper"`},
}}

// columnDoc lists the keys of an environment quantity taken from a column.
var columnDoc = tableDoc{"column", "a quantity of [environment] taken from a column of the readings: its mean; u is combined with the scatter of the column", []keyDoc{
	{"column", "header of the column in the readings", `"T/degC"`},
	{"unit", "unit of the column", `"degC"`},
	{"u", "standard uncertainty of the sensor, shared by all readings", `"0.1 degC"`},
	{"instrument", "name of a table [instruments.NAME]", `"thermometer"`},
	{"source", "where u comes from", `"certificate of the thermometer"`},
}}

// benchDoc lists the tables of a bench file, besides the keys that the kind of
// bench brings (its quantities, options and the inputs of its corrections).
var benchDoc = []tableDoc{
	{"", "the bench", []keyDoc{
		{"format", "version of the file's format; 1", `1`},
		{"title", "what the bench is, in one line", `"Guarded attracted disc, gap series"`},
		{"model", "kind of bench", `"attracted-disc"`},
		{"method", "least-squares (default) or errors-in-variables", `"least-squares"`},
	}},
	{"readings[]", "a file of readings; several are appended in this order", []keyDoc{
		{"file", "CSV file in the folder of the bench, slashes forward", `"readings.csv"`},
		{"sha256", "pin: the file must have this SHA-256", `"0000000000000000000000000000000000000000000000000000000000000000"`},
		{"separator", "comma, semicolon or tab; found from the header when not stated", `"comma"`},
		{"decimal", "point (default) or comma", `"point"`},
		{"missing", "words that mean a missing value, besides an empty cell", `["NA"]`},
	}},
	{"rows", "columns that say what a row is", []keyDoc{
		{"time", "time of the reading: RFC 3339 or seconds", `"t"`},
		{"kind", "reading, zero, blank or overrange; without this column all are readings", `"kind"`},
		{"setting", "rows with the same word share one setting", `"setting"`},
		{"polarity", "polarity of the voltage", `"polarity"`},
		{"direction", "up or down", `"direction"`},
		{"mount", "rows with the same word share one mounting", `"mount"`},
		{"range", "range of the instrument", `"range"`},
		{"phase", "as-found or as-left", `"phase"`},
		{"quality", "quality mark", `"quality"`},
		{"quality_reject", "quality marks that exclude a row", `["bad"]`},
	}},
	{"channels.*", "a column of readings", []keyDoc{
		{"column", "header as it stands in the CSV", `"V/kV"`},
		{"unit", "unit of the column", `"kV"`},
		{"noise", "standard uncertainty of one reading, independent from row to row; \"from-residuals\" when unknown", `"0.3 V"`},
		{"relative_noise", "the same as a part of |reading|; adds in quadrature", `"0.02 %"`},
		{"noise_dof", "degrees of freedom of noise", `9`},
		{"resolution", "width of the last digit", `"0.1 V"`},
		{"resolution_kind", "reading (default) or setting: whether rounding is new with each reading or with each setting", `"reading"`},
		{"gain", "quantity: true value = gain x reading + offset, for all rows", `{ value = 1, u = 0.00012 }`},
		{"offset", "quantity, in the unit of the channel", `{ value = "0 V", u = "0.2 V" }`},
		{"instrument", "name of a table [instruments.NAME], which gives the readings", `"divider"`},
		{"grouped", "errors that rows with the same word share", `[{ by = "setting", u = "3 um", dof = 8 }]`},
	}},
	{"channels.*.grouped[]", "an error that rows with the same word in a row column share", []keyDoc{
		{"by", "one of the row columns: setting, polarity, direction, mount, range, phase, quality", `"setting"`},
		{"u", "standard uncertainty", `"3 um"`},
		{"relative_u", "the same as a part of the reading", `"0.1 %"`},
		{"dof", "degrees of freedom of u", `8`},
		{"source", "where u comes from", `"repeated settings"`},
	}},
	{"quantities", "quantities of the kind of bench", nil},
	{"correlations[]", "correlation between two inputs", []keyDoc{
		{"between", "two names: of quantities, channels.NAME.gain, channels.NAME.offset, instruments.NAME.drift, instruments.NAME.temperature", `["disc_radius", "channels.voltage.gain"]`},
		{"r", "correlation coefficient, -1 to 1", `0.6`},
	}},
	{"corrections.*", "a correction of the kind of bench, with its inputs", []keyDoc{
		{"use", "true or false", `true`},
	}},
	{"environment", "conditions: quantities, or columns of the readings", []keyDoc{
		{"temperature", "of the air", `{ value = "20.0 degC", u = "0.2 degC" }`},
		{"pressure", "of the air", `{ value = "1013 hPa", u = "0.5 hPa" }`},
		{"humidity", "relative humidity", `{ value = "45 %", u = "2 %" }`},
		{"gravity", "local acceleration of free fall", `{ value = "9.81 m/s2", u = "0.00001 m/s2" }`},
	}},
	{"instruments.*", "an instrument: for traceability, and for what its values may have moved by", []keyDoc{
		{"description", "what it is", `"divider, 1000:1"`},
		{"maker", "", `"(maker)"`},
		{"model", "", `"(type)"`},
		{"serial", "", `"(serial)"`},
		{"firmware", "", `"(version)"`},
		{"certificate", "its calibration certificate", `"(number)"`},
		{"issued_by", "who calibrated it", `"(laboratory)"`},
		{"calibrated", "date", `2026-01-15`},
		{"due", "date; used later, it is a deviation", `2027-01-15`},
		{"drift_per_year", "greatest drift in a year, either way: a part of the values, or in their unit; needs calibrated and [work] performed", `"0.002 %"`},
		{"per_kelvin", "greatest change with a kelvin, likewise; needs calibration_temperature and environment.temperature", `"12 ppm/K"`},
		{"calibration_temperature", "quantity: temperature at its calibration", `"23 degC"`},
	}},
	{"drive", "how the voltage is applied", []keyDoc{
		{"kind", "balanced or one-side-earthed", `"balanced"`},
		{"value", "what the voltages are: dc, rms or peak", `"dc"`},
		{"frequency", "quantity", `"50 Hz"`},
		{"thd", "quantity: harmonic distortion, or ripple of dc", `"0.1 %"`},
		{"waveform", "in words", `"sine"`},
	}},
	{"mounting", "how the item sits in the field", []keyDoc{
		{"kind", "free-body or flush", `"free-body"`},
		{"reference_plane", "", `"centre of the head"`},
		{"orientation", "", `"axis along the field"`},
		{"sign_convention", "", `"positive: field towards the head"`},
		{"description", "", `"on an insulating rod"`},
	}},
	{"spacing", "how the distance between the electrodes was found", []keyDoc{
		{"points", "measured distances", `["100.02 mm", "99.98 mm", "100.01 mm", "99.99 mm"]`},
		{"centre", "quantity: distance at the centre", `"100.00 mm"`},
		{"method", "", `"gauge blocks at four points"`},
		{"instrument", "name of a table [instruments.NAME]", `"caliper"`},
		{"description", "", `"electrodes horizontal"`},
	}},
	{"capability", "best capability of the laboratory: no smaller uncertainty is stated", []keyDoc{
		{"expanded", "expanded uncertainty", `"2 V/m"`},
		{"relative_expanded", "the same as a part of the value", `"0.3 %"`},
		{"k", "coverage factor; 2 when not stated", `2`},
		{"lower", "lower end of the range in which it holds", `"1 kV/m"`},
		{"upper", "upper end", `"100 kV/m"`},
		{"scope", "", `"dc electric field between plates"`},
		{"source", "", `"schedule of the laboratory"`},
	}},
	{"client", "who asked for the work", []keyDoc{
		{"name", "", `"(client)"`},
		{"address", "", `"(address)"`},
		{"contact", "", `"(contact)"`},
		{"reference", "the client's order", `"(order)"`},
	}},
	{"item", "what is calibrated", []keyDoc{
		{"description", "", `"electric-field meter"`},
		{"maker", "", `"(maker)"`},
		{"model", "", `"(type)"`},
		{"serial", "", `"(serial)"`},
		{"identification", "the client's own mark", `"(mark)"`},
		{"firmware", "", `"(version)"`},
		{"condition", "as received", `"no damage seen"`},
		{"range", "", `"20 kV/m"`},
		{"accessories", "", `"insulating rod"`},
	}},
	{"work", "the job, for the certificate", []keyDoc{
		{"laboratory", "name", `"(laboratory)"`},
		{"address", "of the laboratory", `"(address)"`},
		{"country", "of the laboratory, two capitals as in ISO 3166-1", `"ZZ"`},
		{"place", "where the work was done", `"in the laboratory"`},
		{"title", "of the certificate", `"Calibration certificate"`},
		{"certificate", "its unique identification", `"(number)"`},
		{"received", "date", `2026-03-02`},
		{"performed", "date, the first when there are several", `2026-03-04`},
		{"finished", "last date of the work", `2026-03-05`},
		{"issued", "date", `2026-03-06`},
		{"method", "in words", `"comparison with the computed field between plates"`},
		{"procedure", "identification", `"(procedure)"`},
		{"performed_by", "", `"(name)"`},
		{"checked_by", "", `"(name)"`},
		{"authorised_by", "", `"(name)"`},
		{"function", "of who authorised", `"(function)"`},
		{"traceability", "statement", `"to the SI through the instruments listed"`},
		{"deviations", "from the method, and instruments past their date", `["none"]`},
		{"remarks", "", `["(remark)"]`},
		{"adjusted", "whether the item was adjusted", `false`},
		{"adjustment", "what was done", `"gain trimmed"`},
		{"recalibration", "date; printed only when agreed with the client", `2027-03-06`},
		{"agreed", "true when the recalibration date is agreed with the client", `false`},
		{"replaces", "file of the certificate that this one amends", `"(file)"`},
		{"reason", "why it is amended", `"(reason)"`},
	}},
	{"limits", "for a statement of conformity", []keyDoc{
		{"lower", "number in unit, or a quantity", `0.97`},
		{"upper", "likewise", `1.03`},
		{"unit", "of lower and upper", `"1"`},
		{"measurand", "which one; the first when not stated", `"correction_factor"`},
		{"source", "the specification", `"specification of the maker"`},
		{"rule", "simple, guard-band or non-binary", `"guard-band"`},
		{"guard", "guard band: \"U\" (default), a multiple such as \"0.83 U\", or a quantity", `"U"`},
		{"false_accept", "guard band from this greatest risk of accepting falsely, instead of guard", `"2.5 %"`},
	}},
	{"limits.population", "what is known of such items before measuring, for global risks", []keyDoc{
		{"mean", "number in the unit of limits, or a quantity; the middle of the limits when not stated", `1`},
		{"sd", "standard deviation", `0.01`},
		{"source", "", `"40 items of the last five years"`},
	}},
	{"safety", "the laboratory's own limits; local codes and licensed practice prevail", []keyDoc{
		{"energy", "greatest stored energy; 350 mJ when not stated", `"350 mJ"`},
		{"charge", "greatest stored charge; 50 uC when not stated", `"50 uC"`},
		{"source", "", `"safety instruction of the laboratory"`},
	}},
	{"report", "how results are stated", []keyDoc{
		{"coverage", "coverage probability; 95.45 % when not stated", `"95.45 %"`},
		{"digits", "significant digits of u in the comparison of law and Monte Carlo; 1 when not stated", `1`},
		{"definition", "definition of the factor, in words of the kind of bench", `"N = E/r"`},
	}},
	{"exclude[]", "a reading that is left out", []keyDoc{
		{"row", "data record, counted from 1 over all files", `17`},
		{"reason", "why; stands in every report", `"spark noted in the log"`},
	}},
}

// budgetDoc lists the tables of a budget file.
var budgetDoc = []tableDoc{
	{"", "the budget", []keyDoc{
		{"format", "version of the file's format; 1", `1`},
		{"title", "what the budget is for, in one line", `"Field between plates"`},
	}},
	{"inputs.*", "an input: the keys of a quantity, and these", []keyDoc{
		{"file", "CSV file in the folder of the budget that holds repeated readings (Type A)", `"repeats.csv"`},
		{"column", "header of their column", `"d/mm"`},
		{"unit", "unit of the column, or of plain numbers in readings", `"mm"`},
		{"sha256", "pin of the file", `"0000000000000000000000000000000000000000000000000000000000000000"`},
		{"decimal", "point (default) or comma", `"point"`},
		{"together", "inputs with the same word were read together, reading by reading: their correlation follows from the readings", `"run"`},
		{"group", "part of the bench, for grouping the budget", `"geometry"`},
	}},
	{"outputs.*", "an output", []keyDoc{
		{"formula", "Go expression of the inputs", `"v/d"`},
		{"unit", "of the result", `"kV/m"`},
	}},
	{"correlations[]", "correlation between two inputs", []keyDoc{
		{"between", "names of two inputs", `["v", "d"]`},
		{"r", "correlation coefficient, -1 to 1", `0.6`},
	}},
	{"instruments.*", "an instrument, as in a bench file", nil},
	{"report", "how results are stated", []keyDoc{
		{"coverage", "coverage probability; 95.45 % when not stated", `"95.45 %"`},
	}},
}

// table returns the list of a path.
func table(docs []tableDoc, path string) *tableDoc {
	for i := range docs {
		if docs[i].path == path {
			return &docs[i]
		}
	}
	return nil
}

func (t *tableDoc) names() []string {
	names := make([]string, len(t.keys))
	for i, k := range t.keys {
		names[i] = k.name
	}
	return names
}

// grammar is the set of keys a file may have, as a tree.
type grammar struct {
	order    []string
	children map[string]*grammar
	each     *grammar // of tables that the user names
	array    bool     // an array of tables
	leaf     bool     // a plain value, looked into no further
	quantity bool     // a quantity: a value, or a table of these keys
}

func (g *grammar) child(name string) *grammar {
	if g.children == nil {
		g.children = map[string]*grammar{}
	}
	c := g.children[name]
	if c == nil {
		c = &grammar{}
		g.children[name] = c
		g.order = append(g.order, name)
	}
	return c
}

// at returns the grammar of a path, making what is missing.
func (g *grammar) at(path string) *grammar {
	if path == "" {
		return g
	}
	for part := range strings.SplitSeq(path, ".") {
		name, array := strings.CutSuffix(part, "[]")
		if name == "*" {
			if g.each == nil {
				g.each = &grammar{}
			}
			g = g.each
		} else {
			g = g.child(name)
		}
		g.array = g.array || array
	}
	return g
}

func (g *grammar) add(docs []tableDoc) {
	for _, t := range docs {
		n := g.at(t.path)
		for _, k := range t.keys {
			c := n.child(k.name)
			c.leaf = c.children == nil && c.each == nil
		}
	}
}

// makeQuantity lets g be a quantity, with the keys of all the lists given.
func (g *grammar) makeQuantity(docs ...*tableDoc) {
	g.quantity, g.leaf = true, false
	for _, d := range docs {
		for _, k := range d.keys {
			g.child(k.name).leaf = true
		}
	}
}
