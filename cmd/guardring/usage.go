package main

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"

	"github.com/spf13/cobra"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/si"
)

// names checks how many things a command is given to work on; what says in words
// which ("one bench folder", "at least three bench folders"). most < 0 is any number.
func names(what string, least, most int) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		switch n := len(args); {
		case n >= least && (most < 0 || n <= most):
			return nil
		case n == 0:
			return fmt.Errorf("%s: nothing is named; name %s", cmd.Name(), what)
		case n == 1:
			return fmt.Errorf("%s: only %s is named; name %s", cmd.Name(), args[0], what)
		default:
			return fmt.Errorf("%s: %d are named (%s); name %s", cmd.Name(), n, strings.Join(args, ", "), what)
		}
	}
}

// nothing refuses arguments of a command that takes none; below a command with
// others they are the name of one that there is not.
func nothing(cmd *cobra.Command, args []string) error {
	switch {
	case len(args) == 0:
		return nil
	case cmd.HasAvailableSubCommands():
		return unknownCommand(cmd, args[0])
	}
	return fmt.Errorf("%s: takes no argument; leave out %q", cmd.Name(), args[0])
}

// unknownCommand says that cmd has no command of that name, and which is near.
func unknownCommand(cmd *cobra.Command, name string) error {
	known := []string{"help"}
	for _, c := range cmd.Commands() {
		if c.IsAvailableCommand() {
			known = append(known, c.Name())
		}
	}
	if s := si.Suggest(name, known); s != "" {
		return fmt.Errorf("unknown command %q; did you mean %q?", name, s)
	}
	return fmt.Errorf("unknown command %q; %q lists the commands", name, helpOf(cmd))
}

// helpOf is what to type for the help of cmd.
func helpOf(cmd *cobra.Command) string {
	first, rest, _ := strings.Cut(cmd.CommandPath(), " ")
	return strings.TrimSpace(first + " help " + rest)
}

// helpCommand is help with an error for a command that there is not.
func helpCommand() *cobra.Command {
	return &cobra.Command{
		Use:   "help [COMMAND]",
		Short: "Say what a command does, with its options and an example",
		RunE: func(cmd *cobra.Command, args []string) error {
			at := cmd.Root()
			for _, name := range args {
				var next *cobra.Command
				for _, c := range at.Commands() {
					if c.Name() == name || c.HasAlias(name) {
						next = c
					}
				}
				if next == nil && !at.HasAvailableSubCommands() {
					return fmt.Errorf("help: %s has no command %q below it", at.CommandPath(), name)
				}
				if next == nil {
					return unknownCommand(at, name)
				}
				at = next
			}
			at.InitDefaultHelpFlag()
			return at.Help()
		},
		ValidArgsFunction: func(cmd *cobra.Command, args []string, _ string) ([]cobra.Completion, cobra.ShellCompDirective) {
			var all []cobra.Completion
			if len(args) == 0 {
				for _, c := range cmd.Root().Commands() {
					if c.IsAvailableCommand() {
						all = append(all, cobra.CompletionWithDesc(c.Name(), c.Short))
					}
				}
			}
			return all, cobra.ShellCompDirectiveNoFileComp
		},
	}
}

// wholeNumber reads a whole number as people write it: 200000, 2e5.
func wholeNumber(text string) (int64, error) {
	n, err := strconv.ParseInt(text, 10, 64)
	if err == nil {
		return n, nil
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil || x != math.Trunc(x) || math.Abs(x) > 1<<53 {
		return 0, errors.New("write a whole number, such as 10000 or 1e4")
	}
	return int64(x), nil
}

// count is the value of a flag that takes a whole number, also as 1e4.
type count int

func (c *count) String() string { return strconv.Itoa(int(*c)) }

func (c *count) Set(text string) error {
	n, err := wholeNumber(text)
	if err == nil && n != int64(int(n)) {
		err = errors.New("write a smaller number")
	}
	*c = count(n)
	return err
}

func (*count) Type() string { return "int" }

// countFlag adds a flag for a whole number.
func countFlag(cmd *cobra.Command, n *int, name string, byDefault int, usage string) {
	*n = byDefault
	cmd.Flags().Var((*count)(n), name, usage)
}

// flagError words what is wrong with a flag: which, what was given, and what
// would be right.
func flagError(cmd *cobra.Command, err error) error {
	var value interface {
		error
		GetValue() string
		Unwrap() error
	}
	var missing interface {
		error
		GetSpecifiedName() string
	}
	switch {
	case errors.As(err, &value):
		// The library's text is the only place that holds the flag's name without
		// its package: … for "-o, --output" flag: …
		_, rest, _ := strings.Cut(value.Error(), `" for "`)
		name, _, ok := strings.Cut(rest, `" flag: `)
		name = name[strings.LastIndexByte(name, '-')+1:]
		if i := strings.LastIndex(rest[:max(0, strings.Index(rest, `" flag: `))], "--"); i >= 0 {
			name, _, _ = strings.Cut(rest[i+2:], `"`)
		}
		f := cmd.Flag(name)
		if !ok || f == nil {
			return err
		}
		right := value.Unwrap().Error()
		switch f.Value.Type() {
		case "uint64":
			right = "write a whole number, zero or above"
		case "int":
			if _, own := f.Value.(*count); !own {
				right = "write a whole number"
			}
		case "float64":
			right = "write a number"
		case "bool":
			right = "write the flag alone, or true or false behind ="
		}
		return fmt.Errorf("--%s %s: %s", name, value.GetValue(), right)
	case errors.As(err, &missing):
		name := missing.GetSpecifiedName()
		dashed := "--" + name
		if len(name) == 1 {
			dashed = "-" + name
		}
		if f := cmd.Flag(name); f != nil || strings.Contains(err.Error(), "needs an argument") {
			return fmt.Errorf("%s needs a value behind it", dashed)
		}
		var known []string
		for _, line := range strings.Fields(cmd.Flags().FlagUsages()) {
			if s, ok := strings.CutPrefix(line, "--"); ok {
				known = append(known, strings.TrimRight(s, ",;.:"))
			}
		}
		if s := si.Suggest(name, known); s != "" {
			return fmt.Errorf("unknown flag %s; did you mean --%s?", dashed, s)
		}
		return fmt.Errorf("unknown flag %s; %q lists those there are", dashed, helpOf(cmd))
	}
	return err
}

// words is the message of err in our words where a library or the system has
// written part of it.
func words(err error) string {
	msg := err.Error()
	var path *fs.PathError
	if errors.As(err, &path) {
		why := ""
		switch {
		case errors.Is(path.Err, fs.ErrNotExist):
			why = "there is no such file or folder; check the name"
		case errors.Is(path.Err, fs.ErrPermission):
			why = "this account may not " + path.Op + " it; change its permissions or name another place"
			dir, base := filepath.Split(path.Path)
			into := "this account may not write into the folder " + filepath.Clean(dir) + "; change its permissions or name another place"
			if strings.HasPrefix(base, ".guardring-") {
				// The temporary file behind it is no name that the user has given.
				return strings.Replace(msg, path.Error(), into, 1)
			}
			if path.Op == "mkdir" {
				why = into
			}
		case errors.Is(path.Err, syscall.ENOTDIR):
			why = "a file stands where a folder is due; name another place"
		case errors.Is(path.Err, syscall.EISDIR):
			why = "this is a folder; name a file"
		}
		if why != "" {
			// What wraps it may have named the file already.
			named := path.Path + ": "
			if before, _, _ := strings.Cut(msg, path.Error()); strings.HasSuffix(before, named) {
				named = ""
			}
			msg = strings.Replace(msg, path.Error(), named+why, 1)
		}
	}
	if errors.Is(err, context.Canceled) {
		msg = strings.ReplaceAll(msg, ": "+context.Canceled.Error(), "; interrupted")
		msg = strings.ReplaceAll(msg, context.Canceled.Error(), "interrupted")
	}
	if rest, ok := strings.CutPrefix(msg, "required flag(s) "); ok {
		if list, ok := strings.CutSuffix(rest, " not set"); ok {
			var flags []string
			for _, f := range strings.Split(list, ", ") {
				flags = append(flags, "--"+strings.Trim(f, `"`))
			}
			msg = strings.Join(flags, " and ") + map[bool]string{true: " is", false: " are"}[len(flags) == 1] + " missing; state " + map[bool]string{true: "it", false: "them"}[len(flags) == 1]
		}
	}
	return cell.Visible(msg)
}
