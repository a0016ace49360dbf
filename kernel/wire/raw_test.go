package wire

import (
	"bufio"
	"encoding/binary"
	"errors"
	"io"
	"net"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
)

// A rawPeer speaks to a channel byte by byte, as no library would.
type rawPeer struct {
	net.Conn
	t testing.TB
	r *bufio.Reader
}

// connect opens a connection and leaves the rest to the test.
func connect(t testing.TB, s *Server, ch Channel) *rawPeer {
	t.Helper()
	network, address := s.at.address(ch)
	c, err := net.Dial(network, address)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	return &rawPeer{Conn: c, t: t, r: bufio.NewReader(c)}
}

// greeted opens a connection and does its handshake well.
func greeted(t testing.TB, s *Server, ch Channel, kind zmq4.SocketType, identity string) *rawPeer {
	t.Helper()
	p := connect(t, s, ch)
	p.send(greeting, ready(kind, identity))
	p.welcome()
	return p
}

// welcome reads the server's greeting and READY.
func (p *rawPeer) welcome() {
	p.t.Helper()
	var g [greetingLen]byte
	if _, err := io.ReadFull(p.r, g[:]); err != nil {
		p.t.Fatal("no greeting of the server:", err)
	}
	if flags, body := p.frame(); flags != flagCommand || string(body[:6]) != "\x05READY" {
		p.t.Fatalf("no READY of the server: flags %d, %q", flags, body)
	}
}

func (p *rawPeer) send(parts ...[]byte) {
	for _, b := range parts {
		p.Write(b) // the server may have closed the connection already, and rightly
	}
}

// frame reads a frame.
func (p *rawPeer) frame() (flags byte, body []byte) {
	p.t.Helper()
	p.SetReadDeadline(time.Now().Add(10 * time.Second))
	flags, size, err := readFrameHeader(p.r)
	if err == nil {
		body, err = appendBody(nil, p.r, size)
	}
	if err != nil {
		p.t.Fatal("no frame of the server:", err)
	}
	return flags &^ flagLong, body
}

// message reads a message and leaves commands out.
func (p *rawPeer) message() (frames [][]byte) {
	p.t.Helper()
	for {
		flags, body := p.frame()
		if flags&flagCommand != 0 {
			continue
		}
		frames = append(frames, body)
		if flags&flagMore == 0 {
			return frames
		}
	}
}

// gone waits until the server has closed the connection.
func (p *rawPeer) gone() {
	p.t.Helper()
	p.SetReadDeadline(time.Now().Add(10 * time.Second))
	_, err := io.Copy(io.Discard, p.r)
	if e := net.Error(nil); errors.As(err, &e) && e.Timeout() {
		p.t.Error("the server keeps the connection")
	}
}

// wireFrame returns a frame as it is on the wire.
func wireFrame(flags byte, body string) []byte {
	return append(appendFrameHeader(nil, flags, len(body)), body...)
}

// longHeader is the header of a frame that announces any size.
func longHeader(flags byte, size uint64) []byte {
	return binary.BigEndian.AppendUint64([]byte{flags | flagLong}, size)
}

// wireMessage returns a message as it is on the wire.
func wireMessage(frames [][]byte) (b []byte) {
	for i, f := range frames {
		flags := byte(flagMore)
		if i == len(frames)-1 {
			flags = 0
		}
		b = append(b, wireFrame(flags, string(f))...)
	}
	return b
}

// signed returns a request as it is on the wire.
func signed(t testing.TB, s *Server, content string) []byte {
	t.Helper()
	frames, _, err := newCodec(s.Connection(), "raw").encode("test_request", nil, nil, rawJSON(content))
	if err != nil {
		t.Fatal(err)
	}
	return wireMessage(frames)
}
