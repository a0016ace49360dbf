package wire

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net"
	"os"
	"strconv"
)

// Scheme is the only signature scheme that the kernel knows, and the one that every front end of today writes.
const Scheme = "hmac-sha256"

// Connection is the content of a connection file: where the channels of a kernel are and how its messages are signed.
type Connection struct {
	Transport       string `json:"transport"` // "tcp" or "ipc"
	IP              string `json:"ip"`        // tcp: address or host name, IPv6 without brackets; ipc: the start of the sockets' paths
	ShellPort       int    `json:"shell_port"`
	IOPubPort       int    `json:"iopub_port"`
	StdinPort       int    `json:"stdin_port"`
	ControlPort     int    `json:"control_port"`
	HeartbeatPort   int    `json:"hb_port"`
	Key             string `json:"key"`              // empty: messages are not signed
	SignatureScheme string `json:"signature_scheme"` // empty stands for [Scheme]
}

// maxConnectionFile is far more than a connection file has; it keeps a wrong path from filling the memory.
const maxConnectionFile = 1 << 20

// ReadConnection reads and checks a connection file. Its errors name the file and what is wrong with it.
func ReadConnection(path string) (Connection, error) {
	var c Connection
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return c, fmt.Errorf("wire: no connection file %s; a front end writes one and passes its path", path)
	}
	if err != nil {
		return c, fmt.Errorf("wire: cannot read the connection file: %w", err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, maxConnectionFile+1))
	if err != nil {
		return c, fmt.Errorf("wire: cannot read the connection file: %w", err)
	}
	if len(text) > maxConnectionFile {
		return c, fmt.Errorf("wire: %s is no connection file: it is larger than %d bytes", path, maxConnectionFile)
	}
	if err := json.Unmarshal(text, &c); err != nil {
		var syntax *json.SyntaxError
		var kind *json.UnmarshalTypeError
		switch {
		case errors.As(err, &syntax):
			return c, fmt.Errorf("wire: %s is not JSON: %w at byte %d", path, err, syntax.Offset)
		case errors.As(err, &kind) && kind.Field != "":
			return c, fmt.Errorf("wire: %s: %q is a JSON %s and should be of type %s", path, kind.Field, kind.Value, kind.Type)
		}
		return c, fmt.Errorf("wire: %s is no connection file: %w", path, err)
	}
	if err := c.check(); err != nil {
		return c, fmt.Errorf("wire: connection file %s: %w", path, err)
	}
	return c, nil
}

// check refuses what [Listen] could not serve, and ports that are not fixed: a front end could not know them.
func (c Connection) check() error {
	if err := c.checkScheme(); err != nil {
		return err
	}
	if c.Transport != "tcp" && c.Transport != "ipc" {
		return fmt.Errorf("transport %q is not known; use tcp or ipc", c.Transport)
	}
	if c.IP == "" {
		return errors.New(`no "ip"; give 127.0.0.1, or for ipc the start of the sockets' paths`)
	}
	taken := map[int]string{}
	for _, ch := range channels {
		port := *c.port(ch)
		if port < 1 || port > 65535 {
			return fmt.Errorf("%s_port is %d; a port is 1 to 65535", ch.key(), port)
		}
		if other, ok := taken[port]; ok {
			return fmt.Errorf("%s_port and %s_port are both %d; every channel needs its own", other, ch.key(), port)
		}
		taken[port] = ch.key()
	}
	return nil
}

func (c Connection) checkScheme() error {
	if c.SignatureScheme != "" && c.SignatureScheme != Scheme {
		return fmt.Errorf("signature scheme %q is not known; this kernel signs with %s", c.SignatureScheme, Scheme)
	}
	return nil
}

// port returns where c keeps the port of a channel.
func (c *Connection) port(ch Channel) *int {
	return [...]*int{&c.ShellPort, &c.ControlPort, &c.StdinPort, &c.IOPubPort, &c.HeartbeatPort}[ch]
}

// address returns network and address of a channel as package net takes them.
func (c Connection) address(ch Channel) (network, address string) {
	port := strconv.Itoa(*c.port(ch))
	if c.Transport == "ipc" {
		return "unix", c.IP + "-" + port
	}
	host := c.IP
	if host == "*" { // ZeroMQ's name for all interfaces
		host = ""
	}
	return "tcp", net.JoinHostPort(host, port)
}

// A Channel is one of the sockets of a kernel.
type Channel int

// The channels of the Jupyter protocol.
const (
	Shell Channel = iota
	Control
	Stdin
	IOPub
	Heartbeat
)

var channels = [...]Channel{Shell, Control, Stdin, IOPub, Heartbeat}

func (ch Channel) String() string {
	return [...]string{"shell", "control", "stdin", "iopub", "heartbeat"}[ch]
}

// key is the channel's name in a connection file.
func (ch Channel) key() string {
	if ch == Heartbeat {
		return "hb"
	}
	return ch.String()
}
