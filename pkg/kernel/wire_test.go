package kernel

import (
	"bytes"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"io"
	"strings"
	"testing"
	"time"
)

// TestSignature checks the digest itself against RFC 4231, section 4.3 (test case 2 of HMAC-SHA-256): the key "Jefe"
// and the text below, here cut into the four parts that are signed.
func TestSignature(t *testing.T) {
	const want = "5bdcc146bf60754e6a042426089575c75a003f089d2739839dec58b964ec3843"
	parts := [][]byte{[]byte("what do "), []byte("ya want "), []byte("for "), []byte("nothing?")}
	if err := verify([]byte(want), parts, []byte("Jefe")); err != nil {
		t.Error(err)
	}
	if err := verify([]byte(want), parts, []byte("jefe")); err == nil {
		t.Error("another key passes")
	}
}

func frames(parts ...string) [][]byte {
	mac := hmac.New(sha256.New, testKey)
	out := [][]byte{delimiter, nil}
	for _, p := range parts {
		mac.Write([]byte(p))
		out = append(out, []byte(p))
	}
	out[1] = []byte(hex.EncodeToString(mac.Sum(nil)))
	return out
}

const goodHeader = `{"msg_id":"1","session":"s","msg_type":"execute_request","version":"5.3"}`

func TestDecode(t *testing.T) {
	m, err := Decode(append([][]byte{[]byte("a"), []byte("b")}, append(frames(goodHeader, "{}", "{}", `{"code":"1"}`), []byte("buffer"))...), testKey)
	if err != nil {
		t.Fatal(err)
	}
	if len(m.Identities) != 2 || m.Header.Type != "execute_request" || len(m.Buffers) != 1 || string(m.Content) != `{"code":"1"}` {
		t.Errorf("decoded %+v", m)
	}
	for name, c := range map[string]struct {
		frames [][]byte
		key    []byte
		want   string
	}{
		"no key":         {frames(goodHeader, "{}", "{}", "{}"), nil, "no signing key"},
		"no delimiter":   {frames(goodHeader, "{}", "{}", "{}")[1:], testKey, "no <IDS|MSG>"},
		"late delimiter": {append(make([][]byte, 9), frames(goodHeader, "{}", "{}", "{}")...), testKey, "no <IDS|MSG>"},
		"few":            {frames(goodHeader, "{}", "{}"), testKey, "expected 5"},
		"many":           {make([][]byte, maxFrames+1), testKey, "at most"},
		"id":             {frames(`{"session":"s","msg_type":"t"}`, "{}", "{}", "{}"), testKey, "msg_id is missing"},
		"version":        {frames(`{"msg_id":"1","session":"s","msg_type":"t","version":"4.1"}`, "{}", "{}", "{}"), testKey, "protocol version"},
		"list":           {frames(goodHeader, "{}", "{}", "[]"), testKey, "content: not a JSON object"},
		"white":          {frames(goodHeader, "{}", " \n", "{}"), testKey, "metadata: not JSON"},
	} {
		m, err := Decode(c.frames, c.key)
		if err == nil || !strings.Contains(err.Error(), c.want) || m != nil {
			t.Errorf("%s: %v, %v, want an error about %q", name, m, err, c.want)
		}
	}
}

func TestEncodeDecode(t *testing.T) {
	s := newSigner(testKey, "user")
	f, id, err := s.encode([][]byte{[]byte("peer")}, "stream", json.RawMessage(goodHeader), map[string]any{"text": "<µ>"})
	if err != nil {
		t.Fatal(err)
	}
	m, err := Decode(f, testKey)
	if err != nil || m.Header.ID != id || m.Parent.ID != "1" || string(m.Content) != `{"text":"<µ>"}` {
		t.Errorf("%v %+v", err, m)
	}
	if _, _, err := s.encode(nil, "x", nil, func() {}); err == nil {
		t.Error("content that JSON can't hold is encoded")
	}
}

func FuzzDecode(f *testing.F) {
	join := func(fr [][]byte) []byte { return bytes.Join(fr, []byte{0x1f}) }
	f.Add(join(frames(goodHeader, "{}", "{}", `{"code":"1"}`)))
	f.Add(join(append([][]byte{[]byte("peer")}, frames(goodHeader, `{"msg_id":"0"}`, "{}", "{}")...)))
	f.Add(join(frames(goodHeader, "null", "[]", "3")))
	f.Add([]byte("<IDS|MSG>"))
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, data []byte) {
		fr := bytes.Split(data, []byte{0x1f})
		check := func(fr [][]byte) {
			m, err := Decode(fr, testKey)
			if err != nil {
				if m != nil {
					t.Error("a message beside an error")
				}
				return
			}
			if m.Header.ID == "" || m.Header.Type == "" || !json.Valid(m.Content) || !json.Valid(m.RawHeader) {
				t.Errorf("decoded %+v", m)
			}
			again, _, err := newSigner(testKey, "u").encode(m.Identities, m.Header.Type, m.RawHeader, m.Content)
			if err != nil {
				t.Fatal(err)
			}
			back, err := Decode(again, testKey)
			if err != nil || back.Parent.ID != m.Header.ID {
				t.Errorf("answering it: %v", err)
			}
		}
		check(fr)
		// The same with a right signature, so that what comes behind it is reached.
		for i := range fr {
			if bytes.Equal(fr[i], delimiter) && len(fr) >= i+6 {
				parts := make([]string, 4)
				for k := range parts {
					parts[k] = string(fr[i+2+k])
				}
				check(append(append([][]byte(nil), fr[:i]...), frames(parts...)...))
				break
			}
		}
	})
}

func FuzzFrames(f *testing.F) {
	f.Add([]byte{0, 1, 'x', 1, 0, 0, 0})
	f.Add([]byte{2, 0, 0, 0, 0, 0, 0, 1, 0})
	f.Add([]byte{0xff})
	f.Fuzz(func(t *testing.T, data []byte) {
		// However the bytes are cut, the judgement is the same.
		var whole, cut frameScan
		errWhole := whole.pass(data)
		var errCut error
		for i := range data {
			if errCut = cut.pass(data[i : i+1]); errCut != nil {
				break
			}
		}
		if (errWhole == nil) != (errCut == nil) {
			t.Errorf("%v at once, %v byte by byte", errWhole, errCut)
		}
		if errWhole == nil && whole.between() != cut.between() {
			t.Error("the end of a message depends on how the bytes are cut")
		}
	})
}

func TestReplays(t *testing.T) {
	r := newReplays(2)
	for _, c := range []struct {
		sig  string
		want bool
	}{{"a", true}, {"A", false}, {"b", true}, {"c", true}, {"a", true}, {"c", false}} {
		if r.first(c.sig) != c.want {
			t.Errorf("%q: want %v", c.sig, c.want)
		}
	}
}

func TestDropsAreWrittenOnceASecond(t *testing.T) {
	var w strings.Builder
	d := newDrops(&w)
	now := time.Unix(100, 0)
	d.now = func() time.Time { return now }
	for range 1000 {
		d.add("shell", io.EOF)
	}
	now = now.Add(time.Second)
	d.add("shell", strings.Repeat("x", 5000))
	lines := strings.Split(strings.TrimSpace(w.String()), "\n")
	if len(lines) != 2 || !strings.Contains(lines[1], "dropped 1000 (1001 in all)") || len(lines[1]) > 500 {
		t.Errorf("%q", lines)
	}
}
