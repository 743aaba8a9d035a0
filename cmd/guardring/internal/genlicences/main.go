// Genlicences gathers the licences of the modules that are linked into the
// command, for all systems it is built for, from the module cache and the Go
// distribution into one file of text.
//
//	go run ./cmd/guardring/internal/genlicences          writes cmd/guardring/licences.txt
//	go run ./cmd/guardring/internal/genlicences -check   says whether it is up to date
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strings"

	"example.org/guardring/pkg/safefile"
)

// systems are those that the command is built for.
var systems = []string{"linux/amd64", "linux/arm64", "darwin/arm64", "windows/amd64"}

// target is the file written, from the root of the module.
const target = "cmd/guardring/licences.txt"

func main() {
	check := flag.Bool("check", false, "compare with the file instead of writing it")
	flag.Parse()
	if err := run(*check); err != nil {
		fmt.Fprintln(os.Stderr, "genlicences:", err)
		os.Exit(1)
	}
}

func run(check bool) error {
	text, err := gather()
	if err != nil {
		return err
	}
	if !check {
		return safefile.WriteBytes(target, text)
	}
	old, err := os.ReadFile(target)
	if err != nil {
		return err
	}
	if !bytes.Equal(old, text) {
		return fmt.Errorf("%s is out of date; run go run ./cmd/guardring/internal/genlicences from the root of the module", target)
	}
	return nil
}

// module is what the go command says of one.
type module struct {
	Path, Version, Dir string
	Main               bool
}

// linked lists the modules of the command for one system.
func linked(system string) ([]module, error) {
	goos, goarch, _ := strings.Cut(system, "/")
	c := exec.Command("go", "list", "-deps", "-json=Module", "./cmd/guardring")
	c.Env = append(os.Environ(), "GOOS="+goos, "GOARCH="+goarch, "CGO_ENABLED=0")
	c.Stderr = os.Stderr
	out, err := c.Output()
	if err != nil {
		return nil, fmt.Errorf("go list for %s: %w", system, err)
	}
	var all []module
	for d := json.NewDecoder(bytes.NewReader(out)); ; {
		var p struct{ Module *module }
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all, nil
		} else if err != nil {
			return nil, err
		}
		if p.Module != nil && !p.Module.Main {
			all = append(all, *p.Module)
		}
	}
}

// gather makes the whole text: a line a module, then the texts.
func gather() ([]byte, error) {
	seen := map[string]module{}
	for _, s := range systems {
		all, err := linked(s)
		if err != nil {
			return nil, err
		}
		for _, m := range all {
			seen[m.Path] = m
		}
	}
	paths := make([]string, 0, len(seen))
	for p := range seen {
		paths = append(paths, p)
	}
	slices.Sort(paths)
	root, err := exec.Command("go", "env", "GOROOT").Output()
	if err != nil {
		return nil, fmt.Errorf("go env: %w", err)
	}
	list := []module{{Path: "std", Version: "Go standard library", Dir: strings.TrimSpace(string(root))}}
	for _, p := range paths {
		list = append(list, seen[p])
	}
	var table, texts bytes.Buffer
	for _, m := range list {
		files, err := licences(m.Dir)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", m.Path, err)
		}
		var ids []string
		for _, f := range files {
			data, err := os.ReadFile(filepath.Join(m.Dir, f))
			if err != nil {
				return nil, err
			}
			data = bytes.ReplaceAll(data, []byte("\r\n"), []byte("\n"))
			id := identify(string(data))
			if id == "" && strings.Contains(f, string(filepath.Separator)) {
				id = partOf // terms of what the module took over, in words of their own
			}
			if id == "" {
				return nil, fmt.Errorf("%s: %s is no licence that is known here; look at it and teach identify", m.Path, f)
			}
			for _, one := range strings.Split(id, " AND ") {
				if one != partOf && !slices.Contains(ids, one) {
					ids = append(ids, one)
				}
			}
			fmt.Fprintf(&texts, "\n==== %s %s: %s\n\n%s\n", m.Path, m.Version, filepath.ToSlash(f), bytes.TrimSpace(data))
		}
		fmt.Fprintf(&table, "%s\t%s\t%s\n", m.Path, m.Version, strings.Join(ids, " AND "))
	}
	return append(table.Bytes(), texts.Bytes()...), nil
}

// licences names the files of a module that state its licence, notices and what
// it took over included.
func licences(dir string) ([]string, error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, err
	}
	var files []string
	for _, e := range entries {
		name := strings.ToUpper(e.Name())
		is := strings.HasPrefix(name, "LICENSE") || strings.HasPrefix(name, "LICENCE") || strings.HasPrefix(name, "COPYING") ||
			strings.HasPrefix(name, "NOTICE") || name == "PATENTS"
		switch {
		case e.IsDir() && (name == "THIRD_PARTY_LICENSES" || name == "LICENSES"):
			more, err := os.ReadDir(filepath.Join(dir, e.Name()))
			if err != nil {
				return nil, err
			}
			for _, f := range more {
				if f.Name() == "gpl.txt" { // the other of two licences to choose from
					continue
				}
				files = append(files, filepath.Join(e.Name(), f.Name()))
			}
		case is && !e.IsDir():
			files = append(files, e.Name())
		}
	}
	if len(files) == 0 {
		return nil, fmt.Errorf("no licence in %s (%s)", dir, runtime.GOOS)
	}
	return files, nil
}

// partOf marks texts that add to the licence beside them.
const partOf = "-"

// identify tells a licence by its words and returns its SPDX identifier, "" when
// it is none of these.
func identify(text string) string {
	words := strings.Join(strings.Fields(text), " ")
	has := func(s string) bool { return strings.Contains(words, s) }
	const mit = "Permission is hereby granted, free of charge"
	switch {
	case has("Apache License") && has("Version 2.0") && has(mit):
		return "MIT AND Apache-2.0" // some files under the one, some under the other
	case has("Apache License") && has("Version 2.0"):
		return "Apache-2.0"
	case has("SIL OPEN FONT LICENSE Version 1.1"):
		return "OFL-1.1"
	case has("The FreeType Project LICENSE"):
		return "FTL"
	case has("choice of exactly one of the following two licenses"):
		return partOf
	case has("Boost Software License - Version 1.0"):
		return "BSL-1.0"
	case has("Mozilla Public License Version 2.0"):
		return "MPL-2.0"
	case has("Additional IP Rights Grant (Patents)"):
		return partOf
	case has("Redistribution and use in source and binary forms"):
		if has("Neither the name") || has("may be used to endorse or promote") || has("names of its contributors") || has("names of the contributors") {
			return "BSD-3-Clause"
		}
		return "BSD-2-Clause"
	case has(mit):
		return "MIT"
	case has("Permission to use, copy, modify, and") && has("distribute this software for any purpose with or without fee"):
		return "ISC"
	}
	return ""
}
