package gointerp

import (
	"go/scanner"
	"go/token"
	"strings"
)

// parenthesise puts brackets around function literals that begin a statement of a cell, as in func() { … }(): the
// interpreter's parser would read the beginning of a function declaration. Lines stay where they are.
func parenthesise(code string) string {
	if !strings.Contains(code, "func") {
		return code
	}
	type tok struct {
		tok token.Token
		off int
	}
	var toks []tok
	fset := token.NewFileSet()
	file := fset.AddFile("", fset.Base(), len(code))
	var s scanner.Scanner
	s.Init(file, []byte(code), func(token.Position, string) {}, 0)
	for {
		pos, t, _ := s.Scan()
		if t == token.EOF {
			break
		}
		toks = append(toks, tok{t, file.Offset(pos)})
	}
	// skip returns the index behind the bracket that matches the one at i, or -1.
	skip := func(i int) int {
		depth := 0
		for ; i < len(toks); i++ {
			switch toks[i].tok {
			case token.LPAREN, token.LBRACE, token.LBRACK:
				depth++
			case token.RPAREN, token.RBRACE, token.RBRACK:
				if depth--; depth == 0 {
					return i + 1
				}
			}
		}
		return -1
	}
	var out strings.Builder
	last, depth := 0, 0
	for i := 0; i < len(toks); i++ {
		switch toks[i].tok {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
			continue
		case token.RPAREN, token.RBRACE, token.RBRACK:
			depth--
			continue
		case token.FUNC:
		default:
			continue
		}
		begins := i == 0 || toks[i-1].tok == token.SEMICOLON
		if depth != 0 || !begins || i+1 >= len(toks) || toks[i+1].tok != token.LPAREN {
			continue
		}
		j := skip(i + 1)
		if j < 0 || j+1 < len(toks) && toks[j].tok == token.IDENT && toks[j+1].tok == token.LPAREN {
			continue // a method declaration
		}
		for j < len(toks) && toks[j].tok != token.LBRACE {
			switch toks[j].tok {
			case token.LPAREN, token.LBRACK:
				j = skip(j)
			case token.STRUCT, token.INTERFACE:
				j = skip(j + 1)
			default:
				j++
			}
			if j < 0 {
				break
			}
		}
		if j < 0 || j >= len(toks) {
			continue
		}
		end := skip(j)
		if end < 0 {
			continue
		}
		brace := toks[end-1].off + 1
		out.WriteString(code[last:toks[i].off] + "(" + code[toks[i].off:brace] + ")")
		last = brace
		i = end - 1
	}
	return out.String() + code[last:]
}

// wantsOperand reports whether code ends in a token that something must follow, such as an operator.
func wantsOperand(code string) bool {
	fset := token.NewFileSet()
	var s scanner.Scanner
	s.Init(fset.AddFile("", fset.Base(), len(code)), []byte(code), func(token.Position, string) {}, 0)
	last := token.EOF
	for {
		_, t, lit := s.Scan()
		if t == token.EOF {
			break
		}
		if t != token.SEMICOLON || lit == ";" {
			last = t
		}
	}
	switch last {
	case token.INC, token.DEC, token.RPAREN, token.RBRACK, token.RBRACE, token.SEMICOLON, token.ELLIPSIS:
		return false
	case token.FUNC, token.VAR, token.CONST, token.TYPE, token.IMPORT, token.IF, token.FOR, token.SWITCH, token.GO, token.DEFER, token.RANGE:
		return true
	}
	return last.IsOperator()
}
