package report

import (
	"example.org/guardring/pkg/figure"
)

// document is a report before it takes a form: blocks in order. Texts are as
// they came; every form escapes them.
type document struct {
	title    string
	subtitle string
	blocks   []block
}

// block is one piece of a report; exactly one of its fields is set.
type block struct {
	heading string
	caution *caution
	results []result
	para    string
	notices []string // one sentence each, marked
	facts   []fact
	table   *Table
	figure  *figure.Figure
}

// caution is the notice on high voltage at the top.
type caution struct {
	text  string
	above []string // what exceeds a limit, a sentence each
}

// result is one measurand, stated.
type result struct {
	name, doc       string
	short, expanded string
}

// fact is a labelled line.
type fact struct{ label, text string }

func (d *document) head(s string)             { d.blocks = append(d.blocks, block{heading: s}) }
func (d *document) say(s string)              { d.blocks = append(d.blocks, block{para: s}) }
func (d *document) list(facts []fact)         { d.blocks = append(d.blocks, block{facts: facts}) }
func (d *document) show(t *Table)             { d.blocks = append(d.blocks, block{table: t}) }
func (d *document) draw(f *figure.Figure)     { d.blocks = append(d.blocks, block{figure: f}) }
func (d *document) notice(sentences []string) { d.blocks = append(d.blocks, block{notices: sentences}) }
