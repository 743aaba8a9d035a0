package kernel

import (
	"bytes"
	"crypto/hmac"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"hash"
	"strings"
	"sync"
	"sync/atomic"
	"time"
)

// Protocol is the version of the Jupyter messaging protocol that the kernel speaks.
const Protocol = "5.3"

// Bounds of what the kernel takes from the wire.
const (
	MaxMessage    = 64 << 20 // bytes of one message, all frames together
	maxFrames     = 64       // frames of one message
	maxIdentities = 8        // routing frames before the delimiter
	maxName       = 1 << 10  // bytes of an id, a type or a name in a header
	overhead      = 1 << 10  // bytes of the delimiter, the signature and what frames a message
)

var delimiter = []byte("<IDS|MSG>")

// Header is the header of a message.
type Header struct {
	ID       string `json:"msg_id"`
	Session  string `json:"session"`
	Username string `json:"username"`
	Date     string `json:"date"`
	Type     string `json:"msg_type"`
	Version  string `json:"version"`
}

// Message is a decoded message.
type Message struct {
	Identities [][]byte // routing frames, given back in the reply
	Header     Header
	RawHeader  json.RawMessage // the header as it came, the parent of every answer
	Parent     Header
	Metadata   json.RawMessage
	Content    json.RawMessage
	Buffers    [][]byte
	Signature  string
}

// Decode checks and decodes the frames of a message: the delimiter, the number of frames, the signature under key,
// and that header, parent header, metadata and content are JSON objects with the fields the protocol requires. On an
// error the message is nil.
func Decode(frames [][]byte, key []byte) (*Message, error) {
	if len(key) == 0 {
		return nil, errors.New("no signing key")
	}
	if len(frames) > maxFrames {
		return nil, fmt.Errorf("%d frames, at most %d are taken", len(frames), maxFrames)
	}
	d := -1
	for i := 0; i < len(frames) && i <= maxIdentities; i++ {
		if bytes.Equal(frames[i], delimiter) {
			d = i
			break
		}
	}
	if d < 0 {
		return nil, fmt.Errorf("no %s among the first frames", delimiter)
	}
	rest := frames[d+1:]
	if len(rest) < 5 {
		return nil, fmt.Errorf("%d frames after %s, expected 5 or more", len(rest), delimiter)
	}
	if err := verify(rest[0], rest[1:5], key); err != nil {
		return nil, err
	}
	m := &Message{
		Identities: frames[:d], RawHeader: rest[1], Metadata: rest[3], Content: rest[4], Buffers: rest[5:],
		Signature: string(rest[0]),
	}
	if err := decodeHeader(rest[1], &m.Header); err != nil {
		return nil, fmt.Errorf("header: %w", err)
	}
	if err := object(rest[2]); err != nil {
		return nil, fmt.Errorf("parent header: %w", err)
	}
	if err := json.Unmarshal(rest[2], &m.Parent); err != nil {
		return nil, fmt.Errorf("parent header: %w", err)
	}
	if err := object(rest[3]); err != nil {
		return nil, fmt.Errorf("metadata: %w", err)
	}
	if err := object(rest[4]); err != nil {
		return nil, fmt.Errorf("content: %w", err)
	}
	return m, nil
}

func verify(signature []byte, parts [][]byte, key []byte) error {
	if len(signature) != hex.EncodedLen(sha256.Size) {
		return fmt.Errorf("signature of %d bytes, expected %d", len(signature), hex.EncodedLen(sha256.Size))
	}
	sum := make([]byte, sha256.Size)
	if _, err := hex.Decode(sum, signature); err != nil {
		return errors.New("signature is not hexadecimal")
	}
	mac := hmac.New(sha256.New, key)
	for _, p := range parts {
		mac.Write(p)
	}
	if !hmac.Equal(mac.Sum(nil), sum) {
		return errors.New("signature does not match")
	}
	return nil
}

func object(data []byte) error {
	if !json.Valid(data) {
		return errors.New("not JSON")
	}
	if t := bytes.TrimLeft(data, " \t\r\n"); t[0] != '{' {
		return errors.New("not a JSON object")
	}
	return nil
}

func decodeHeader(data []byte, h *Header) error {
	if err := object(data); err != nil {
		return err
	}
	if err := json.Unmarshal(data, h); err != nil {
		return err
	}
	for _, f := range []struct{ name, value string }{{"msg_id", h.ID}, {"msg_type", h.Type}, {"session", h.Session}} {
		if f.value == "" {
			return fmt.Errorf("%s is missing", f.name)
		}
	}
	for _, v := range []string{h.ID, h.Session, h.Username, h.Date, h.Type, h.Version} {
		if len(v) > maxName {
			return fmt.Errorf("a field of %d bytes, at most %d are taken", len(v), maxName)
		}
	}
	if h.Version != "" && !strings.HasPrefix(h.Version, "5.") {
		return fmt.Errorf("protocol version %q, this kernel speaks %s", h.Version, Protocol)
	}
	return nil
}

// signer signs outgoing messages and gives them their headers.
type signer struct {
	session string
	name    string
	most    int // bytes of a message
	count   atomic.Uint64

	mu  sync.Mutex
	mac hash.Hash
}

func newSigner(key []byte, name string) *signer {
	return &signer{session: randomID(), name: name, most: MaxMessage - overhead, mac: hmac.New(sha256.New, key)}
}

func randomID() string {
	var b [16]byte
	if _, err := rand.Read(b[:]); err != nil {
		panic(err) // the system has no randomness; crypto/rand documents that this never happens
	}
	return hex.EncodeToString(b[:])
}

// encode makes the frames of a message with the given routing frames and parent header (nil: none). Content that JSON
// can't hold, or that makes a message larger than MaxMessage, is an error.
func (s *signer) encode(identities [][]byte, msgType string, parent json.RawMessage, content any) (frames [][]byte, id string, err error) {
	id = fmt.Sprintf("%s_%d", s.session, s.count.Add(1))
	header, err := json.Marshal(Header{
		ID: id, Session: s.session, Username: s.name, Type: msgType, Version: Protocol,
		Date: time.Now().UTC().Format("2006-01-02T15:04:05.000000Z"),
	})
	if err != nil {
		return nil, "", err
	}
	if parent == nil {
		parent = json.RawMessage("{}")
	}
	body, err := encoded(content)
	if err != nil {
		return nil, "", fmt.Errorf("%s: %w", msgType, err)
	}
	parts := [][]byte{header, parent, []byte("{}"), body}
	size := 0
	for _, p := range append(parts, identities...) {
		size += len(p)
	}
	if size > s.most {
		return nil, "", fmt.Errorf("%s: a message of %d bytes, at most %d are sent", msgType, size, s.most)
	}
	s.mu.Lock()
	s.mac.Reset()
	for _, p := range parts {
		s.mac.Write(p)
	}
	sum := s.mac.Sum(nil)
	s.mu.Unlock()
	frames = make([][]byte, 0, len(identities)+6)
	frames = append(frames, identities...)
	frames = append(frames, delimiter, []byte(hex.EncodeToString(sum)))
	return append(frames, parts...), id, nil
}

// replays remembers the latest signatures, so that a message recorded on the wire can't be sent a second time.
type replays struct {
	seen  map[string]struct{}
	order []string
	next  int
}

func newReplays(n int) *replays {
	return &replays{seen: make(map[string]struct{}), order: make([]string, n)}
}

// first reports whether the signature was not seen before, and remembers it.
func (r *replays) first(signature string) bool {
	signature = strings.ToLower(signature)
	if _, dup := r.seen[signature]; dup {
		return false
	}
	if old := r.order[r.next]; old != "" {
		delete(r.seen, old)
	}
	r.order[r.next] = signature
	r.next = (r.next + 1) % len(r.order)
	r.seen[signature] = struct{}{}
	return true
}
