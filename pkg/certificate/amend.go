package certificate

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/xml"
	"errors"
	"fmt"
	"html"
	"io"
	"os"
	"path/filepath"
	"regexp"

	"example.org/guardring/pkg/bench"
)

// Amendment says what a certificate replaces and why.
type Amendment struct {
	Replaces string // identification of the certificate replaced
	Reason   string
	Files    []ReplacedFile
}

// ReplacedFile is a file of the certificate replaced.
type ReplacedFile struct{ File, SHA256 string }

// Replaced is a certificate file that is about to be replaced.
type Replaced struct {
	File string // its name, as the amendment calls it
	Data []byte
}

// largestCertificate bounds the file of a certificate to be replaced.
const largestCertificate = 64 << 20

// amend fills the amendment: from the files that the command replaces, else from
// the file that [work] replaces names.
func (c *Certificate) amend(b *bench.Bench, s Settings) error {
	w := b.Work
	if w.Reason == "" {
		return nil
	}
	files := s.Replaced
	if len(files) == 0 {
		path := w.Replaces
		if !filepath.IsAbs(path) {
			path = filepath.Join(b.Dir, filepath.FromSlash(path))
		}
		data, err := readFile(path)
		if err != nil {
			return fmt.Errorf("%s/bench.toml: work.replaces: the certificate to be replaced can't be read: %w", b.Dir, err)
		}
		files = []Replaced{{File: filepath.Base(path), Data: data}}
	}
	a := &Amendment{Reason: w.Reason}
	for _, f := range files {
		id, err := Identify(f.Data)
		if err != nil {
			return fmt.Errorf("%s: %w", f.File, err)
		}
		if id == c.Identification {
			return fmt.Errorf("%s/bench.toml: work.certificate: %q is the identification of the certificate in %s; an amendment takes a new one", b.Dir, id, f.File)
		}
		if a.Replaces != "" && a.Replaces != id {
			return fmt.Errorf("%s: holds certificate %s, another file to be replaced holds %s; an amendment replaces one certificate", f.File, id, a.Replaces)
		}
		a.Replaces = id
		sum := sha256.Sum256(f.Data)
		a.Files = append(a.Files, ReplacedFile{filepath.Base(f.File), hex.EncodeToString(sum[:])})
	}
	c.Amendment = a
	return nil
}

func readFile(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, largestCertificate+1))
	if err == nil && len(data) > largestCertificate {
		err = fmt.Errorf("%s is larger than %d MiB", path, largestCertificate>>20)
	}
	return data, err
}

var (
	htmlIdentifier = regexp.MustCompile(`<meta name="identifier" content="([^"]*)">`)
	xmpIdentifier  = regexp.MustCompile(`<dc:identifier>([^<]*)</dc:identifier>`)
	errUnknown     = errors.New("no certificate of this program: its identification can't be found")
)

// Identify returns the identification of a certificate in any of its forms.
func Identify(data []byte) (string, error) {
	switch {
	case bytes.HasPrefix(data, []byte("%PDF-")):
		if m := xmpIdentifier.FindSubmatch(data); m != nil {
			return html.UnescapeString(string(m[1])), nil
		}
	case bytes.HasPrefix(data, []byte("<?xml")):
		d := xml.NewDecoder(bytes.NewReader(data))
		for {
			t, err := d.Token()
			if err != nil {
				return "", errUnknown
			}
			if e, ok := t.(xml.StartElement); ok && e.Name.Local == "uniqueIdentifier" && e.Name.Space == dccSpace {
				var id string
				if err := d.DecodeElement(&id, &e); err != nil {
					return "", errUnknown
				}
				return id, nil
			}
		}
	default:
		if m := htmlIdentifier.FindSubmatch(data); m != nil {
			return html.UnescapeString(string(m[1])), nil
		}
	}
	return "", errUnknown
}
