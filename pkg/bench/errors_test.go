package bench

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// wantError checks that err is there, holds each of the texts, and names a
// place.
func wantError(t *testing.T, err error, texts ...string) {
	t.Helper()
	if err == nil {
		t.Fatalf("no error; want %q", texts)
	}
	for _, s := range texts {
		if !strings.Contains(err.Error(), s) {
			t.Errorf("error\n  %v\ndoes not say %q", err, s)
		}
	}
	var e *Error
	if !errors.As(err, &e) {
		t.Errorf("%v is a %T, not an *Error", err, err)
	}
}

// TestHeaderOfAnotherQuantity: a header that says a length where the bench says a
// voltage is refused.
func TestHeaderOfAnotherQuantity(t *testing.T) {
	files := map[string]string{
		"bench.toml":   strings.Replace(goodBench, `"V/kV"`, `"V/mm"`, 1),
		"readings.csv": strings.Replace(goodReadings, "V/kV", "V/mm", 1),
	}
	_, err := OpenWith(testKind(), dataset(t, files))
	if err == nil {
		t.Fatal("not refused")
	}
	if want := `channels.voltage.unit: the header "V/mm" says mm, a length; the bench says kV, a voltage`; !strings.Contains(err.Error(), want) {
		t.Errorf("%v\ndoes not say %q", err, want)
	}
}

// TestBenchErrors changes the good bench in one place each.
func TestBenchErrors(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		// The head.
		{`format = 1`, ``, `format: is missing; write format = 1`},
		{`format = 1`, `format = 2`, `bench.toml:1:10: format: format 2 is not known to this version`},
		{`format = 1`, `format = "1"`, `"1" where a whole number is due`},
		{`format = 1`, `fromat = 1`, `format: is missing`},
		{`title  = "Disc of the tests"`, ``, `title: is missing`},
		{`title  = "Disc of the tests"`, `title = ""`, `title: the text is empty`},
		{`title  = "Disc of the tests"`, `title = 7`, `7 where a text is due; put it in quotes`},
		{`model  = "test-disc"`, ``, `model: is missing`},
		{`model  = "test-disc"`, `model = "test-disk"`, `model "test-disk" where "test-disc" is due`},
		{`model  = "test-disc"`, "model = \"test-disc\"\nmethod = \"least-square\"", `method: "least-square" is not known here; did you mean least-squares?`},
		{`model  = "test-disc"`, "model = \"test-disc\"\nmethd = \"least-squares\"", `methd: the key is not known; did you mean method?`},
		{`model  = "test-disc"`, "model = \"test-disc\"\ntitle = \"again\"", `not valid TOML`},
		{`model  = "test-disc"`, "model = \"test-disc\"\ncolour", `not valid TOML`},
		{`model  = "test-disc"`, "model = \"test-disc\"\nconnection = \"fixed\"", `connection: "fixed" is not known here`},
		{`model  = "test-disc"`, "model = \"test-disc\"\ndeep = [[[[[[[[[[[[[[[[[1]]]]]]]]]]]]]]]]]", `nested more than 16 deep`},
		{`model  = "test-disc"`, "model = \"test-disc\"\n" + strings.Repeat("a.", 70) + "a = 1", `bench.toml:4:130: a key has more than 64 parts`},
		{`model  = "test-disc"`, "model = \"test-disc\"\n[" + strings.Repeat("a.", 100) + "a]", `a key has more than 64 parts`},
		{`model  = "test-disc"`, "model = \"test-disc\"\n\"" + strings.Repeat("k", 100000) + "\" = 1", strings.Repeat("k", 200) + `…: the key is not known`},
		{`model  = "test-disc"`, "model = \"test-disc\"\n\x00", `zero byte`},
		{`model  = "test-disc"`, "model = \"test-disc\"\n# \xff", `bench.toml:4:3: this is not UTF-8 text`},

		// The files.
		{"[[readings]]\nfile = \"readings.csv\"", ``, `readings: is missing; name the readings`},
		{`[[readings]]`, `[readings]`, `readings: one table where several may stand; write [[readings]]`},
		{`file = "readings.csv"`, `file = "reading.csv"`, `bench.toml:6:8: readings[1].file: reading.csv: there is no such file in `},
		{`file = "readings.csv"`, `file = "reading.csv"`, `did you mean readings.csv?`},
		{`file = "readings.csv"`, `file = "../readings.csv"`, `the file must lie in the folder of the bench`},
		{`file = "readings.csv"`, `file = "/etc/passwd"`, `the file must lie in the folder of the bench`},
		{`file = "readings.csv"`, `file = "a\\b.csv"`, `forward slashes`},
		{`file = "readings.csv"`, `file = "."`, `this is a folder`},
		{`file = "readings.csv"`, `fiel = "readings.csv"`, `readings[1].fiel: the key is not known; did you mean file?`},
		{`file = "readings.csv"`, "file = \"readings.csv\"\nsha256 = \"12\"", `no SHA-256: 64 hexadecimal digits are due`},
		{`file = "readings.csv"`, "file = \"readings.csv\"\nsha256 = \"" + strings.Repeat("0", 64) + `"`, `the pin does not match: readings.csv has SHA-256 `},
		{`file = "readings.csv"`, "file = \"readings.csv\"\nseparator = \"colon\"", `"colon" is not known here; known: comma, semicolon, tab`},
		{`file = "readings.csv"`, "file = \"readings.csv\"\n[[readings]]\nfile = \"readings.csv\"", `"readings.csv" is read twice`},

		// Rows.
		{`time    = "t"`, `time = "time"`, `rows.time: readings.csv: there is no column "time"`},
		{`time    = "t"`, `tme = "t"`, `rows.tme: the key is not known; did you mean time?`},
		{`kind    = "kind"`, `kind = "knd"`, `there is no column "knd"; did you mean kind?`},
		{`kind    = "kind"`, `kind = "gap_no"`, `readings.csv:2: column gap_no: "1" is no kind of row; known: reading, zero, blank, overrange`},
		{`setting = "gap_no"`, `quality_reject = ["bad"]`, `rows.quality_reject: words that reject a row need the column that holds them`},
		{`setting = "gap_no"`, ``, `channels.gap.grouped[1].by: no column says which setting a row belongs to`},
		{`setting = "gap_no"`, `setting = "t"`, `column "t" is used as times and as something else`},

		// Channels.
		{`unit   = "kV"`, `unit = "mm"`, `bench.toml:15:8: channels.voltage.unit: "mm" is a length; a voltage is due (for example kV)`},
		{`unit   = "kV"`, `unit = "kVV"`, `channels.voltage.unit: unit "kVV": "kVV" is not known; did you mean "kV"?`},
		{`unit   = "kV"`, ``, `channels.voltage.unit: is missing; the unit of the column, for example kV`},
		{`column = "V/kV"`, ``, `channels.voltage.column: is missing`},
		{`column = "V/kV"`, `column = "V/KV"`, `channels.voltage.column: readings.csv: there is no column "V/KV"; did you mean V/kV?`},
		{`column = "V/kV"`, `column = 3`, `3 where a text is due`},
		{`column = "V/kV"`, `colunm = "V/kV"`, `did you mean column?`},
		{`[channels.voltage]`, `[channels.voltag]`, `channels.voltag: the key is not known; did you mean voltage?`},
		{`[channels.voltage]`, `[channels.voltag]`, `channels.voltage: is missing; model test-disc needs it: voltage of the plate`},
		{`[channels.force]`, `[channels.mas]`, `channels: a response is missing; model test-disc needs one of force, mass`},
		{`[corrections.wedge]`, "[channels.mass]\ncolumn = \"F/mN\"\nunit = \"g\"\nnoise = \"1 mg\"\n[corrections.wedge]", `force and mass are both given; a bench has one response`},
		{`noise  = "0.3 V"`, `noise = "0.3"`, `channels.voltage.noise: "0.3" is a pure number; a voltage is due`},
		{`noise  = "0.3 V"`, `noise = 0.3`, `0.3 is a plain number; a voltage is due, with its unit (for example "0.3 kV")`},
		{`noise  = "0.3 V"`, `noise = "0.3 %"`, `"0.3 %" is a pure number; a voltage is due, or write relative_noise = "0.3 %"`},
		{`noise  = "0.3 V"`, `noise = "0 V"`, `"0 V" must be above zero; leave the key out`},
		{`noise  = "0.3 V"`, `noise = "-1 V"`, `must be above zero`},
		{`noise  = "0.3 V"`, `noise = "from-residuals"`, `only the noise of the response can be found from the residuals`},
		{`noise  = "0.3 V"`, `noise = "from residuals"`, `did you mean from-residuals?`},
		{`noise  = "0.3 V"`, `noise = "0,3 V"`, `a comma stands in the number`},
		{`noise  = "0.3 V"`, "noise = \"0.3 V\"\nnoise_dof = 0", `channels.voltage.noise_dof: 0 where degrees of freedom are due`},
		{`noise  = "from-residuals"`, ``, `channels.force.noise: is missing; state the standard uncertainty of one reading`},
		{`noise  = "from-residuals"`, "noise = \"from-residuals\"\nrelative_noise = \"1 %\"", `noise comes from the residuals`},
		{`noise  = "from-residuals"`, "noise = \"from-residuals\"\nnoise_dof = 3", `degrees of freedom stand without a noise that is stated`},
		{`resolution = "1 uN"`, `resolution_kind = "setting"`, `resolution_kind stands without resolution`},
		{`resolution = "1 uN"`, "resolution = \"1 uN\"\nresolution_kind = \"row\"", `"row" is not known here`},
		{`gain   = { value = 1,`, `gain = { value = "1 V",`, `channels.voltage.gain.value: "1 V" is a voltage; a pure number is due`},
		{`gain   = { value = 1,`, `gain = { value = 0,`, `a gain of zero leaves nothing`},
		{`gain   = { value = 1,`, `gain = { value = 1, adjust = true,`, `a gain or an offset can't be adjusted`},
		{`instrument = "divider"`, `instrument = "divder"`, `channels.voltage.gain.instrument: instrument "divder" has no table [instruments.divder]; did you mean divider?`},
		{`by = "setting"`, `by = "seting"`, `did you mean setting?`},
		{`by = "setting"`, `by = "mount"`, `no column says which mount a row belongs to; add [rows] mount`},
		{`by = "setting", u = "3 um"`, `by = "setting"`, `channels.gap.grouped[1].u: is missing`},
		{`grouped = [{ by = "setting", u = "3 um", dof = 8 }]`, `grouped = [{ by = "setting", u = "3 um" }, { by = "setting", u = "1 um" }]`, `a second effect by setting`},
		{`grouped = [{ by = "setting", u = "3 um", dof = 8 }]`, `grouped = ["setting"]`, `"setting" where a table is due`},

		// Quantities.
		{`value = "50.012 mm"`, ``, `an uncertainty stands without a value`},
		{`value = "50.012 mm"`, `value = "50.012 mN"`, `quantities.disc_radius.value: "50.012 mN" is a force; a length is due (for example mm)`},
		{`value = "50.012 mm"`, `value = 50.012`, `50.012 is a plain number; a length is due, with its unit (for example "50.012 mm")`},
		{`value = "50.012 mm"`, `value = "-50.012 mm"`, `quantities.disc_radius.value: "-50.012 mm": radius of the disc must be above zero`},
		{`value = "50.012 mm"`, `value = "0 mm"`, `must be above zero`},
		{`value = "50.012 mm"`, `value = nan`, `nan is not a finite number`},
		{`value = "50.012 mm"`, `value = true`, `true where a number with its unit is due`},
		{`value = "50.012 mm"`, `value = "1e999 mm"`, `too large`},
		{`value = "50.012 mm"`, `value = "fifty mm"`, `it starts with no number`},
		{`u = "1.5 um"`, `u = "0 um"`, `must be above zero`},
		{`u = "1.5 um"`, `u = "1.5 %"`, `write relative_u = "1.5 %"`},
		{`u = "1.5 um"`, `uu = "1.5 um"`, `quantities.disc_radius.uu: the key is not known; did you mean u?`},
		{`u = "1.5 um"`, "u = \"1.5 um\"\nexpanded = \"3 um\"", `u and expanded are both given; state one of them`},
		{`u = "1.5 um"`, `expanded = "3 um"`, `an expanded uncertainty needs its k or its probability`},
		{`u = "1.5 um"`, "expanded = \"3 um\"\nk = 2\nprobability = 0.95", `k and probability are both given`},
		{`u = "1.5 um"`, "expanded = \"3 um\"\nk = 0", `0 where a coverage factor is due`},
		{`u = "1.5 um"`, "expanded = \"3 um\"\nk = 1e-300", `1e-300 where a coverage factor is due, a number from 0.5 to 1000`},
		{`noise  = "0.3 V"`, "noise = \"0.3 V\"\nnoise_dof = 1e-300", `1e-300 degrees of freedom: 0.5 belong to an uncertainty that may be wrong by all of itself`},
		{`u = "1.5 um"`, "expanded = \"3 um\"\nprobability = 95", `95 is not a probability below 1; write "95 %"`},
		{`u = "1.5 um"`, "u = \"1.5 um\"\nk = 2", `k belongs to expanded, which is not given`},
		{`u = "1.5 um"`, `half_width = "2 um"`, `half_width needs a shape`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"rectangle\"", `"rectangle" is not known here; did you mean rectangular?`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"normal\"", `shape "normal" is not stated by half_width; use u`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"trapezoidal\"", `a trapezoid needs beta`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"trapezoidal\"\nbeta = 1.5", `1.5 where a number from 0 (triangle) to 1 (rectangle) is due`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"curvilinear-trapezoid\"", `needs inexactness`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"curvilinear-trapezoid\"\ninexactness = \"3 um\"", `is larger than half_width`},
		{`u = "1.5 um"`, "half_width = \"2 um\"\nshape = \"rectangular\"\nbeta = 0.5", `beta belongs to shape = "trapezoidal"`},
		{"u = \"1.5 um\"\ndof = 12", `dof = 12`, `degrees of freedom stand without an uncertainty`},
		{"u = \"1.5 um\"\ndof = 12", `shape = "rectangular"`, `a shape stands without an uncertainty`},
		{"u = \"1.5 um\"\ndof = 12", "u = \"1.5 um\"\nshape = \"t\"", `the t distribution needs dof`},
		{`dof = 12`, `dof = -1`, `-1 where degrees of freedom are due`},
		{`dof = 12`, `start = "50 mm"`, `a start belongs to a quantity that is estimated; add adjust = true`},
		{`dof = 12`, `adjust = true`, `disc_radius can't be estimated from the readings of this kind of bench`},
		{`dof = 12`, `adjust = "yes"`, `"yes" where true or false is due`},
		{`dof = 12`, `instrument = "caliper"`, `instrument "caliper" has no table [instruments.caliper]`},
		{"value = \"50.012 mm\"\nu = \"1.5 um\"\ndof = 12", `readings = ["50 mm"]`, `a Type A evaluation needs two readings or more; there are 1`},
		{"value = \"50.012 mm\"\nu = \"1.5 um\"\ndof = 12", `readings = ["50 mm", "50 mm"]`, `all equal`},
		{"value = \"50.012 mm\"\nu = \"1.5 um\"\ndof = 12", `readings = ["50 mm", "50 V"]`, `"50 V" is a voltage; a length is due`},
		{"value = \"50.012 mm\"\nu = \"1.5 um\"\ndof = 12", "readings = [\"50 mm\", \"51 mm\"]\nu = \"1 um\"", `u and readings are both given`},
		{`[quantities.disc_radius]`, `[quantities.disk_radius]`, `quantities.disk_radius: the key is not known; did you mean disc_radius?`},
		{`[quantities.disc_radius]`, `[quantities.disk_radius]`, `quantities.disc_radius: is missing; model test-disc needs it: radius of the disc`},
		{"[quantities.gap_offset]", "[quantities]\npermittivity = { value = \"8.9 pF/m\", u = \"1 pF/m\" }\n[quantities.gap_offset]", `permittivity is what the fit finds, without prior knowledge`},
		{"[quantities.gap_offset]", "[quantities]\npermittivity = { start = \"-8.9 pF/m\" }\n[quantities.gap_offset]", `permittivity of the gap must be above zero`},
		{"[quantities.gap_offset]", "[quantities]\nhumidity = \"45 %\"\n[quantities.gap_offset]", `quantities.humidity: the key is not known; it belongs in [environment]`},
		{"[quantities.gap_offset]", "[quantities]\nhalf_difference = \"45 um\"\n[quantities.gap_offset]", `it belongs in [corrections.wedge]`},

		// Corrections, options, environment, correlations.
		{`half_difference = {`, `half_diference = {`, `did you mean half_difference?`},
		{`half_difference = {`, `half_diference = {`, `corrections.wedge.half_difference: is missing; model test-disc needs it: half of the difference of spacing`},
		{`[corrections.wedge]`, `[corrections.wegde]`, `corrections.wegde: the key is not known; did you mean wedge?`},
		{`use = true`, `use = "true"`, `"true" where true or false is due`},
		{`[environment]`, "[drive]\nkind = \"balancd\"\n[environment]", `drive.kind: "balancd" is not known here; did you mean balanced?`},
		{`temperature = { value = "20.5 degC", u = "0.2 degC" }`, `temprature = "20 degC"`, `environment.temprature: the key is not known; did you mean temperature?`},
		{`temperature = { value = "20.5 degC", u = "0.2 degC" }`, `temperature = { column = "T", unit = "degC" }`, `environment.temperature.column: readings.csv: there is no column "T"`},
		{`temperature = { value = "20.5 degC", u = "0.2 degC" }`, `temperature = { column = "t" }`, `environment.temperature.unit: is missing`},
		{`temperature = { value = "20.5 degC", u = "0.2 degC" }`, `temperature = { column = "t", unit = "degC", value = "1 degC" }`, `value does not go with column`},
		{`between = ["disc_radius", "channels.voltage.gain"]`, `between = ["disk_radius", "channels.voltage.gain"]`, `input "disk_radius" is not known; did you mean disc_radius?`},
		{`between = ["disc_radius", "channels.voltage.gain"]`, `between = ["disc_radius", "channels.gap.gain"]`, `input "channels.gap.gain" is not known`},
		{`between = ["disc_radius", "channels.voltage.gain"]`, `between = ["disc_radius"]`, `a correlation is between two inputs`},
		{`between = ["disc_radius", "channels.voltage.gain"]`, `between = ["disc_radius", "disc_radius"]`, `is named twice`},
		{`r = 0.6`, `r = 1.6`, `correlations[1].r: 1.6 is no correlation coefficient: those lie from -1 to 1`},
		{`r = 0.6`, ``, `correlations[1].r: is missing`},
		{`r = 0.6`, "r = 0.6\n[[correlations]]\nbetween = [\"channels.voltage.gain\", \"disc_radius\"]\nr = 0.5", `is stated in line`},

		// Exclusions.
		{`row = 3`, `row = 6`, `exclude[1].row: row 6 is excluded, but there are 5 data records`},
		{`row = 3`, `row = 0`, `0 lies outside 1 to`},
		{`row = 3`, `row = 1.5`, `1.5 where a whole number is due`},
		{`reason = "spark noted in the log"`, ``, `exclude[1].reason: is missing; no reading is left out without one`},
		{`reason = "spark noted in the log"`, "reason = \"spark\"\n[[exclude]]\nrow = 3\nreason = \"again\"", `row 3 is excluded twice`},
		{`[[exclude]]`, `[exclude]`, `write [[exclude]]`},

		// The job.
		{`[[exclude]]`, "[report]\ncoverage = 95.45\n[[exclude]]", `95.45 is not a probability below 1; write "95.45 %"`},
		{`[[exclude]]`, "[report]\ncoverage = 2e-308\n[[exclude]]", `report.coverage: 2e-308 is no coverage probability: those lie from 50 % to 99.9999 %`},
		{`[[exclude]]`, "[report]\ncoverage = \"99.99999 %\"\n[[exclude]]", `those lie from 50 % to 99.9999 %`},
		{`u = "1.5 um"`, "expanded = \"3 um\"\nprobability = \"5 %\"", `"5 %" is no coverage probability`},
		{`[[exclude]]`, "[limits]\nlower = 0.9\nupper = 1.1\n[[exclude]]", `limits.unit: is missing; limits without a unit say nothing`},
		{`[[exclude]]`, "[limits]\nlower = 1.1\nupper = 0.9\nunit = \"1\"\n[[exclude]]", `the limits are the wrong way round: lower is 1.1, upper 0.9`},
		{`[[exclude]]`, "[limits]\nunit = \"1\"\n[[exclude]]", `neither lower nor upper is given`},
		{`[[exclude]]`, "[limits]\nupper = \"3 mm\"\nunit = \"V\"\n[[exclude]]", `"3 mm" is a length; a voltage is due`},
		{`[[exclude]]`, "[limits]\nupper = 1\nunit = \"1\"\nrule = \"guarded\"\n[[exclude]]", `"guarded" is not known here`},
		{`[[exclude]]`, "[limits]\nupper = 1\nunit = \"1\"\nrule = \"guard-band\"\nguard = \"two U\"\n[[exclude]]", `"two U" is no multiple of U`},
		{`[[exclude]]`, "[limits]\nupper = 1\nunit = \"1\"\nguard = \"U\"\n[[exclude]]", `a guard band belongs to rule = "guard-band"`},
		{`[[exclude]]`, "[limits]\nupper = 1\nunit = \"1\"\nrule = \"guard-band\"\nfalse_accept = 0.6\n[[exclude]]", `a risk of 0.6 is no guard`},
		{`[[exclude]]`, "[limits]\nupper = 1\nunit = \"1\"\n[limits.population]\nsd = 1\n[[exclude]]", `with one limit only, the middle of the population must be stated`},
		{`[[exclude]]`, "[capability]\nk = 2\n[[exclude]]", `state either expanded or relative_expanded`},
		{`[[exclude]]`, "[work]\nissued = \"4 March 2026\"\n[[exclude]]", `"4 March 2026" is not a date; write it like 2026-03-04`},
		{`[[exclude]]`, "[work]\nperformed = 2026-03-04\nissued = 2026-03-03\n[[exclude]]", `2026-03-03 is before 2026-03-04`},
		{`[[exclude]]`, "[work]\nreplaces = \"a.html\"\n[[exclude]]", `an amendment names both what it replaces and the reason`},
		{`[[exclude]]`, "[client]\nnmae = \"x\"\n[[exclude]]", `client.nmae: the key is not known; did you mean name?`},
		{`[[exclude]]`, "[safety]\nenergy = \"1 V\"\n[[exclude]]", `"1 V" is a voltage; an energy or a torque is due (for example mJ)`},
		{`due = 2027-01-15`, `due = 2025-01-15`, `2025-01-15 is before the calibration on 2026-01-15`},
		{`serial = "D-1"`, `seral = "D-1"`, `instruments.divider.seral: the key is not known; did you mean serial?`},
		{`[[exclude]]`, "[spacing]\npoints = [\"1 mm\", \"-1 mm\"]\n[[exclude]]", `a distance must be above zero`},
	} {
		dir := good(t, c.old, c.new)
		b, err := OpenWith(testKind(), dir)
		if b != nil {
			t.Errorf("%q → %q: a bench was returned", c.old, c.new)
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q → %q:\n got %v\nwant …%s…", c.old, c.new, err, c.want)
			continue
		}
		var e *Error
		if !errors.As(err, &e) {
			t.Errorf("%v is a %T, not an *Error", err, err)
		}
	}
}

// TestReadingsErrors changes the good readings in one place each.
func TestReadingsErrors(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		{"2.0001", "1.2e", `readings.csv:3: column V/kV: "1.2e" is not a number`},
		{"2.0001", "NaN", `"NaN" is not a number; leave the cell empty when a value is missing, or say missing = ["NaN"] in [[readings]] (fit --missing "NaN")`},
		{"2.0001", "-Inf", `"-Inf" is not a number; leave the cell empty`},
		{"2.0001", "0x1p3", `"0x1p3" is not a number; write it as a decimal number`},
		{"2.0001", "2.0001 kV", `"2.0001 kV" is not a number; the unit belongs in the bench file`},
		{"2.0001", `"2,0001"`, `"2,0001" is not a number; if this is a decimal comma, say decimal = "comma"`},
		{"2.0001", "1e400", `"1e400" is beyond the range of numbers`},
		{"2.0001", `2.0"001`, `a quote stands within a cell`},
		{"2.0001", `"2.0001`, `a quoted cell is not closed`},
		{"2.0001", `"2.0001"x`, `something follows the closing quote of a cell`},
		{"2.0001,4.000", "2.0001", `readings.csv:3: the record has 5 cells, the header 6`},
		{"2.0001,4.000", "2.0001,4.000,5,6", `readings.csv:3: the record has 8 cells, the header 6`},
		{"-2.0002,4.000", "-2.0002,0", ``}, // row 3 is excluded
		{"reading,2,4.0001", "reading,,4.0001", `readings.csv:5: column gap_no: the cell is empty, but errors are grouped by setting`},
		{"4.0001,8.000", "4.0001,0", `readings.csv:5: column gap/mm: 0 mm: spacing must be above zero`},
		{"4.0001,8.000", "4.0001,-8", `-8 mm: spacing must be above zero`},
		{"4.0001,8.000", "4.0001,1e310", `beyond the range of numbers`},
		{"10,reading", "ten,reading", `readings.csv:3: column t: "ten" is not a time; write seconds or RFC 3339`},
		{"10,reading", "2026-03-04T10:00:00Z,reading", `times are written as seconds in line 2 and as time stamps in line 3`},
		{"10,reading", "10,readng", `readings.csv:3: column kind: "readng" is no kind of row; did you mean reading?`},
		{"10,reading", "10,re\xffding", `is not UTF-8 text`},
		{"V/kV,gap/mm", "V/kV,V/kV", `readings.csv:1: columns 4 and 5 have the same header "V/kV"`},
		{"V/kV,gap/mm", "V/kV,gap", `bench.toml:22:11: channels.gap.column: readings.csv: there is no column "gap/mm"; did you mean gap?`},
		{goodReadings, "", `readings.csv: the file is empty`},
		{goodReadings, "\n\n", `blank lines only`},
		{goodReadings, "t,kind,gap_no,V/kV,gap/mm,F/mN\n", `there is a header but no data record`},
		{goodReadings, "0,1,2,2,2,1\n1,1,1,1,1,1\n", `the first line holds numbers, where a header is due`},
		{goodReadings, "\xff\xfet\x00", `UTF-16`},
		{goodReadings, "t,kind\r1,2\r", `carriage return alone`},
		{goodReadings, "PK\x03\x04\x00\x00", `zero byte in the header`},
		{goodReadings, strings.Repeat("x", 10<<20), `readings.csv:1: the line is longer than 1048576 bytes`},
		{"10,reading", strings.Repeat("1", 10<<20) + ",reading", `readings.csv:3: the line is longer than 1048576 bytes`},
	} {
		text := strings.Replace(goodReadings, c.old, c.new, 1)
		dir := dataset(t, map[string]string{"bench.toml": goodBench, "readings.csv": text})
		b, err := OpenWith(testKind(), dir)
		shown := c.new
		if len(shown) > 80 {
			shown = shown[:80]
		}
		if c.want == "" {
			if err != nil {
				t.Errorf("%q: %v", shown, err)
			}
			continue
		}
		if b != nil {
			t.Errorf("%q: a bench was returned", shown)
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%q:\n got %v\nwant …%s…", shown, err, c.want)
		} else if len(err.Error()) > 4000 {
			t.Errorf("%q: a message of %d bytes", shown, len(err.Error()))
		}
	}
}

// TestSeveralErrors wants all of them, in the order of the file.
func TestSeveralErrors(t *testing.T) {
	_, err := OpenWith(testKind(), good(t, `unit   = "kV"`, `unit = "mm"`, `by = "setting"`, `by = "mount"`, `row = 3`, `row = "3"`, `r = 0.6`, `r = 7`))
	wantError(t, err, "channels.voltage.unit", "channels.gap.grouped[1].by", "correlations[1].r", "exclude[1].row")
	last := -1
	for _, line := range strings.Split(err.Error(), "\n") {
		parts := strings.Split(line, ":")
		n := 0
		for _, c := range parts[1] {
			n = 10*n + int(c-'0')
		}
		if n < last {
			t.Errorf("line %d after line %d", n, last)
		}
		last = n
	}
	var many strings.Builder
	for i := range 30 {
		many.WriteString("x" + string(rune('a'+i%26)) + strings.Repeat("y", i/26) + " = 1\n")
	}
	_, err = OpenWith(testKind(), good(t, `[[readings]]`, many.String()+"\n[[readings]]"))
	wantError(t, err, "and 20 more")
}

func TestFoldersThatAreNone(t *testing.T) {
	_, err := OpenWith(testKind(), filepath.Join(t.TempDir(), "nowhere"))
	wantError(t, err, "there is no such folder", "bench.toml")
	dir := dataset(t, map[string]string{"bench.tml": "x"})
	_, err = OpenWith(testKind(), dir)
	wantError(t, err, "there is no such file", "did you mean bench.tml?")
	_, err = OpenWith(testKind(), filepath.Join(dir, "bench.tml"))
	wantError(t, err, "this is no folder")
	_, err = Open(good(t))
	wantError(t, err, `model "test-disc" is not known`)
	if _, err = OpenWith(nil, dir); err == nil {
		t.Error("no kind: no error")
	}
	dir = dataset(t, map[string]string{"bench.toml": strings.Repeat("#", 2<<20)})
	_, err = OpenWith(testKind(), dir)
	wantError(t, err, "larger than 1048576 bytes")
}

// TestFilesStayInside tries links and special files.
func TestFilesStayInside(t *testing.T) {
	outside := dataset(t, map[string]string{"readings.csv": goodReadings})
	dir := dataset(t, map[string]string{"bench.toml": goodBench, "sub/inside.csv": goodReadings})
	link := filepath.Join(dir, "readings.csv")
	if err := os.Symlink(filepath.Join(outside, "readings.csv"), link); err != nil {
		t.Skip("no symbolic links here:", err)
	}
	_, err := OpenWith(testKind(), dir)
	wantError(t, err, "readings[1].file", "this link leads out of it")
	if err := os.Remove(link); err != nil {
		t.Fatal(err)
	}
	// A link that stays inside is no way out.
	if err := os.Symlink(filepath.Join("sub", "inside.csv"), link); err != nil {
		t.Fatal(err)
	}
	if _, err := OpenWith(testKind(), dir); err != nil {
		t.Errorf("link within the folder: %v", err)
	}
	if err := os.Remove(link); err != nil {
		t.Fatal(err)
	}
	// A link to itself, and a device.
	if err := os.Symlink("readings.csv", link); err != nil {
		t.Fatal(err)
	}
	if _, err := OpenWith(testKind(), dir); err == nil {
		t.Error("link to itself: no error")
	}
}
