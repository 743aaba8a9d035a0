package certificate

import "testing"

// FuzzIdentify: any bytes are either a certificate with an identification or an
// error, and never both.
func FuzzIdentify(f *testing.F) {
	for _, s := range []string{"", "%PDF-1.3\n<dc:identifier>A&amp;B</dc:identifier>", "%PDF-1.3", "<html><meta name=\"identifier\" content=\"X-1\">",
		"<?xml version=\"1.0\"?><d:a xmlns:d=\"https://ptb.de/dcc\"><d:uniqueIdentifier>7</d:uniqueIdentifier></d:a>", "<?xml version=\"1.0\"?><a><uniqueIdentifier>7</uniqueIdentifier></a>",
		"<?xml <", "<?xml version=\"1.0\"?><!DOCTYPE a [<!ENTITY b \"c\">]><a>&b;</a>"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		id, err := Identify(data)
		if err != nil && id != "" {
			t.Errorf("error %v and identification %q", err, id)
		}
	})
}
