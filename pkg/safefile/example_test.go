package safefile_test

import (
	"fmt"
	"io"
	"os"
	"path/filepath"

	"example.org/guardring/pkg/safefile"
)

func ExampleWrite() {
	dir, err := os.MkdirTemp("", "")
	if err != nil {
		fmt.Println(err)
		return
	}
	defer os.RemoveAll(dir)
	path := filepath.Join(dir, "report.txt")
	err = safefile.Write(path, func(w io.Writer) error {
		_, err := fmt.Fprintln(w, "permittivity 8.8542(31) pF/m")
		return err
	})
	text, _ := os.ReadFile(path)
	fmt.Print(string(text), err, "\n")
	// Output:
	// permittivity 8.8542(31) pF/m
	// <nil>
}
