package wire

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"net"
	"slices"
	"strings"
	"time"

	"github.com/go-zeromq/zmq4"
)

// ZMTP 3.0, https://rfc.zeromq.org/spec/23/: greeting, then a READY command with the socket's type and identity.
const (
	greetingLen  = 64
	maxReady     = 8 << 10 // of a READY command, far above what a socket type and an identity need
	maxIdentity  = 255     // octets
	handshakeFor = 5 * time.Second

	nameType     = "Socket-Type"
	nameIdentity = "Identity"
)

// greeting of version 3.0 with the NULL mechanism. We speak no later version to anybody, so that subscriptions come as
// messages, which zmq4 understands.
var greeting = func() []byte {
	b := make([]byte, greetingLen)
	b[0], b[9], b[10] = 0xff, 0x7f, 3
	copy(b[12:], "NULL")
	return b
}()

// partners are the socket types that may talk to ours. zmq4 panics at one that it does not know.
var partners = map[zmq4.SocketType][]zmq4.SocketType{
	zmq4.Router: {zmq4.Dealer, zmq4.Req, zmq4.Router},
	zmq4.Pub:    {zmq4.Sub, zmq4.XSub},
}

// shake does the whole handshake on a new connection to a socket of ours and returns what zmq4 shall read of it: a
// greeting and a READY of our own making, so that nothing of the peer's own bytes reaches zmq4's parsers. The peer has
// until the deadline for all of it.
func shake(c net.Conn, kind zmq4.SocketType, deadline time.Time) (replay []byte, err error) {
	if err := c.SetDeadline(deadline); err != nil {
		return nil, err
	}
	if _, err := c.Write(append(slices.Clone(greeting), ready(kind, "")...)); err != nil {
		return nil, err
	}
	// The version comes with the first 11 octets; an older peer sends no more than those before it has seen ours.
	g := make([]byte, greetingLen)
	if _, err := io.ReadFull(c, g[:11]); err != nil {
		return nil, fmt.Errorf("no greeting: %w", err)
	}
	if g[0] != 0xff || g[9] != 0x7f {
		return nil, errors.New("no ZMTP greeting")
	}
	if g[10] < 3 {
		return nil, fmt.Errorf("ZMTP version %d; this kernel speaks 3", g[10])
	}
	if _, err := io.ReadFull(c, g[11:]); err != nil {
		return nil, fmt.Errorf("half a greeting: %w", err)
	}
	if mechanism := string(bytes.TrimRight(g[12:32], "\x00")); mechanism != "NULL" {
		return nil, fmt.Errorf("security mechanism %q; this kernel speaks NULL", mechanism)
	}
	body, err := readReady(c)
	if err != nil {
		return nil, err
	}
	peer, identity, err := parseReady(body)
	if err != nil {
		return nil, err
	}
	if !slices.Contains(partners[kind], zmq4.SocketType(peer)) {
		return nil, fmt.Errorf("a %q socket cannot talk to %s", peer, kind)
	}
	if err := c.SetDeadline(time.Time{}); err != nil {
		return nil, err
	}
	return append(slices.Clone(greeting), ready(zmq4.SocketType(peer), identity)...), nil
}

// ready returns a READY command on the wire.
func ready(kind zmq4.SocketType, identity string) []byte {
	body := []byte("\x05READY")
	for _, p := range [][2]string{{nameType, string(kind)}, {nameIdentity, identity}} {
		body = append(body, byte(len(p[0])))
		body = append(body, p[0]...)
		body = binary.BigEndian.AppendUint32(body, uint32(len(p[1])))
		body = append(body, p[1]...)
	}
	return append(appendFrameHeader(nil, flagCommand, len(body)), body...)
}

func readReady(r io.Reader) ([]byte, error) {
	flags, size, err := readFrameHeader(r)
	if err != nil {
		return nil, fmt.Errorf("no READY: %w", err)
	}
	if flags&^flagLong != flagCommand {
		return nil, errors.New("no READY: not a command")
	}
	if size > maxReady {
		return nil, fmt.Errorf("READY of %d bytes, above %d", size, maxReady)
	}
	body := make([]byte, size)
	if _, err := io.ReadFull(r, body); err != nil {
		return nil, fmt.Errorf("half a READY: %w", err)
	}
	return body, nil
}

// parseReady returns the socket type and the identity that a READY command names. Property names are compared without
// regard to case (RFC 23, "metadata").
func parseReady(body []byte) (kind, identity string, err error) {
	rest, ok := bytes.CutPrefix(body, []byte("\x05READY"))
	if !ok {
		return "", "", errors.New("no READY: another command")
	}
	for len(rest) > 0 {
		n := int(rest[0])
		if n == 0 || len(rest) < 1+n+4 {
			return "", "", errors.New("READY: a property's name overruns it")
		}
		name := string(rest[1 : 1+n])
		size := binary.BigEndian.Uint32(rest[1+n:])
		rest = rest[1+n+4:]
		if uint64(size) > uint64(len(rest)) {
			return "", "", fmt.Errorf("READY: property %q overruns it", name)
		}
		value := string(rest[:size])
		rest = rest[size:]
		switch {
		case strings.EqualFold(name, nameType):
			kind = value
		case strings.EqualFold(name, nameIdentity):
			identity = value
		}
	}
	if len(identity) > maxIdentity {
		return "", "", fmt.Errorf("an identity of %d octets, above %d", len(identity), maxIdentity)
	}
	return kind, identity, nil
}
