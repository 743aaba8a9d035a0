package cell

import "testing"

func TestVisible(t *testing.T) {
	for in, want := range map[string]string{
		"ε = 8.85 pF/m\n\t±": "ε = 8.85 pF/m\n\t±",
		"\x1b[31mred\x07":    `\x1b[31mred\x07`,
		"a\u202eb\u200fc":    `a\u202eb\u200fc`,
		"\x00\r\u009b":       `\x00\x0d\x9b`,
		"\U000e0041":         `\U000e0041`,
	} {
		if got := Visible(in); got != want {
			t.Errorf("%q: %q, want %q", in, got, want)
		}
	}
}
