package kernel

import (
	"encoding/json"
	"errors"
	"fmt"
	"net"
	"os"
	"runtime"
)

// Connection says where a kernel listens and how messages are signed, as a Jupyter connection file holds it.
type Connection struct {
	Transport       string `json:"transport"`
	IP              string `json:"ip"`
	ShellPort       int    `json:"shell_port"`
	ControlPort     int    `json:"control_port"`
	StdinPort       int    `json:"stdin_port"`
	IOPubPort       int    `json:"iopub_port"`
	HBPort          int    `json:"hb_port"`
	SignatureScheme string `json:"signature_scheme"`
	Key             string `json:"key"`
	KernelName      string `json:"kernel_name,omitempty"`
}

// ReadConnection reads and checks a connection file. It refuses a file that others can read or write, an address
// that is not loopback, an empty key and any signature scheme but hmac-sha256, and says which.
func ReadConnection(path string) (*Connection, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("connection file: %w", err)
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, fmt.Errorf("connection file: %w", err)
	}
	if !info.Mode().IsRegular() {
		return nil, fmt.Errorf("connection file %s: not a regular file", path)
	}
	if info.Size() > 1<<16 {
		return nil, fmt.Errorf("connection file %s: %d bytes, expected less than 64 KiB", path, info.Size())
	}
	// Windows has no such permission bits; the file is protected by the folder it lies in.
	if perm := info.Mode().Perm(); runtime.GOOS != "windows" && perm&0o077 != 0 {
		return nil, fmt.Errorf("connection file %s: permissions %#o let others read the signing key, expected 0600", path, perm)
	}
	c := new(Connection)
	if err := json.NewDecoder(f).Decode(c); err != nil {
		return nil, fmt.Errorf("connection file %s: %w", path, err)
	}
	if err := c.Check(); err != nil {
		return nil, fmt.Errorf("connection file %s: %w", path, err)
	}
	return c, nil
}

// Check reports what in c a kernel must refuse.
func (c *Connection) Check() error {
	if c.Transport != "tcp" {
		return fmt.Errorf("transport %q, expected \"tcp\"", c.Transport)
	}
	if ip := net.ParseIP(c.IP); ip == nil || !ip.IsLoopback() {
		return fmt.Errorf("ip %q, expected a loopback address such as 127.0.0.1: whoever reaches the ports runs code", c.IP)
	}
	if c.SignatureScheme != "hmac-sha256" {
		return fmt.Errorf("signature_scheme %q, expected \"hmac-sha256\"", c.SignatureScheme)
	}
	if c.Key == "" {
		return errors.New("key is empty: unsigned messages would be run")
	}
	seen := map[int]string{}
	for _, p := range []struct {
		name string
		port int
	}{{"shell_port", c.ShellPort}, {"control_port", c.ControlPort}, {"stdin_port", c.StdinPort},
		{"iopub_port", c.IOPubPort}, {"hb_port", c.HBPort}} {
		if p.port < 1 || p.port > 65535 {
			return fmt.Errorf("%s %d, expected 1 to 65535", p.name, p.port)
		}
		if other, dup := seen[p.port]; dup {
			return fmt.Errorf("%s and %s are both %d", other, p.name, p.port)
		}
		seen[p.port] = p.name
	}
	return nil
}
