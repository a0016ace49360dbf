package wire

import (
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
// that no other has taken, and one that was held in vain takes the next that comes. Only its own requests are held.
type lobby struct {
	mu    sync.Mutex
	known map[string]bool      // clients let through; guarded by mu
	held  map[string][]arrival // guarded by mu
	line  []string             // clients held, in their order; guarded by mu
	fresh []subscription       // that no client has taken, oldest first; guarded by mu
	vain  []time.Time          // when clients were let through without one, oldest first; guarded by mu
}

type arrival struct {
	message *Message
	to      *Queue[*Message]
}

type subscription struct {
	of *peer
	at time.Time
}

func newLobby() *lobby {
	return &lobby{known: map[string]bool{}, held: map[string][]arrival{}}
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
	for len(l.fresh) > 0 && time.Since(l.fresh[0].at) > freshFor {
		l.fresh = l.fresh[1:]
	}
	if len(l.fresh) > 0 {
		l.fresh = l.fresh[1:]
		l.release(client)
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

// subscribed gives the first subscription of a connection to the client that has waited longest.
func (l *lobby) subscribed(p *peer) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.line) > 0 {
		l.release(l.line[0])
		return
	}
	for len(l.vain) > 0 {
		late := time.Since(l.vain[0])
		l.vain = l.vain[1:]
		if late <= freshFor {
			return
		}
	}
	if len(l.fresh) == maxKnown {
		l.fresh = l.fresh[1:]
	}
	l.fresh = append(l.fresh, subscription{p, time.Now()})
}

// left forgets a connection that is closed.
func (l *lobby) left(p *peer) {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.fresh = slices.DeleteFunc(l.fresh, func(s subscription) bool { return s.of == p })
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
