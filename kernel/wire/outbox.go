package wire

import (
	"errors"
	"net"
	"sync"
	"time"
)

const (
	smallWrite = 16 << 10 // writes below are copied together, larger ones are kept as they are
	burst      = 1 << 20  // bytes that one system call is given, and the step in which a peer's progress is seen
	patience   = time.Second
	leastTaken = 4 << 20 // bytes that a full peer must take within patience
)

var (
	errFull   = errors.New("the peer does not read: its backlog is full")
	errClosed = net.ErrClosed
)

// An outbox holds what is to be written to one connection and writes it from a goroutine of its own: whoever sends never
// waits for the network, and what is sent in small pieces leaves in few system calls.
//
// Large pieces are kept by reference. That is sound here: zmq4 passes on the very frames that a message was made of, and
// no frame is changed after it was sent. So a large figure is held once for all subscribers.
type outbox struct {
	conn   net.Conn
	limits limits

	mu      sync.Mutex
	changed sync.Cond // on mu: any of the fields below

	queue  net.Buffers // full pieces
	tail   []byte      // small writes since the last piece
	spare  []byte      // for the next tail, with nothing in it
	size   int         // bytes in queue and tail and in the write under way
	taken  int64       // bytes that the connection has taken so far
	flow   meter       // where messages begin and end
	extra  []byte      // commands to be put between two messages
	err    error       // why nothing is taken any more
	full   bool        // from the time that the backlog was full until half of it is gone
	since  time.Time   // while full: start of the span in which progress is measured
	before int64       // while full: taken at that time
}

func newOutbox(conn net.Conn, l limits) *outbox {
	o := &outbox{conn: conn, limits: l}
	o.changed.L = &o.mu
	go o.run()
	return o
}

// Write queues p. It fails once the connection has been closed or given up. A backlog counts as full only between
// messages, so a single message of any size goes to a peer that has caught up.
func (o *outbox) Write(p []byte) (int, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if !o.flow.inner {
		o.await()
	}
	if o.err != nil {
		return 0, o.err
	}
	o.flow.write(p, func(int) {})
	o.add(p)
	if !o.flow.inner && o.extra != nil {
		o.add(o.extra)
		o.extra = nil
	}
	o.changed.Broadcast()
	return len(p), nil
}

// command queues a command's frame, behind the message that is being written.
func (o *outbox) command(frame []byte) {
	o.mu.Lock()
	defer o.mu.Unlock()
	switch {
	case o.err != nil || o.size >= o.limits.backlog || len(o.extra) >= smallWrite:
		// Whoever sends commands and reads none of the answers gets no more of them.
	case o.flow.inner:
		o.extra = append(o.extra, frame...)
	default:
		o.add(frame)
		o.changed.Broadcast()
	}
}

// add is called with mu held.
func (o *outbox) add(p []byte) {
	o.size += len(p)
	if len(p) < smallWrite {
		if o.tail == nil {
			o.tail, o.spare = o.spare, nil
		}
		o.tail = append(o.tail, p...)
		if len(o.tail) < burst {
			return
		}
		p = nil
	}
	if len(o.tail) > 0 {
		o.queue = append(o.queue, o.tail)
		o.tail = nil
	}
	for len(p) > 0 {
		n := min(len(p), burst)
		o.queue = append(o.queue, p[:n:n])
		p = p[n:]
	}
}

// await waits, with mu held, while the backlog is full and the peer reads fast enough; a peer that does not is given up,
// and on a channel that has no patience any peer whose backlog is full.
func (o *outbox) await() {
	for o.err == nil && o.size >= o.limits.backlog {
		now := time.Now()
		if !o.full {
			o.full, o.since, o.before = true, now, o.taken
		}
		late := now.Sub(o.since) >= patience
		if !o.limits.patient || late && o.taken-o.before < leastTaken {
			o.fail(errFull)
			return
		}
		if late {
			o.since, o.before = now, o.taken
		}
		wake := time.AfterFunc(o.since.Add(patience).Sub(now), o.changed.Broadcast)
		o.changed.Wait()
		wake.Stop()
	}
	if o.size < o.limits.backlog/2 {
		o.full = false
	}
}

// fail gives the connection up, with mu held. zmq4 forgets a connection whose error is a net.Error.
func (o *outbox) fail(err error) {
	if o.err == nil {
		o.err = &net.OpError{Op: "write", Net: o.conn.LocalAddr().Network(), Addr: o.conn.RemoteAddr(), Err: err}
		o.queue, o.tail, o.extra, o.size = nil, nil, nil, 0
		o.changed.Broadcast()
		o.conn.Close()
	}
}

// run writes what is queued until the connection is given up.
func (o *outbox) run() {
	for {
		batch, n, tail := o.next()
		if n == 0 {
			return
		}
		_, err := batch.WriteTo(o.conn)
		o.mu.Lock()
		if tail != nil && cap(tail) <= 2*smallWrite {
			o.spare = tail[:0]
		}
		if err != nil {
			o.fail(err)
		} else if o.err == nil {
			o.size -= n
			o.taken += int64(n)
			o.changed.Broadcast()
		}
		o.mu.Unlock()
	}
}

// next waits for something to write and takes one burst of it; none means the end. Where that is the tail alone, it is
// returned for use as another, since what was passed by reference must not be written to.
func (o *outbox) next() (batch net.Buffers, n int, tail []byte) {
	o.mu.Lock()
	defer o.mu.Unlock()
	for o.err == nil && len(o.queue) == 0 && len(o.tail) == 0 {
		o.changed.Wait()
	}
	if o.err != nil {
		return nil, 0, nil
	}
	if len(o.queue) == 0 {
		tail, o.tail = o.tail, nil
		return net.Buffers{tail}, len(tail), tail
	}
	if len(o.tail) > 0 {
		o.queue = append(o.queue, o.tail)
		o.tail = nil
	}
	for len(o.queue) > 0 && (n == 0 || n+len(o.queue[0]) <= burst) {
		n += len(o.queue[0])
		batch = append(batch, o.queue[0])
		o.queue[0] = nil
		o.queue = o.queue[1:]
	}
	return batch, n, nil
}

// drained reports whether everything has been handed to the network, or never will be.
func (o *outbox) drained() bool {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.size == 0
}

// gaveUp reports whether the connection was given up because its peer does not read.
func (o *outbox) gaveUp() bool {
	o.mu.Lock()
	defer o.mu.Unlock()
	return errors.Is(o.err, errFull)
}

// close gives the connection up without a complaint.
func (o *outbox) close() {
	o.mu.Lock()
	defer o.mu.Unlock()
	o.fail(errClosed)
}
