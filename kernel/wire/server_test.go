package wire

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"net"
	"strings"
	"sync"
	"testing"
	"time"
)

const testKey = "0f1e2d3c4b5a"

// logged collects what a server logs.
type logged struct {
	mu   sync.Mutex
	text strings.Builder
}

func (l *logged) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.text.Write(p)
}

func (l *logged) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.text.String()
}

// listen starts a server on free ports of the loopback interface.
func listen(t testing.TB, c Connection) (*Server, *logged) {
	t.Helper()
	var l logged
	s, err := Listen(c, slog.New(slog.NewTextHandler(&l, nil)))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(s.Close)
	return s, &l
}

func tcp() Connection { return Connection{Transport: "tcp", IP: "127.0.0.1", Key: testKey} }

func dialServer(t testing.TB, s *Server) *Client {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	k, err := Dial(ctx, s.Connection())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(k.Close)
	return k
}

// mirror answers every shell and control request as a kernel does, with a reply of its content between busy and idle.
func mirror(s *Server) {
	for _, ch := range []Channel{Shell, Control} {
		go func() {
			for {
				m, ok := s.Receive(context.Background(), ch)
				if !ok {
					return
				}
				s.Publish(m, "status", map[string]string{"execution_state": "busy"})
				s.Reply(ch, m, strings.Replace(m.Type, "request", "reply", 1), nil, m.Content)
				s.Publish(m, "status", map[string]string{"execution_state": "idle"})
			}
		}()
	}
}

// await returns the next message of a channel that answers a request.
func await(t testing.TB, k *Client, ch Channel, id string) *Message {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
	defer cancel()
	for {
		m, ok := k.Receive(ctx, ch)
		if !ok {
			t.Fatalf("nothing on %s that answers %s", ch, id)
		}
		if m.ParentID == id {
			return m
		}
	}
}

// ask sends a request on shell and waits for busy, reply and idle.
func ask(t testing.TB, k *Client, content string) {
	t.Helper()
	id, err := k.Send(Shell, "test_request", nil, json.RawMessage(content))
	if err != nil {
		t.Fatal(err)
	}
	if m := await(t, k, Shell, id); m.Type != "test_reply" || string(m.Content) != content {
		t.Fatalf("reply %s %s, want test_reply %s", m.Type, m.Content, content)
	}
	for _, want := range []string{"busy", "idle"} {
		if m := await(t, k, IOPub, id); !strings.Contains(string(m.Content), want) {
			t.Fatalf("status %s, want %s", m.Content, want)
		}
	}
}

func TestRequestAndReply(t *testing.T) {
	for name, c := range map[string]Connection{
		"tcp":      tcp(),
		"unsigned": {Transport: "tcp", IP: "127.0.0.1"},
		"IPv6":     {Transport: "tcp", IP: "::1", Key: testKey},
		"ipc":      {Transport: "ipc", IP: t.TempDir() + "/k", ShellPort: 1, IOPubPort: 2, StdinPort: 3, ControlPort: 4, HeartbeatPort: 5, Key: testKey},
	} {
		t.Run(name, func(t *testing.T) {
			if name == "IPv6" {
				l, err := net.Listen("tcp", "[::1]:0")
				if err != nil {
					t.Skip("no IPv6 here:", err)
				}
				l.Close()
			}
			s, _ := listen(t, c)
			mirror(s)
			k := dialServer(t, s)
			for i := range 3 {
				ask(t, k, fmt.Sprintf(`{"n":%d}`, i))
			}
		})
	}
}
