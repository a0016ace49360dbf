package wire

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net"
	"runtime"
	"strings"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
)

func rawJSON(s string) json.RawMessage { return json.RawMessage(s) }

// kindFor is a socket type that may talk to a channel.
func kindFor(ch Channel) zmq4.SocketType {
	if ch == IOPub {
		return zmq4.Sub
	}
	return zmq4.Dealer
}

// Every one of these ended or stopped plain zmq4 v0.17.0, or could. After each a client that is there goes on and a new
// one is served.
func TestHostileHandshakes(t *testing.T) {
	property := func(name string, size uint32, value string) []byte {
		b := append([]byte{byte(len(name))}, name...)
		return append(append(b, byte(size>>24), byte(size>>16), byte(size>>8), byte(size)), value...)
	}
	command := func(body ...[]byte) []byte {
		all := "\x05READY"
		for _, b := range body {
			all += string(b)
		}
		return wireFrame(flagCommand, all)
	}
	old := append([]byte(nil), greeting...)
	old[10] = 2
	plain := append([]byte(nil), greeting...)
	copy(plain[12:], "PLAIN")
	for name, sent := range map[string][]byte{
		"HTTP":                     []byte("GET / HTTP/1.1\r\nHost: localhost\r\nUser-Agent: something longer than a greeting\r\n\r\n"),
		"zeros":                    make([]byte, 4096),
		"version 2":                old,
		"another mechanism":        plain,
		"READY of 2^62 bytes":      append(append([]byte(nil), greeting...), longHeader(flagCommand, 1<<62)...),
		"READY above the limit":    append(append([]byte(nil), greeting...), longHeader(flagCommand, maxReady+1)...),
		"a message, no READY":      append(append([]byte(nil), greeting...), wireFrame(0, "hello")...),
		"another command":          append(append([]byte(nil), greeting...), wireFrame(flagCommand, "\x05HELLO")...),
		"name overruns":            append(append([]byte(nil), greeting...), command([]byte{200, 'S'})...),
		"name without size":        append(append([]byte(nil), greeting...), command([]byte{1, 'S', 0, 0})...),
		"no name":                  append(append([]byte(nil), greeting...), command(property("", 0, ""))...),
		"value overruns":           append(append([]byte(nil), greeting...), command(property(nameType, 1<<31, "DEALER"))...),
		"no socket type":           append(append([]byte(nil), greeting...), command()...),
		"unknown socket type":      append(append([]byte(nil), greeting...), command(property(nameType, 3, "FOO"))...),
		"socket type that may not": append(append([]byte(nil), greeting...), ready(zmq4.Push, "")...),
		"long identity":            append(append([]byte(nil), greeting...), command(property(nameType, 6, "DEALER"), property(nameIdentity, 300, strings.Repeat("i", 300)))...),
	} {
		t.Run(name, func(t *testing.T) {
			s, l := listen(t, tcp())
			mirror(s)
			there := dialServer(t, s)
			ask(t, there, `{}`)
			for _, ch := range channels {
				p := connect(t, s, ch)
				p.send(sent)
				p.gone()
			}
			ask(t, there, `{}`)
			ask(t, dialServer(t, s), `{}`)
			if n := strings.Count(l.String(), "connection dropped"); n != len(channels) {
				t.Errorf("%d log lines, want one for each of %d connections:\n%s", n, len(channels), l)
			}
		})
	}
}

// Names of properties are compared without regard to case (RFC 23): zmq4 would not find this one's socket type, and panic.
func TestHandshakeInOtherCase(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	p := connect(t, s, Shell)
	body := append([]byte("\x05READY\x0bSOCKET-TYPE\x00\x00\x00\x06DEALER"), "\x07X-Thing\x00\x00\x00\x02ok"...)
	p.send(greeting, wireFrame(flagCommand, string(body)), signed(t, s, `{"a":1}`))
	p.welcome()
	if frames := p.message(); string(frames[len(frames)-1]) != `{"a":1}` {
		t.Errorf("reply %q", frames)
	}
}

// Peers that do not finish their handshake, any number of them, do not keep others waiting.
func TestSilentPeers(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	for _, ch := range channels {
		for i := range 20 {
			p := connect(t, s, ch)
			p.send(greeting[:i*3])
		}
	}
	start := time.Now()
	ask(t, dialServer(t, s), `{}`)
	if d := time.Since(start); d > handshakeFor/2 {
		t.Errorf("served after %v: it waited for those who say nothing", d)
	}
}

// A handshake that is not over at its deadline is given up, and the connection with it.
func TestHandshakeDeadline(t *testing.T) {
	for sent, part := range map[string][]byte{
		"nothing":         nil,
		"half a greeting": greeting[:30],
		"a greeting":      greeting,
		"half a READY":    append(append([]byte(nil), greeting...), ready(zmq4.Dealer, "x")[:9]...),
	} {
		t.Run(sent, func(t *testing.T) {
			ours, theirs := net.Pipe()
			defer theirs.Close()
			go io.Copy(io.Discard, theirs)
			go theirs.Write(part)
			_, err := shake(ours, zmq4.Router, time.Now().Add(50*time.Millisecond))
			if e := net.Error(nil); !errors.As(err, &e) || !e.Timeout() {
				t.Errorf("error %v, want a timeout", err)
			}
		})
	}
}

func TestHostileFrames(t *testing.T) {
	flood := strings.Repeat(string(wireFrame(flagMore, "")), requestLimits.frames+1)
	for name, sent := range map[string]string{
		"2^62 bytes":                string(longHeader(0, 1<<62)),
		"2^63-1 bytes":              string(longHeader(flagMore, 1<<63-1)),
		"2^64-1 bytes":              string(longHeader(0, 1<<64-1)),
		"2^40 bytes":                string(longHeader(0, 1<<40)),
		"sizes that add up to zero": string(wireFrame(flagMore, "a")) + string(longHeader(0, 1<<64-1)),
		"reserved flags":            "\xf8\x00",
		"frames without end":        flood,
		"command of 2^62 bytes":     string(longHeader(flagCommand, 1<<62)),
		"empty command":             string(wireFrame(flagCommand, "")),
		"command's name overruns":   string(wireFrame(flagCommand, "\x40PING")),
		"PING cut off":              string(wireFrame(flagCommand, "\x04PING\x00")),
		"above the channel's limit": string(longHeader(0, requestLimits.message+1)),
	} {
		t.Run(name, func(t *testing.T) {
			s, l := listen(t, tcp())
			mirror(s)
			there := dialServer(t, s)
			for _, ch := range channels {
				p := greeted(t, s, ch, kindFor(ch), "")
				p.send([]byte(sent))
				p.gone()
			}
			ask(t, there, `{}`)
			ask(t, dialServer(t, s), `{}`)
			if n := strings.Count(l.String(), "connection dropped"); n != len(channels) {
				t.Errorf("%d log lines, want one for each of %d connections:\n%s", n, len(channels), l)
			}
		})
	}
}

// What a peer announces and does not send costs nothing.
func TestAnnouncedBytesAreNotAllocated(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	for range 40 {
		p := greeted(t, s, Shell, zmq4.Dealer, "")
		p.send(longHeader(0, 200<<20), make([]byte, 1000))
	}
	ask(t, dialServer(t, s), `{}`)
	runtime.ReadMemStats(&after)
	if grown := after.TotalAlloc - before.TotalAlloc; grown > 100<<20 {
		t.Errorf("%d MB allocated for 40 peers that sent 1,000 bytes each", grown>>20)
	}
}

// Peers that vanish in the middle of anything leave no trace.
func TestVanishingPeers(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	there := dialServer(t, s)
	for i := range 60 {
		ch := channels[i%len(channels)]
		p := greeted(t, s, ch, kindFor(ch), fmt.Sprint("v", i))
		p.send([]byte("\x00\x01\x01")[:min(i%4, 3)], longHeader(0, 1<<20), make([]byte, i))
		if i%2 == 0 {
			p.Conn.(*net.TCPConn).SetLinger(0) // a reset, not an end
		}
		p.Close()
	}
	ask(t, there, `{}`)
	for _, d := range s.doors {
		for end := time.Now().Add(5 * time.Second); len(d.present()) > 1 && time.Now().Before(end); {
			time.Sleep(time.Millisecond)
		}
		if n := len(d.present()); n > 1 {
			t.Errorf("%d connections are still held", n)
		}
	}
}

// A subscriber that does not read keeps nothing from one that does, and is dropped when its backlog is full.
func TestStuckSubscriber(t *testing.T) {
	s, l := listen(t, tcp())
	stuck := greeted(t, s, IOPub, zmq4.Sub, "")
	stuck.send(wireFrame(0, "\x01"))
	k := dialServer(t, s)
	warm(t, s, k, 2)
	const size, messages = 1 << 20, 150
	text := rawJSON(`{"text":"` + strings.Repeat("x", size) + `"}`)
	done := make(chan int)
	go func() {
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		defer cancel()
		n := 0
		for n < messages {
			m, ok := k.Receive(ctx, IOPub)
			if !ok {
				break
			}
			if m.Type == "stream" {
				n++
			}
		}
		done <- n
	}()
	for range messages {
		s.Publish(nil, "stream", text)
	}
	if n := <-done; n != messages {
		t.Errorf("the subscriber that reads got %d of %d messages", n, messages)
	}
	for end := time.Now().Add(5 * time.Second); len(s.doors[IOPub].present()) > 1 && time.Now().Before(end); {
		time.Sleep(time.Millisecond)
	}
	if n := len(s.doors[IOPub].present()); n != 1 {
		t.Errorf("%d subscribers are held, want only the one that reads", n)
	}
	for end := time.Now().Add(5 * time.Second); !strings.Contains(l.String(), errFull.Error()); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("the log does not say why: %s", l)
		}
	}
}

// warm waits until the server's broadcast reaches so many subscribers.
func warm(t testing.TB, s *Server, k *Client, subscribers int) {
	t.Helper()
	heard := make(chan bool)
	go func() {
		ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
		defer cancel()
		_, ok := k.Receive(ctx, IOPub)
		heard <- ok
	}()
	for {
		s.Publish(nil, "warm", nil)
		select {
		case ok := <-heard:
			if !ok {
				t.Fatal("the broadcast reaches nobody")
			}
			for len(s.doors[IOPub].present()) < subscribers {
				time.Sleep(time.Millisecond)
			}
			return
		case <-time.After(time.Millisecond):
		}
	}
}

// A subscriber that reads slower than the kernel writes, but reads, gets everything: the broadcast waits for it.
func TestSlowSubscriber(t *testing.T) {
	s, _ := listen(t, tcp())
	slow := greeted(t, s, IOPub, zmq4.Sub, "")
	slow.send(wireFrame(0, "\x01"))
	k := dialServer(t, s)
	warm(t, s, k, 2)
	const size, messages = 1 << 20, 160 // twice what may wait
	text := rawJSON(`{"text":"` + strings.Repeat("x", size) + `"}`)
	go func() {
		for range messages {
			s.Publish(nil, "stream", text)
		}
	}()
	for n := 0; n < messages; {
		frames := slow.message()
		if strings.HasSuffix(string(frames[0]), ".stream") {
			n++
		}
		if n%16 == 1 {
			time.Sleep(20 * time.Millisecond)
		}
	}
}

// A client that asks and never reads its replies is dropped when they fill its backlog; others are answered meanwhile.
func TestClientThatNeverReads(t *testing.T) {
	s, _ := listen(t, tcp())
	big := rawJSON(`{"text":"` + strings.Repeat("x", 1<<20) + `"}`)
	go func() {
		for {
			m, ok := s.Receive(context.Background(), Shell)
			if !ok {
				return
			}
			var content any = m.Content
			if string(m.Content) == `{"big":true}` {
				content = big
			}
			s.Publish(m, "status", map[string]string{"execution_state": "busy"})
			s.Reply(Shell, m, "test_reply", nil, content)
			s.Publish(m, "status", map[string]string{"execution_state": "idle"})
		}
	}()
	greedy := greeted(t, s, Shell, zmq4.Dealer, "greedy")
	k := dialServer(t, s)
	for i := range 100 {
		greedy.send(signed(t, s, `{"big":true}`))
		if i%10 == 0 {
			ask(t, k, fmt.Sprintf(`{"n":%d}`, i))
		}
	}
	// It must not begin to read before its backlog is full.
	for end := time.Now().Add(10 * time.Second); len(s.doors[Shell].present()) > 1; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the client that never reads is still held")
		}
	}
	ask(t, k, `{}`)
}

// A heartbeat that nobody reads is dropped; the others beat on.
func TestHeartbeat(t *testing.T) {
	s, _ := listen(t, tcp())
	beat := func(p *rawPeer, payload string) {
		t.Helper()
		p.send(wireMessage([][]byte{nil, []byte(payload)}))
		if m := p.message(); len(m) != 2 || string(m[1]) != payload {
			t.Fatalf("echo %q of %q", m, payload)
		}
	}
	p, q := greeted(t, s, Heartbeat, zmq4.Req, ""), greeted(t, s, Heartbeat, zmq4.Dealer, "q")
	stuck := greeted(t, s, Heartbeat, zmq4.Dealer, "stuck")
	go func() {
		for {
			if _, err := stuck.Write(wireFrame(0, strings.Repeat("x", 1000))); err != nil {
				return
			}
		}
	}()
	for _, payload := range []string{"ping", "", strings.Repeat("\x00\xff", 500), strings.Repeat("z", 60<<10)} {
		for range 50 {
			beat(p, payload)
			beat(q, payload)
		}
	}
	for end := time.Now().Add(10 * time.Second); len(s.doors[Heartbeat].present()) > 2; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the client that never reads is still held")
		}
	}
	beat(p, "after")
}

// PING (RFC 37) is answered with its context and reaches nobody; SUBSCRIBE and CANCEL of ZMTP 3.1 subscribe.
func TestCommands(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	for _, ch := range channels {
		p := greeted(t, s, ch, kindFor(ch), "")
		for range 30 { // more than zmq4's queue of ten, which nobody reads on a PUB socket
			p.send(wireFrame(flagCommand, "\x04PING\x00\x0acontext"))
			if flags, body := p.frame(); flags != flagCommand || string(body) != "\x04PONGcontext" {
				t.Fatalf("%s: PING answered with %d %q", ch, flags, body)
			}
		}
		p.send(wireFrame(flagCommand, "\x04WHAT"))
		if ch == Shell {
			p.send(signed(t, s, `{"after":"ping"}`))
			if m := p.message(); string(m[len(m)-1]) != `{"after":"ping"}` {
				t.Errorf("reply %q", m)
			}
		}
	}
	p := greeted(t, s, IOPub, zmq4.Sub, "")
	p.send(wireFrame(0, "no subscription"), wireFrame(0, ""), wireFrame(flagCommand, "\x09SUBSCRIBEkernel."))
	p.message() // the welcome
	k := dialServer(t, s)
	for range 3 {
		ask(t, k, `{}`)
	}
	if m := p.message(); !strings.HasPrefix(string(m[0]), "kernel.") {
		t.Errorf("topic %q", m[0])
	}
	p.send(wireFrame(flagCommand, "\x06CANCELkernel."), wireFrame(flagCommand, "\x04PING\x00\x00"))
	for flags := byte(0); flags != flagCommand; flags, _ = p.frame() { // what was under way, then the answer
	}
	ask(t, k, `{}`)
	p.SetReadDeadline(time.Now().Add(50 * time.Millisecond))
	if b, err := p.r.ReadByte(); err == nil {
		t.Errorf("a message after CANCEL (first byte %#x)", b)
	}
}

// The set of topics that a subscriber may name is bounded.
func TestTooManySubscriptions(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	p := greeted(t, s, IOPub, zmq4.Sub, "")
	for i := range maxTopics + 1 {
		p.send(wireFrame(0, fmt.Sprintf("\x01topic %d", i)))
	}
	p.gone()
	ask(t, dialServer(t, s), `{}`)
}

// Clients that take the same identity do not take each other's place.
func TestTwoClientsOfOneIdentity(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	first := greeted(t, s, Shell, zmq4.Dealer, "same")
	first.send(signed(t, s, `{"n":1}`))
	first.message()
	second := greeted(t, s, Shell, zmq4.Dealer, "same")
	second.send(signed(t, s, `{"n":2}`))
	for _, p := range []*rawPeer{first, second} {
		if m := p.message(); string(m[len(m)-1]) != `{"n":2}` {
			t.Errorf("reply %q", m)
		}
	}
}

// An identity may be anything, also what parts the routing frames from the message.
func TestIdentityLikeTheDelimiter(t *testing.T) {
	s, _ := listen(t, Connection{Transport: "tcp", IP: "127.0.0.1"}) // unsigned: nothing else stands in the way
	mirror(s)
	p := greeted(t, s, Shell, zmq4.Dealer, string(delimiter))
	p.send(wireMessage([][]byte{nil, []byte(`{"msg_id":"a","msg_type":"b"}`), empty, empty, empty})) // no delimiter
	p.send(signed(t, s, `{"n":1}`))
	if m := p.message(); string(m[len(m)-1]) != `{"n":1}` {
		t.Errorf("reply %q", m)
	}
}

// A thousand clients that come, ask, and go, half of them without a word, leave neither descriptors nor goroutines.
func TestThousandClients(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	ask(t, dialServer(t, s), `{}`)
	most := runtime.NumGoroutine() + 10 // a few of the first client's may not run yet; a leak would leave hundreds
	for i := range 1000 {
		sub := greeted(t, s, IOPub, zmq4.Sub, "")
		p := greeted(t, s, Shell, zmq4.Dealer, fmt.Sprint("client ", i))
		if i%2 == 0 {
			sub.send(wireFrame(0, "\x01"))
			p.send(signed(t, s, `{}`))
			if m := p.message(); string(m[len(m)-1]) != `{}` {
				t.Fatalf("client %d: reply %q", i, m)
			}
		}
		sub.Close()
		p.Close()
	}
	left := func() (connections int) {
		for _, d := range s.doors {
			connections += len(d.present())
		}
		return connections
	}
	for end := time.Now().Add(10 * time.Second); left() > 4 || runtime.NumGoroutine() > most; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("%d connections and %d goroutines, want the 4 of one client and at most %d", left(), runtime.NumGoroutine(), most)
		}
	}
	ask(t, dialServer(t, s), `{}`)
}
