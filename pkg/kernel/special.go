package kernel

import (
	"context"
	"fmt"
	"os"
	"strings"
)

const specialHelp = `Lines at the beginning of a cell that start with % are for the kernel:

  %doc EXPR   show what is known about a name or expression, in the pager
  %cd [DIR]   change the working directory, without DIR to your home folder
  %help       this text

Everything else is Go, without a package clause and a main function. Tab completes, Shift-Tab explains.
`

// splitSpecial cuts the lines for the kernel off the beginning of a cell. The code keeps its line numbers.
func splitSpecial(code string) (special []string, rest string) {
	if !strings.HasPrefix(strings.TrimSpace(code), "%") {
		return nil, code
	}
	lines := strings.Split(code, "\n")
	for i, l := range lines {
		t := strings.TrimSpace(l)
		if t == "" {
			continue
		}
		if t[0] != '%' {
			break
		}
		special = append(special, t)
		lines[i] = ""
	}
	return special, strings.Join(lines, "\n")
}

// runCell runs the special lines of a cell and then its code.
func (s *Server) runCell(ctx context.Context, c Cell) (*Result, error) {
	special, rest := splitSpecial(c.Code)
	var page map[string]any
	for i, line := range special {
		name, arg, _ := strings.Cut(line, " ")
		arg = strings.TrimSpace(arg)
		fail := func(format string, args ...any) error {
			return &CellError{Kind: CellFailed, Message: fmt.Sprintf(format, args...), Places: []Place{{Cell: c.Count, Line: i + 1}}}
		}
		switch name {
		case "%doc":
			forms, found := Inspect(s.in, s.cfg.Docs, arg, len(arg), 1)
			if !found {
				return nil, fail("%%doc: nothing is known about %q", arg)
			}
			page = forms
		case "%cd":
			if arg == "" {
				home, err := os.UserHomeDir()
				if err != nil {
					return nil, fail("%%cd: %v", err)
				}
				arg = home
			}
			if err := os.Chdir(arg); err != nil {
				return nil, fail("%%cd: %v", err)
			}
		case "%help":
			page = map[string]any{"text/plain": specialHelp}
		default:
			return nil, fail("no command %s; %%help lists those there are", name)
		}
	}
	c.Code = rest
	res, err := s.in.Run(ctx, c)
	if err == nil && page != nil {
		if res == nil {
			res = &Result{}
		}
		res.Page = page
	}
	return res, err
}
