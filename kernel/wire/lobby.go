package wire

import (
	"net"
	"slices"
	"sync"
	"time"
)

const (
	longestHold = 50 * time.Millisecond
	freshFor    = time.Second // a subscription without a client is taken for a new client's own
	maxKnown    = 4096        // clients remembered
)

// A lobby holds the first request of a client that it has not seen until the client's subscription to the broadcast has
// taken effect, at most 50 ms. A front end connects its sockets in one go and asks at once; without the hold, the status
// messages of its first request would often be published before it could hear them, and it would wait for ever.
//
// Nothing on the wire says which subscription belongs to which client. A new client takes the oldest fresh subscription
// that no other has taken, but not while any connection is on its way to a subscription: that may be its own, and the
// fresh one somebody's who only listens. A client that was held in vain takes the next subscription that comes. Only its
// own requests are held.
type lobby struct {
	mu    sync.Mutex
	known map[string]bool        // clients let through; guarded by mu
	held  map[string][]arrival   // guarded by mu
	line  []string               // clients held, in their order; guarded by mu
	fresh []subscription         // that no client has taken, oldest first; guarded by mu
	vain  []time.Time            // when clients were let through without one, oldest first; guarded by mu
	under map[net.Conn]time.Time // connections without a subscription, since when; guarded by mu
}

type arrival struct {
	message *Message
	to      *Queue[*Message]
}

type subscription struct {
	of net.Conn
	at time.Time
}

func newLobby() *lobby {
	return &lobby{known: map[string]bool{}, held: map[string][]arrival{}, under: map[net.Conn]time.Time{}}
}

// put lets a message through to its queue or holds it. A client is known by its first routing frame, which front ends
// choose alike for all their channels.
func (l *lobby) put(to *Queue[*Message], m *Message) {
	client := string(m.Identities[0])
	l.mu.Lock()
	defer l.mu.Unlock()
	if l.known[client] {
		to.Put(m)
		return
	}
	if held, ok := l.held[client]; ok {
		l.held[client] = append(held, arrival{m, to})
		return
	}
	l.held[client] = []arrival{{m, to}}
	l.line = append(l.line, client)
	l.advance()
	if l.known[client] {
		return
	}
	time.AfterFunc(longestHold, func() {
		l.mu.Lock()
		defer l.mu.Unlock()
		if l.release(client) {
			l.vain = append(l.vain, time.Now())
		}
	})
}

// entered counts a connection to the broadcast whose handshake begins.
func (l *lobby) entered(c net.Conn) {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.under[c] = time.Now()
}

// subscribed gives the first subscription of a connection to the client that has waited longest.
func (l *lobby) subscribed(c net.Conn) {
	l.mu.Lock()
	defer l.mu.Unlock()
	delete(l.under, c)
	for len(l.vain) > 0 {
		late := time.Since(l.vain[0])
		l.vain = l.vain[1:]
		if late <= freshFor {
			l.advance()
			return
		}
	}
	if len(l.fresh) == maxKnown {
		l.fresh = l.fresh[1:]
	}
	l.fresh = append(l.fresh, subscription{c, time.Now()})
	l.advance()
}

// left forgets a connection that is closed.
func (l *lobby) left(c net.Conn) {
	l.mu.Lock()
	defer l.mu.Unlock()
	delete(l.under, c)
	l.fresh = slices.DeleteFunc(l.fresh, func(s subscription) bool { return s.of == c })
	l.advance()
}

// advance lets clients through, with mu held, as long as there are fresh subscriptions and none under way. A connection
// that has been on its way for long is nobody's who asks at once.
func (l *lobby) advance() {
	for _, since := range l.under {
		if time.Since(since) < longestHold {
			return
		}
	}
	for len(l.fresh) > 0 && time.Since(l.fresh[0].at) > freshFor {
		l.fresh = l.fresh[1:]
	}
	for len(l.fresh) > 0 && len(l.line) > 0 {
		l.fresh = l.fresh[1:]
		l.release(l.line[0])
	}
}

// release lets a client through, with mu held, and reports whether it was held.
func (l *lobby) release(client string) bool {
	held, ok := l.held[client]
	if !ok {
		return false
	}
	for _, a := range held {
		a.to.Put(a.message)
	}
	delete(l.held, client)
	l.line = slices.DeleteFunc(l.line, func(s string) bool { return s == client })
	if len(l.known) == maxKnown {
		clear(l.known) // the others are held once more, if they come back
	}
	l.known[client] = true
	return true
}
