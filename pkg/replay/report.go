package replay

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"example.org/guardring/pkg/cell"
)

// listed is how many differences are printed of each part of a record or output;
// Differences has all.
const listed = 12

// WriteText prints what the comparison found.
func (c *Comparison) WriteText(w io.Writer) error {
	var b strings.Builder
	c.text(&b)
	_, err := io.WriteString(w, cell.Visible(b.String()))
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
	for _, within := range []bool{false, true} {
		c.list(b, within)
	}
	for _, n := range c.Notes {
		fmt.Fprintf(b, "  note: %s\n", n)
	}
}

// list prints the differences of one sort, at most listed of each part of a record.
func (c *Comparison) list(b *strings.Builder, within bool) {
	place, section, shown, left := "", "", 0, 0
	more := func() {
		if left > 0 {
			fmt.Fprintf(b, "    and %d more of %s\n", left, section)
		}
		shown, left = 0, 0
	}
	first := true
	for i := range c.Differences {
		d := &c.Differences[i]
		if d.Within != within {
			continue
		}
		of, _, _ := strings.Cut(d.Name, ".")
		if first || d.Place != place || of != section {
			more()
			if head := headOf(d.Place, within); head != "" && (first || d.Place != place) {
				fmt.Fprintf(b, "  %s\n", head)
			}
			first, place, section = false, d.Place, of
		}
		if shown == listed {
			left++
			continue
		}
		shown++
		d.text(b)
	}
	more()
}

// headOf is the heading of the differences at one place.
func headOf(place string, within bool) string {
	switch {
	case !within:
		return place
	case place == "":
		return "within the tolerance"
	}
	return place + ", within the tolerance"
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
