package wire

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log"
	"log/slog"
	"net"
	"sync"
	"time"

	"github.com/go-zeromq/zmq4"
)

// A Server is a kernel's end of the five channels. Its methods may be called from any goroutine.
type Server struct {
	codec   *codec
	at      Connection
	log     *limitedLog
	doors   [len(channels)]*door
	sockets [len(channels)]zmq4.Socket
	inbox   [3]*Queue[*Message] // of shell, control and stdin
	tally   *tally
}

// Listen opens the channels of a kernel. The ports that c leaves 0 are chosen by the system; [Server.Connection] has
// them. Log takes a line for what is dropped, messages and connections; it must not lead into a cell's output.
func Listen(c Connection, log *slog.Logger) (*Server, error) {
	if err := c.checkScheme(); err != nil {
		return nil, fmt.Errorf("wire: %w", err)
	}
	s := &Server{codec: newCodec(c, "kernel"), at: c, log: &limitedLog{log: log}, tally: newTally()}
	for i := range s.inbox {
		s.inbox[i] = NewQueue[*Message]()
	}
	lobby := newLobby()
	for _, ch := range channels { // all of them before anybody is let in
		if err := s.open(ch, lobby); err != nil {
			s.Close()
			return nil, fmt.Errorf("wire: cannot open the %s channel: %w", ch, err)
		}
	}
	for _, ch := range channels {
		if ch == Heartbeat {
			continue
		}
		if err := s.start(ch); err != nil {
			s.Close()
			return nil, fmt.Errorf("wire: cannot start the %s channel: %w", ch, err)
		}
	}
	go s.receive(Shell, lobby.put)
	go s.receive(Control, func(to *Queue[*Message], m *Message) {
		if m.Type == "interrupt_request" || m.Type == "shutdown_request" {
			to.Put(m) // these are for now, and often from somebody who listens to nothing
			return
		}
		lobby.put(to, m)
	})
	go s.receive(Stdin, (*Queue[*Message]).Put)
	go s.echo()
	return s, nil
}

// open starts to listen.
func (s *Server) open(ch Channel, l *lobby) error {
	kind, bounds := zmq4.Router, requestLimits
	switch ch {
	case IOPub:
		kind, bounds = zmq4.Pub, broadcastLimits
	case Heartbeat: // a router, since a replier would wait for a client that is lost
		bounds = heartbeatLimits
	}
	network, address := s.at.address(ch)
	d, err := openDoor(network, address, kind, bounds)
	if err != nil {
		return err
	}
	d.entered, d.left = func(net.Conn) {}, func(net.Conn) {}
	if ch == IOPub {
		d.entered, d.left = l.entered, l.left
		d.subscribed = func(c net.Conn, topic string, first bool) {
			s.welcome(topic)
			if first {
				l.subscribed(c) // after the welcome, so that the client hears that before anything of its request
			}
		}
	}
	d.refused = func(peer net.Addr, why error) {
		s.log.warn("connection dropped", "channel", ch.String(), "peer", peer.String(), "why", why.Error())
	}
	s.doors[ch] = d
	if a, ok := d.Addr().(*net.TCPAddr); ok {
		*s.at.port(ch) = a.Port
	}
	return nil
}

// start puts zmq4 behind a door and opens it.
func (s *Server) start(ch Channel) error {
	d := s.doors[ch]
	quiet := zmq4.WithLogger(log.New(io.Discard, "", 0))
	if d.kind == zmq4.Pub {
		s.sockets[ch] = zmq4.NewPub(context.Background(), quiet)
	} else {
		s.sockets[ch] = zmq4.NewRouter(context.Background(), quiet)
	}
	endpoint, err := doors.endpoint(d)
	if err != nil {
		return err
	}
	if err := s.sockets[ch].Listen(endpoint); err != nil {
		return err
	}
	if ch == IOPub {
		d.ready <- s.tally
		<-s.tally.reading
	}
	go d.serve()
	return nil
}

// receive decodes what comes on a channel until the server is closed.
func (s *Server) receive(ch Channel, put func(*Queue[*Message], *Message)) {
	for {
		raw, err := s.sockets[ch].Recv()
		if err != nil { // only after Close, and then for ever
			s.inbox[ch].End()
			return
		}
		m, err := s.codec.decode(1, raw.Frames)
		if err != nil {
			s.log.warn("message dropped", "channel", ch.String(), "why", err.Error())
			continue
		}
		put(s.inbox[ch], m)
	}
}

// echo answers heartbeats, each client in a goroutine of its own and without zmq4: while cells keep every core busy, each
// goroutine that a beat has to pass costs milliseconds.
func (s *Server) echo() {
	d := s.doors[Heartbeat]
	go d.serve()
	for {
		c, err := d.Accept()
		if err != nil {
			return
		}
		go c.(*peer).echo()
	}
}

// Connection returns where the server listens and with which key.
func (s *Server) Connection() Connection { return s.at }

// Receive waits for the next message of shell, control or stdin. The result is false once ctx is over or the server is
// closed.
func (s *Server) Receive(ctx context.Context, ch Channel) (*Message, bool) {
	return s.inbox[ch].Get(ctx)
}

// Reply sends a message on shell, control or stdin to the sender of to, whose header becomes its parent. Content and
// metadata are marshalled, or taken as they are if they are a json.RawMessage; nil is an empty object. The identifier
// returned is that of the message sent. A client that is gone is no error.
func (s *Server) Reply(ch Channel, to *Message, kind string, metadata, content any) (id string, err error) {
	frames, id, err := s.codec.encode(kind, to.Header, metadata, content)
	if err != nil {
		return "", err
	}
	s.sockets[ch].Send(zmq4.NewMsgFrom(append(to.Identities[:len(to.Identities):len(to.Identities)], frames...)...))
	return id, nil
}

// Publish broadcasts a message. Parent is the request that caused it, or nil. Messages published one after the other
// arrive in that order.
func (s *Server) Publish(parent *Message, kind string, content any) error {
	var header json.RawMessage
	if parent != nil {
		header = parent.Header
	}
	return s.broadcast("kernel."+s.codec.session+"."+kind, kind, header, content)
}

// welcome answers a subscription, as JEP 65 of the Jupyter project has it: on the topic subscribed to, so to everybody
// who has a subscription that matches. Who hears it knows that its own has taken effect.
func (s *Server) welcome(topic string) {
	err := s.broadcast(topic, "iopub_welcome", nil, map[string]string{"subscription": topic})
	if err != nil { // the server is closed
		s.log.warn("no welcome", "why", err.Error())
	}
}

func (s *Server) broadcast(topic, kind string, parent json.RawMessage, content any) error {
	frames, _, err := s.codec.encode(kind, parent, nil, content)
	if err != nil {
		return err
	}
	frames = append([][]byte{[]byte(topic)}, frames...)
	size := 0
	for _, f := range frames {
		size += len(f)
	}
	s.tally.sent(size)
	return s.sockets[IOPub].Send(zmq4.NewMsgFrom(frames...))
}

// Drain waits until all that was sent has been handed to the network, at most for that time; a peer that does not read
// is waited for no longer. Then it tells the peers that nothing more comes. It is the last thing before [Server.Close].
func (s *Server) Drain(atMost time.Duration) {
	ctx, cancel := context.WithTimeout(context.Background(), atMost)
	defer cancel()
	wait := func(done func() bool) {
		for !done() && ctx.Err() == nil {
			time.Sleep(time.Millisecond / 2)
		}
	}
	wait(s.tally.through)
	// The tally is served first, so the last message may still be on its way to the others. zmq4 takes in another
	// subscriber only between two messages.
	last := newTally()
	select {
	case s.doors[IOPub].ready <- last:
		select {
		case <-last.reading:
		case <-ctx.Done():
		}
	case <-ctx.Done():
	}
	for _, d := range s.doors {
		wait(d.drained)
	}
	for _, d := range s.doors {
		for _, p := range d.present() {
			p.finish()
		}
	}
	// A peer that has been told closes its end. To close ours before, with something of it unread, would make the
	// system throw away what it has not read.
	ctx, cancel = context.WithTimeout(ctx, 50*time.Millisecond)
	defer cancel()
	for _, d := range s.doors {
		wait(func() bool { return len(d.present()) == 0 })
	}
}

// Close closes all channels. What [Server.Drain] has not waited for is lost.
func (s *Server) Close() {
	s.tally.Close()
	for _, ch := range channels {
		if s.sockets[ch] != nil {
			s.sockets[ch].Close()
		}
		if s.doors[ch] != nil {
			s.doors[ch].Close()
		}
	}
}

// A limitedLog keeps whoever floods the kernel from flooding its log as well: ten lines a second, and then the number of
// those left out.
type limitedLog struct {
	log *slog.Logger

	mu      sync.Mutex
	second  time.Time // start of the current second; guarded by mu
	lines   int       // in it; guarded by mu
	skipped int       // since the last line; guarded by mu
}

func (l *limitedLog) warn(message string, details ...any) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if now := time.Now(); now.Sub(l.second) >= time.Second {
		l.second, l.lines = now, 0
	}
	if l.lines++; l.lines > 10 {
		l.skipped++
		return
	}
	if l.skipped > 0 {
		details = append(details, "left out before", l.skipped)
		l.skipped = 0
	}
	l.log.Warn(message, details...)
}
