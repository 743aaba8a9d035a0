package replay

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// listed is how many differences of one place are printed; --json has all.
const listed = 20

// WriteText prints what the comparison found.
func (c *Comparison) WriteText(w io.Writer) error {
	var b strings.Builder
	c.text(&b)
	_, err := io.WriteString(w, b.String())
	return err
}

func (c *Comparison) text(b *strings.Builder) {
	fmt.Fprintf(b, "%s: %s\n", c.File, c.verdict())
	var parts []string
	if c.Cells > 0 {
		parts = append(parts, plural(c.Cells, "cell")+" run")
	}
	if c.Cells > 0 || c.Records > 1 {
		parts = append(parts, plural(c.Records, "record"))
	}
	parts = append(parts, fmt.Sprintf("%d identical", c.Identical), fmt.Sprintf("%d within tolerance", c.Within), fmt.Sprintf("%d different", c.Different))
	fmt.Fprintf(b, "  %s; tolerance %s of the number or its u\n", strings.Join(parts, ", "), strconv.FormatFloat(c.Tolerance, 'g', -1, 64))
	place, shown, left := "\x00", 0, 0
	more := func() {
		if left > 0 {
			fmt.Fprintf(b, "    and %d more\n", left)
		}
		shown, left = 0, 0
	}
	for _, within := range []bool{false, true} {
		for _, d := range c.Differences {
			if d.Within != within {
				continue
			}
			at := d.Place
			if within {
				at += " (within tolerance)"
			}
			if at != place {
				more()
				place = at
				if t := strings.TrimSpace(at); t != "" {
					fmt.Fprintf(b, "  %s\n", t)
				}
			}
			if shown == listed {
				left++
				continue
			}
			shown++
			d.text(b)
		}
	}
	more()
	for _, n := range c.Notes {
		fmt.Fprintf(b, "  note: %s\n", n)
	}
}

func (c *Comparison) verdict() string {
	switch {
	case c.Different > 0:
		return "different"
	case c.Identical+c.Within == 0:
		return "nothing to compare with"
	case c.Within > 0:
		return "the same within the tolerance"
	}
	return "identical"
}

func plural(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

func (d *Difference) text(b *strings.Builder) {
	fmt.Fprintf(b, "    %s\n      stored %s\n      now    %s\n", d.Name, d.Stored, d.Now)
	switch {
	case d.InU != nil:
		fmt.Fprintf(b, "      difference %s, which is %s u\n", short(*d.Difference), short(*d.InU))
	case d.Difference != nil:
		fmt.Fprintf(b, "      difference %s\n", short(*d.Difference))
	}
}

// short writes a difference, of which two digits are enough to judge it.
func short(x float64) string {
	if a := math.Abs(x); a >= 0.01 && a < 1e5 {
		return fmt.Sprintf("%+.3g", x)
	}
	return fmt.Sprintf("%+.2e", x)
}
