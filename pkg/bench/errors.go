package bench

import (
	"errors"
	"regexp"
	"sort"
	"strconv"
	"strings"
)

// Error is something wrong in a bench file, a budget file or a readings file,
// with its place and, in Problem, what is wrong and what would be right.
type Error struct {
	File   string // as named by the bench; "" when the whole dataset is meant
	Line   int    // from 1; 0 when the file is meant
	Column int    // in characters from 1; 0 when the line is meant
	Key    string // key of the bench file, or header of the CSV column
	// Problem is the sentence after the place.
	Problem string
	Err     error // the cause, or nil
}

// Error returns "file:line:column: key: problem", leaving out what is unknown.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		b.WriteByte(':')
		b.WriteString(strconv.Itoa(e.Line))
		if e.Column > 0 {
			b.WriteByte(':')
			b.WriteString(strconv.Itoa(e.Column))
		}
	}
	if b.Len() > 0 {
		b.WriteString(": ")
	}
	if e.Key != "" {
		b.WriteString(brief(e.Key))
		b.WriteString(": ")
	}
	b.WriteString(e.Problem)
	return b.String()
}

// brief cuts a key that no real file has.
func brief(key string) string {
	const most = 200
	if len(key) <= most {
		return key
	}
	return strings.ToValidUTF8(key[:most], "") + "…"
}

// Unwrap returns the cause.
func (e *Error) Unwrap() error { return e.Err }

// maxErrors is how many independent errors are told at once.
const maxErrors = 10

// errorList gathers errors and orders them by their place.
type errorList struct {
	list []error
}

func (l *errorList) add(err error) {
	if err != nil {
		l.list = append(l.list, err)
	}
}

// err returns up to maxErrors errors in the order of the file, nil when there
// are none.
func (l *errorList) err() error {
	sort.SliceStable(l.list, func(i, j int) bool {
		var a, b *Error
		if !errors.As(l.list[i], &a) || !errors.As(l.list[j], &b) || a.File != b.File {
			return false
		}
		if a.Line != b.Line {
			return a.Line < b.Line
		}
		return a.Column < b.Column
	})
	l.gather()
	switch n := len(l.list); {
	case n == 0:
		return nil
	case n == 1:
		return l.list[0]
	case n > maxErrors:
		more := n - maxErrors
		return errors.Join(append(l.list[:maxErrors:maxErrors], errors.New("and "+strconv.Itoa(more)+" more"))...)
	}
	return errors.Join(l.list...)
}

// alike is how many errors that differ in nothing but their line and what the cell
// holds are told as one.
const alike = 4

// gather tells errors that repeat line by line once, with their number: a file with
// another decimal sign or separator is wrong in every line for one reason.
func (l *errorList) gather() {
	type family struct{ file, key, problem string }
	of := func(err error) (family, bool) {
		e, ok := err.(*Error)
		if !ok || e.Line == 0 || e.Column != 0 {
			return family{}, false
		}
		return family{e.File, e.Key, cited.ReplaceAllString(e.Problem, "")}, true
	}
	// run[i] is the first error of the unbroken run of lines that error i is in
	run, count := make([]int, len(l.list)), make([]int, len(l.list))
	last := map[family]int{}
	for i, err := range l.list {
		run[i] = i
		k, ok := of(err)
		if !ok {
			continue
		}
		if j, seen := last[k]; seen && err.(*Error).Line-l.list[j].(*Error).Line <= 2 { // a line between may be blank
			run[i] = run[j]
		}
		count[run[i]]++
		last[k] = i
	}
	kept := l.list[:0:0]
	for i, err := range l.list {
		if n := count[run[i]]; n >= alike {
			if run[i] != i {
				continue
			}
			e := *err.(*Error)
			more := strconv.Itoa(n-1) + " more lines"
			if len(l.list) >= maxErrors { // reading stops soon after as many
				more = "at least " + more
			}
			e.Problem += "; the same in " + more
			err = &e
		}
		kept = append(kept, err)
	}
	l.list = kept
}

// cited is what a message cites at its beginning.
var cited = regexp.MustCompile(`^"[^"]*"`)

// didYouMean is the hint that follows an unknown word: the nearest known one,
// or all of them when they are few.
func didYouMean(word string, known []string) string {
	if s := suggest(word, known); s != "" {
		return "; did you mean " + s + "?"
	}
	if len(known) == 0 {
		return ""
	}
	if len(known) <= 16 {
		return "; known: " + strings.Join(known, ", ")
	}
	return ""
}
