package wire

import (
	"bytes"
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/hex"
	"io"
	"net"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
	"pgregory.net/rapid"
)

// leaveSocket leaves a socket file behind, as a process that was killed does.
func leaveSocket(t *testing.T, path string) {
	t.Helper()
	l, err := net.Listen("unix", path)
	if err != nil {
		t.Fatal(err)
	}
	l.(*net.UnixListener).SetUnlinkOnClose(false)
	l.Close()
}

// A meter finds the same messages however the bytes are cut.
func TestMeter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var sent []byte
		var want []int
		for _, frames := range rapid.SliceOf(rapid.SliceOfN(rapid.IntRange(0, 700), 1, 4)).Draw(t, "messages") {
			size := 0
			var m [][]byte
			for _, n := range frames {
				m = append(m, make([]byte, n))
				size += n
			}
			sent = append(sent, wireMessage(m)...)
			want = append(want, size)
		}
		var m meter
		var got []int
		for len(sent) > 0 {
			n := rapid.IntRange(1, len(sent)).Draw(t, "cut")
			m.write(sent[:n], func(size int) { got = append(got, size) })
			sent = sent[n:]
		}
		if m.inner || len(got) != len(want) {
			t.Fatalf("%d messages found, want %d; inside one: %t", len(got), len(want), m.inner)
		}
		for i := range got {
			if got[i] != want[i] {
				t.Fatalf("message %d has %d bytes, want %d", i, got[i], want[i])
			}
		}
	})
}

// sink counts the writes that reach the network.
type sink struct {
	net.Conn
	mu     sync.Mutex
	hold   sync.Mutex
	writes int
	got    bytes.Buffer
}

func (s *sink) Write(p []byte) (int, error) {
	s.hold.Lock()
	defer s.hold.Unlock()
	s.mu.Lock()
	defer s.mu.Unlock()
	s.writes++
	return s.got.Write(p)
}
func (s *sink) Close() error         { return nil }
func (s *sink) LocalAddr() net.Addr  { return &net.UnixAddr{} }
func (s *sink) RemoteAddr() net.Addr { return &net.UnixAddr{} }

// What is written in small pieces while the network is busy leaves in one write, in order; large pieces too.
func TestOutboxCoalesces(t *testing.T) {
	s := &sink{}
	s.hold.Lock()
	o := newOutbox(s, requestLimits)
	var want []byte
	for i := range 400 {
		for _, p := range [][]byte{{0, 200}, bytes.Repeat([]byte{byte(i)}, 200)} {
			want = append(want, p...)
			if _, err := o.Write(p); err != nil {
				t.Fatal(err)
			}
		}
	}
	large := wireFrame(0, strings.Repeat("y", 3<<20))
	want = append(want, large...)
	o.Write(large)
	s.hold.Unlock()
	for !o.drained() {
		time.Sleep(time.Millisecond)
	}
	o.close()
	s.mu.Lock()
	defer s.mu.Unlock()
	if !bytes.Equal(s.got.Bytes(), want) {
		t.Error("what arrives is not what was written")
	}
	if s.writes > 8 {
		t.Errorf("%d writes for 801 pieces", s.writes)
	}
}

// A command does not get into the middle of a message.
func TestOutboxKeepsMessagesWhole(t *testing.T) {
	s := &sink{}
	o := newOutbox(s, requestLimits)
	pong := wireFrame(flagCommand, "\x04PONG")
	first, second := wireFrame(flagMore, "first"), wireFrame(0, "second")
	o.Write(first)
	o.command(pong)
	o.Write(second[:3])
	o.Write(second[3:])
	o.command(pong)
	for !o.drained() {
		time.Sleep(time.Millisecond)
	}
	o.close()
	if want := string(first) + string(second) + string(pong) + string(pong); s.got.String() != want {
		t.Errorf("%q, want %q", s.got.String(), want)
	}
}

func TestQueue(t *testing.T) {
	q := NewQueue[int]()
	var got []int
	var done sync.WaitGroup
	var mu sync.Mutex
	for range 3 {
		done.Go(func() {
			for {
				v, ok := q.Get(context.Background())
				if !ok {
					return
				}
				mu.Lock()
				got = append(got, v)
				mu.Unlock()
			}
		})
	}
	for i := range 1000 {
		q.Put(i)
	}
	q.End()
	q.Put(1000)
	done.Wait()
	if len(got) != 1000 {
		t.Errorf("%d items, want the 1000 put before the end", len(got))
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, ok := NewQueue[int]().Get(ctx); ok {
		t.Error("an item from nowhere")
	}
}

// No bytes of a peer make the handshake panic, and what it lets through names a socket type that may talk to ours.
func FuzzHandshake(f *testing.F) {
	f.Add(append(append([]byte(nil), greeting...), ready(zmq4.Dealer, "id")...))
	f.Add(append(append([]byte(nil), greeting...), longHeader(flagCommand, 1<<62)...))
	f.Add(greeting[:20])
	f.Fuzz(func(t *testing.T, sent []byte) {
		replay, err := shake(&script{in: bytes.NewReader(sent)}, zmq4.Router, time.Time{})
		if err != nil {
			return
		}
		kind, _, err := parseReady(replay[greetingLen+2:])
		if err != nil || kind != "DEALER" && kind != "REQ" && kind != "ROUTER" {
			t.Errorf("let through: %q, %v", kind, err)
		}
	})
}

// script is a connection whose peer has sent everything already.
type script struct {
	sink
	in io.Reader
}

func (s *script) Read(p []byte) (int, error)      { return s.in.Read(p) }
func (s *script) SetDeadline(time.Time) error     { return nil }
func (s *script) SetReadDeadline(time.Time) error { return nil }

// No bytes of a peer make the reader panic, and zmq4 gets whole messages within the limits only.
func FuzzPeer(f *testing.F) {
	f.Add([]byte("\x01\x03abc\x00\x00"))
	f.Add([]byte("\x04\x07\x04PING\x00\x00"))
	f.Add(longHeader(1, 1<<63))
	f.Fuzz(func(t *testing.T, sent []byte) {
		for _, d := range []*door{{kind: zmq4.Router, limits: heartbeatLimits}, {kind: zmq4.Pub, limits: broadcastLimits}} {
			d.subscribed, d.left = func(net.Conn, string, bool) {}, func(net.Conn) {}
			d.refused, d.peers = func(net.Addr, error) {}, map[*peer]struct{}{}
			p := newPeer(d, &script{in: bytes.NewReader(sent)}, nil)
			got, _ := io.ReadAll(p)
			var m meter
			m.write(got, func(size int) {
				if uint64(size) > d.limits.message {
					t.Errorf("a message of %d bytes", size)
				}
			})
			if m.inner {
				t.Errorf("half a message: %q", got)
			}
		}
	})
}

// No frames make the decoder panic.
func FuzzDecode(f *testing.F) {
	c := newCodec(Connection{}, "fuzz")
	frames, _, err := c.encode("x", nil, nil, nil)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(bytes.Join(frames, []byte("|")), byte('|'))
	f.Fuzz(func(t *testing.T, all []byte, cut byte) {
		for routed := range 2 {
			m, err := c.decode(routed, bytes.Split(all, []byte{cut}))
			if err == nil && (m.ID == "" || m.Type == "" || len(m.Identities) < routed) {
				t.Errorf("accepted %q", all)
			}
		}
	})
}

// What is accepted has the signature that RFC 2104 gives its four frames, and is accepted once.
func FuzzVerify(f *testing.F) {
	good := func(frames ...string) []byte {
		mac := hmac.New(sha256.New, []byte(testKey))
		for _, s := range frames {
			mac.Write([]byte(s))
		}
		return hex.AppendEncode(nil, mac.Sum(nil))
	}
	f.Add(good("{}", "{}", "{}", "{}"), "{}", "{}", "{}", "{}")
	f.Add(bytes.ToUpper(good(`{"msg_id":"1"}`, "", "{}", "[]")), `{"msg_id":"1"}`, "", "{}", "[]")
	f.Add([]byte(strings.Repeat("0", 64)), "", "", "", "")
	f.Add([]byte{}, "a", "b", "c", "d")
	f.Fuzz(func(t *testing.T, signature []byte, header, parent, metadata, content string) {
		s := signer{key: []byte(testKey)}
		frames := [][]byte{[]byte(header), []byte(parent), []byte(metadata), []byte(content)}
		err := s.verify(signature, frames)
		if right := bytes.EqualFold(signature, good(header, parent, metadata, content)); right != (err == nil) {
			t.Errorf("signature %q: right %t, error %v", signature, right, err)
		}
		if err == nil && s.verify(signature, frames) != errReplay {
			t.Error("accepted twice")
		}
	})
}

// No connection file makes the reader panic, and one that is accepted can be listened on.
func FuzzReadConnection(f *testing.F) {
	const good = `{"shell_port":1001,"iopub_port":1002,"stdin_port":1003,"control_port":1004,"hb_port":1005,"ip":"127.0.0.1","key":"k","transport":"tcp","signature_scheme":"hmac-sha256"}`
	f.Add([]byte(good))
	f.Add([]byte(strings.Replace(good, "1004", "1004e0", 1)))
	f.Add([]byte(strings.Replace(good, `"tcp"`, `"ipc"`, 1)))
	f.Add([]byte(`{"ip":null,"shell_port":null}`))
	path := filepath.Join(f.TempDir(), "kernel.json")
	f.Fuzz(func(t *testing.T, text []byte) {
		if err := os.WriteFile(path, text, 0o600); err != nil {
			t.Fatal(err)
		}
		c, err := ReadConnection(path)
		if err != nil {
			return
		}
		addresses := map[string]bool{}
		for _, ch := range channels {
			network, address := c.address(ch)
			addresses[network+" "+address] = true
		}
		if len(addresses) != len(channels) || c.IP == "" || c.Transport != "tcp" && c.Transport != "ipc" {
			t.Errorf("accepted: %+v", c)
		}
	})
}
