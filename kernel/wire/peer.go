package wire

import (
	"bufio"
	"errors"
	"io"
	"net"
	"os"
	"time"
	"unicode/utf8"

	"github.com/go-zeromq/zmq4"
)

// A peer is one connection past its handshake, as zmq4 sees it: Read gives whole messages only, Write never blocks on the
// network. zmq4 reads and writes a connection from one goroutine each.
type peer struct {
	net.Conn
	door *door
	out  *outbox
	raw  *bufio.Reader

	in         []byte  // what zmq4 has still to read
	topic      *string // the subscription in what zmq4 reads now, if one is there
	subscribed bool    // a subscription has taken effect
	topics     int     // subscriptions taken and given up so far

	opening []byte // greeting and READY of zmq4, which the peer has had already; nil when they are complete
}

func newPeer(d *door, c net.Conn, replay []byte) *peer {
	return &peer{Conn: c, door: d, out: newOutbox(c, d.limits), raw: bufio.NewReader(c), in: replay, opening: []byte{}}
}

// echo sends back what comes, in place of zmq4, until the peer is gone or has not read for a while.
func (p *peer) echo() {
	for {
		p.in = nil
		if err := p.next(); err != nil {
			p.fail(err)
			return
		}
		if len(p.in) == 0 { // a command
			continue
		}
		p.SetWriteDeadline(time.Now().Add(patience))
		if _, err := p.Conn.Write(p.in); err != nil {
			if errors.Is(err, os.ErrDeadlineExceeded) {
				err = errFull
			}
			p.fail(err)
			return
		}
	}
}

// fail closes the connection, and says why unless the peer has just left.
func (p *peer) fail(err error) {
	if p.out.gaveUp() {
		err = errFull
	}
	if !errors.Is(err, io.EOF) && !errors.Is(err, net.ErrClosed) {
		p.door.refused(p.RemoteAddr(), err)
	}
	p.Close()
}

// Read implements net.Conn for zmq4.
func (p *peer) Read(b []byte) (int, error) {
	for len(p.in) == 0 {
		// zmq4 comes back for more only after it has dealt with what it read before.
		if p.topic != nil {
			p.door.subscribed(p.Conn, *p.topic, !p.subscribed)
			p.topic, p.subscribed = nil, true
		}
		if err := p.next(); err != nil {
			p.fail(err)
			return 0, io.EOF
		}
	}
	n := copy(b, p.in)
	p.in = p.in[n:]
	return n, nil
}

// next reads one message, or a command, from the peer. What zmq4 shall see of it is then in p.in.
func (p *peer) next() error {
	var (
		message []byte
		total   uint64
	)
	for frames := 1; ; frames++ {
		flags, size, err := readFrameHeader(p.raw)
		if err != nil {
			return err
		}
		if size > p.door.limits.message { // before it is added up: it may be anything up to 2^64-1
			return p.door.limits.check(size, frames)
		}
		total += size
		if err := p.door.limits.check(total, frames); err != nil {
			return err
		}
		if flags&flagCommand != 0 {
			if err := p.command(size); err != nil {
				return err
			}
			if message == nil {
				return nil
			}
			continue
		}
		message = appendFrameHeader(message, flags&flagMore, int(size))
		if message, err = appendBody(message, p.raw, size); err != nil {
			return err
		}
		if flags&flagMore == 0 {
			break
		}
	}
	if p.door.kind == zmq4.Pub {
		// zmq4 queues whatever is no subscription in a channel that nobody reads, and stops reading when it is full.
		return p.subscription(message)
	}
	p.in = message
	return nil
}

// maxTopics bounds the set of subscriptions that zmq4 keeps for one connection, and the welcomes that it causes; a front
// end has one.
const maxTopics = 64

// subscription passes on a message that subscribes (1, topic) or unsubscribes (0, topic), and nothing else. A topic that
// is no UTF-8 is ignored, as JEP 65 asks; nothing that is broadcast could match it.
func (p *peer) subscription(message []byte) error {
	head := 2
	if message[0]&flagLong != 0 {
		head = 9
	}
	body := message[head:]
	if len(body) == 0 || body[0] > 1 || !utf8.Valid(body[1:]) {
		return nil
	}
	if p.topics++; p.topics > maxTopics {
		return errors.New("too many subscriptions")
	}
	if body[0] == 1 {
		topic := string(body[1:])
		p.topic = &topic
	}
	p.in = message
	return nil
}

// command deals with a command of that size. None is for zmq4's ears: a router would take it for a message.
func (p *peer) command(size uint64) error {
	const most = 1 << 10 // a ping has 7 bytes and at most 16 of context; a subscription has its topic
	if size > most {
		return errors.New("a command that is too long")
	}
	body := make([]byte, size)
	if _, err := io.ReadFull(p.raw, body); err != nil {
		return err
	}
	if len(body) == 0 || int(body[0]) > len(body)-1 {
		return errors.New("a command whose name overruns it")
	}
	name, rest := string(body[1:1+body[0]]), body[1+body[0]:]
	switch name {
	case zmq4.CmdPing: // RFC 37: two octets of time to live, then a context to be echoed
		if len(rest) < 2 {
			return errors.New("a PING without its time to live")
		}
		pong := append([]byte("\x04PONG"), rest[2:]...)
		p.out.command(append(appendFrameHeader(nil, flagCommand, len(pong)), pong...))
	case zmq4.CmdSubscribe, zmq4.CmdCancel: // how ZMTP 3.1 subscribes
		if p.door.kind == zmq4.Pub {
			verb := byte(1)
			if name == zmq4.CmdCancel {
				verb = 0
			}
			return p.subscription(append(append(appendFrameHeader(nil, 0, 1+len(rest)), verb), rest...))
		}
	}
	return nil
}

// Write implements net.Conn for zmq4.
func (p *peer) Write(b []byte) (int, error) {
	n := len(b)
	if p.opening != nil {
		p.opening = append(p.opening, b...)
		end := greetingLen + 2
		if len(p.opening) < end {
			return n, nil
		}
		if end += int(p.opening[end-1]); len(p.opening) < end { // zmq4's READY is shorter than 256 bytes
			return n, nil
		}
		b = p.opening[end:]
		p.opening = nil
		if len(b) == 0 {
			return n, nil
		}
	}
	if _, err := p.out.Write(b); err != nil {
		return 0, err
	}
	return n, nil
}

// Close implements net.Conn.
func (p *peer) Close() error {
	p.out.close()
	p.door.forget(p)
	return nil
}

// finish tells the peer that nothing more will come.
func (p *peer) finish() {
	if c, ok := p.Conn.(interface{ CloseWrite() error }); ok {
		c.CloseWrite()
	}
}
