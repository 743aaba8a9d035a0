package certificate

import (
	"bytes"
	"context"
	"io"
	"path/filepath"
	"sync"
	"testing"

	"example.org/guardring/pkg/bench"
	"example.org/guardring/pkg/reduce"
)

var reduced = map[string]*reduce.Result{}
var reducing sync.Mutex

// result reduces a demonstration bench once; the copy's bench may be changed.
func result(t testing.TB, name string) *reduce.Result {
	t.Helper()
	reducing.Lock()
	defer reducing.Unlock()
	if reduced[name] == nil {
		b, err := bench.Open(filepath.Join("..", "..", "datasets", name))
		if err != nil {
			t.Fatal(err)
		}
		r, err := reduce.Run(context.Background(), b, reduce.Settings{LawOnly: true})
		if err != nil {
			t.Fatal(err)
		}
		reduced[name] = r
	}
	r := *reduced[name]
	b := *r.Bench
	b.Instruments = append([]bench.Instrument(nil), b.Instruments...)
	b.Environment = append([]bench.Condition(nil), b.Environment...)
	if b.Limits != nil {
		l := *b.Limits
		b.Limits = &l
		if p := b.Limits.Population; p != nil {
			q := *p
			b.Limits.Population = &q
		}
	}
	r.Bench = &b
	return &r
}

// made is the certificate of a result.
func made(t testing.TB, r *reduce.Result) *Certificate {
	t.Helper()
	c, err := New(r, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// written is a form of a certificate.
func written(t testing.TB, c *Certificate, form func(*Certificate, io.Writer) error) string {
	t.Helper()
	var b bytes.Buffer
	if err := form(c, &b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

var forms = map[string]func(*Certificate, io.Writer) error{"html": (*Certificate).HTML, "pdf": (*Certificate).PDF, "xml": (*Certificate).XML}
