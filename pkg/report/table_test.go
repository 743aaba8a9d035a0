package report

import (
	"os"
	"strings"
	"testing"
)

func ExampleTable_Text() {
	t := &Table{
		Columns: []Column{{Name: "gap"}, {Name: "force", Unit: "mN", Align: Decimal}, {Name: "share", Align: Bar}},
		Rows:    [][]string{{"narrow", "12.5", "0.5"}, {"wide", "3", "0.25"}},
	}
	if err := t.Text(os.Stdout); err != nil {
		panic(err)
	}
	// Output:
	// gap     force  share
	//            mN
	// ─────────────────────
	// narrow   12.5  ███
	// wide      3    █▌
}

func TestTableForms(t *testing.T) {
	tab := &Table{
		Caption:  "A <caption>",
		Columns:  []Column{{Name: "name"}, {Name: "value", Unit: "µm", Align: Decimal}},
		Rows:     [][]string{{"=cmd()", "1.25"}, {"a,\"b\"", "−3"}, {"sum", "-1.75"}},
		Sections: []Section{{Before: 0, Name: "part"}},
		Sum:      1,
	}
	forms := tab.SimpleRender()
	for mime, want := range map[string][]string{
		"text/plain": {"A <caption>", "  =cmd()", "1.25", "−3"},
		"text/html":  {"A &lt;caption&gt;", `scope="rowgroup"`, "text-align:right", "background:none", "currentColor"},
		"text/latex": {`\begin{tabular}{@{}lr@{}}`, `$\mu$m`, `A \textless{}caption\textgreater{}`},
	} {
		s, ok := forms[mime].(string)
		if !ok {
			t.Fatalf("no %s form", mime)
		}
		for _, w := range want {
			if !strings.Contains(s, w) {
				t.Errorf("%s lacks %q:\n%s", mime, w, s)
			}
		}
	}
	var b strings.Builder
	if err := tab.CSV(&b); err != nil {
		t.Fatal(err)
	}
	if want := "name/,"; strings.Contains(b.String(), want) {
		t.Errorf("a column without a unit has got one")
	}
	if want := "name,value/µm\r\n'=cmd(),1.25\r\n\"a,\"\"b\"\"\",−3\r\nsum,-1.75\r\n"; b.String() != want {
		t.Errorf("CSV is %q, want %q", b.String(), want)
	}
	b.Reset()
	if err := tab.Markdown(&b); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(b.String(), "| *µm* |") || !strings.Contains(b.String(), "| **part** |") {
		t.Errorf("Markdown is %s", b.String())
	}
}

func TestNumbers(t *testing.T) {
	for _, c := range []struct {
		got, want string
	}{
		{digits(1234.5, 2), "1200"}, {digits(0.0001234, 2), "0.00012"}, {digits(1.5e-9, 2), "1.5×10⁻⁹"}, {digits(2, 3), "2.00"},
		{short(12500000, 3), "1.25×10⁷"}, {short(0.25, 5), "0.25"}, {freedom(8.97), "8.9"}, {freedom(112.4), "112"},
		{probability(1e-7), "< 0.0001"}, {percent(0.0004), "< 0.1"}, {percent(-0.031), "−3.1"}, {whole(1234567), "1\u2009234\u2009567"},
		{words("channels.voltage.gain"), "voltage gain"}, {words("corrections.wedge.half_difference"), "wedge half difference"},
		{tex("10⁻³ m²"), "10$^{-3}$ m$^{2}$"}, {tex("日本"), "[U+65E5][U+672C]"}, {md("1. a"), `1\. a`},
	} {
		if c.got != c.want {
			t.Errorf("got %q, want %q", c.got, c.want)
		}
	}
}
