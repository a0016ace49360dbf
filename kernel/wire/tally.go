package wire

import (
	"net"
	"slices"
	"sync"
	"time"

	"github.com/go-zeromq/zmq4"
)

// maxUnderway is how many bytes of broadcasts may wait inside zmq4, whose queue has no bound and no measure.
const maxUnderway = 32 << 20

// A tally is a connection that ends in this process: the first subscriber of the broadcast. zmq4 writes a message to its
// subscribers in the order in which they came, so when the tally sees message n, all messages before n are in
// everybody's outbox. That gives the broadcast what zmq4 keeps to itself: how much of it is under way, and when it is
// through.
type tally struct {
	in      []byte // greeting, READY and subscription
	reading chan struct{}
	closed  chan struct{}
	once    sync.Once
	skipped int   // bytes of zmq4's greeting seen; owned by zmq4's writing goroutine
	flow    meter // owned by zmq4's writing goroutine
	opened  bool  // zmq4's READY has passed; owned by zmq4's writing goroutine

	mu       sync.Mutex
	changed  sync.Cond // on mu
	messages int       // sent and not seen yet
	bytes    int       // of those
	over     bool
}

func newTally() *tally {
	t := &tally{reading: make(chan struct{}), closed: make(chan struct{})}
	t.changed.L = &t.mu
	t.in = append(slices.Clone(greeting), ready(zmq4.Sub, "")...)
	t.in = append(t.in, 0, 1, 1) // subscribe to everything
	return t
}

// sent counts a message that is about to be sent. It waits while too much is under way.
func (t *tally) sent(size int) {
	t.mu.Lock()
	defer t.mu.Unlock()
	for t.bytes > maxUnderway && !t.over {
		t.changed.Wait()
	}
	t.messages++
	t.bytes += size
}

func (t *tally) seen(size int) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.messages--
	t.bytes -= size
	t.changed.Broadcast()
}

// through reports whether everything that was sent is in the outboxes.
func (t *tally) through() bool {
	t.mu.Lock()
	defer t.mu.Unlock()
	return t.messages == 0
}

// Read implements net.Conn for zmq4. It closes reading when zmq4 has taken the subscription and comes back.
func (t *tally) Read(b []byte) (int, error) {
	if len(t.in) == 0 {
		close(t.reading)
		<-t.closed
		return 0, net.ErrClosed
	}
	n := copy(b, t.in)
	t.in = t.in[n:]
	return n, nil
}

// Write implements net.Conn for zmq4.
func (t *tally) Write(b []byte) (int, error) {
	n := len(b)
	skip := min(greetingLen-t.skipped, len(b))
	t.skipped += skip
	t.flow.write(b[skip:], func(size int) {
		if !t.opened {
			t.opened = true
			return
		}
		t.seen(size)
	})
	return n, nil
}

// Close implements net.Conn.
func (t *tally) Close() error {
	t.once.Do(func() {
		close(t.closed)
		t.mu.Lock()
		defer t.mu.Unlock()
		t.over = true
		t.changed.Broadcast()
	})
	return nil
}

// LocalAddr and its like implement net.Conn; a tally is nowhere and never late.
func (t *tally) LocalAddr() net.Addr              { return &net.UnixAddr{Name: "tally", Net: "unix"} }
func (t *tally) RemoteAddr() net.Addr             { return t.LocalAddr() }
func (t *tally) SetDeadline(time.Time) error      { return nil }
func (t *tally) SetReadDeadline(time.Time) error  { return nil }
func (t *tally) SetWriteDeadline(time.Time) error { return nil }
