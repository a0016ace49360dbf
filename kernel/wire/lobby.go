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
// that no other has taken. Only its own requests are held.
type lobby struct {
	out *Queue[*Message]

	mu    sync.Mutex
	known map[string]bool       // clients let through; guarded by mu
	held  map[string][]*Message // guarded by mu
	line  []string              // clients held, in their order; guarded by mu
	fresh []time.Time           // subscriptions that no client has taken, oldest first; guarded by mu
}

func newLobby(out *Queue[*Message]) *lobby {
	return &lobby{out: out, known: map[string]bool{}, held: map[string][]*Message{}}
}

// put lets a message through or holds it.
func (l *lobby) put(m *Message) {
	client := string(m.Identities[0])
	l.mu.Lock()
	defer l.mu.Unlock()
	if l.known[client] {
		l.out.Put(m)
		return
	}
	if held, ok := l.held[client]; ok {
		l.held[client] = append(held, m)
		return
	}
	l.held[client] = []*Message{m}
	l.line = append(l.line, client)
	for len(l.fresh) > 0 && time.Since(l.fresh[0]) > freshFor {
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
		l.release(client)
	})
}

// subscribed gives a new subscription to the client that has waited longest.
func (l *lobby) subscribed() {
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.line) > 0 {
		l.release(l.line[0])
		return
	}
	if len(l.fresh) == maxKnown {
		l.fresh = l.fresh[1:]
	}
	l.fresh = append(l.fresh, time.Now())
}

// release lets a client through, with mu held; twice does no harm.
func (l *lobby) release(client string) {
	held, ok := l.held[client]
	if !ok {
		return
	}
	l.out.Put(held...)
	delete(l.held, client)
	l.line = slices.DeleteFunc(l.line, func(s string) bool { return s == client })
	if len(l.known) == maxKnown {
		clear(l.known) // the others are held once more, if they come back
	}
	l.known[client] = true
}
