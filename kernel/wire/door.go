package wire

import (
	"context"
	"errors"
	"fmt"
	"net"
	"os"
	"sync"
	"time"

	"github.com/go-zeromq/zmq4"
	"github.com/go-zeromq/zmq4/transport"
)

// scheme is the name under which zmq4 knows our transport. The rest of an endpoint is the name of a door.
const scheme = "guarded"

// doors is the transport: it hands zmq4 the listeners that were opened for it before.
var doors registry

type registry struct {
	once sync.Once
	err  error // of registering; written within once

	mu    sync.Mutex
	count int
	open  map[string]*door // doors that zmq4 has not asked for yet; guarded by mu
}

// endpoint leaves a door for zmq4 and returns what to listen on.
func (r *registry) endpoint(d *door) (string, error) {
	r.once.Do(func() { r.err = zmq4.RegisterTransport(scheme, r) })
	if r.err != nil {
		return "", r.err
	}
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.open == nil {
		r.open = map[string]*door{}
	}
	r.count++
	name := fmt.Sprint(r.count)
	r.open[name] = d
	return scheme + "://" + name, nil
}

// Listen implements transport.Transport.
func (r *registry) Listen(_ context.Context, name string) (net.Listener, error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	d, ok := r.open[name]
	if !ok {
		return nil, fmt.Errorf("wire: no door %q", name)
	}
	delete(r.open, name)
	return d, nil
}

// Addr implements transport.Transport.
func (r *registry) Addr(endpoint string) (string, error) { return endpoint, nil }

// Dial implements transport.Transport; a door only lets in.
func (r *registry) Dial(context.Context, transport.Dialer, string) (net.Conn, error) {
	return nil, errors.New("wire: a guarded transport cannot dial")
}

// A door is the listener of one channel. Its connections have finished their handshake when Accept returns them.
type door struct {
	net.Listener
	kind       zmq4.SocketType
	limits     limits
	entered    func(c net.Conn)                           // a connection was made; its handshake begins
	subscribed func(c net.Conn, topic string, first bool) // a subscription has taken effect
	left       func(c net.Conn)                           // a connection is gone
	refused    func(peer net.Addr, why error)             // a peer was sent away

	ready  chan net.Conn
	closed chan struct{}
	once   sync.Once

	mu    sync.Mutex
	peers map[*peer]struct{} // guarded by mu
}

// maxSocketPath is what every system takes; where it takes no more, its own error says only "invalid argument".
const maxSocketPath = 103

// openDoor listens. The caller sets the callbacks and then calls serve.
func openDoor(network, address string, kind zmq4.SocketType, l limits) (*door, error) {
	if network == "unix" {
		if len(address) > maxSocketPath {
			return nil, fmt.Errorf("the socket's path has %d bytes, above %d: %s", len(address), maxSocketPath, address)
		}
		if err := clearSocket(address); err != nil {
			return nil, err
		}
	}
	listener, err := net.Listen(network, address)
	if err != nil {
		return nil, err
	}
	return &door{
		Listener: listener, kind: kind, limits: l,
		ready: make(chan net.Conn), closed: make(chan struct{}), peers: map[*peer]struct{}{},
	}, nil
}

// clearSocket removes the socket file of a process that is gone.
func clearSocket(path string) error {
	info, err := os.Lstat(path)
	if err != nil || info.Mode()&os.ModeSocket == 0 {
		return nil // listening will say what is wrong, if anything is
	}
	if c, err := net.Dial("unix", path); err == nil {
		c.Close()
		return fmt.Errorf("listen unix %s: another process listens there", path)
	}
	return os.Remove(path)
}

// serve takes connections until the door is closed, each handshake in a goroutine of its own.
func (d *door) serve() {
	for {
		c, err := d.Listener.Accept()
		if errors.Is(err, net.ErrClosed) {
			return
		}
		if err != nil { // no descriptors left, or a peer gone while it waited
			select {
			case <-time.After(20 * time.Millisecond):
				continue
			case <-d.closed:
				return
			}
		}
		d.entered(c)
		go d.admit(c)
	}
}

func (d *door) admit(c net.Conn) {
	replay, err := shake(c, d.kind, time.Now().Add(handshakeFor))
	if err != nil {
		d.refused(c.RemoteAddr(), err)
		c.Close()
		d.left(c)
		return
	}
	p := newPeer(d, c, replay)
	d.mu.Lock()
	d.peers[p] = struct{}{}
	d.mu.Unlock()
	select {
	case d.ready <- p:
	case <-d.closed:
		p.Close()
	}
}

func (d *door) forget(p *peer) {
	d.mu.Lock()
	delete(d.peers, p)
	d.mu.Unlock()
	d.left(p.Conn)
}

// Accept implements net.Listener for zmq4.
func (d *door) Accept() (net.Conn, error) {
	select {
	case c := <-d.ready:
		return c, nil
	case <-d.closed:
		return nil, net.ErrClosed
	}
}

// Close implements net.Listener.
func (d *door) Close() error {
	d.once.Do(func() { close(d.closed) })
	err := d.Listener.Close()
	for _, p := range d.present() {
		p.Close()
	}
	return err
}

func (d *door) present() []*peer {
	d.mu.Lock()
	defer d.mu.Unlock()
	list := make([]*peer, 0, len(d.peers))
	for p := range d.peers {
		list = append(list, p)
	}
	return list
}

// drained reports whether the network has everything that was written.
func (d *door) drained() bool {
	for _, p := range d.present() {
		if !p.out.drained() {
			return false
		}
	}
	return true
}
