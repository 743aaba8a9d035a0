package bench

import (
	"errors"
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
		b.WriteString(e.Key)
		b.WriteString(": ")
	}
	b.WriteString(e.Problem)
	return b.String()
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
