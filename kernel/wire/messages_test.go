package wire

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/go-zeromq/zmq4"
)

// What is unsigned, wrongly signed, replayed or malformed is dropped with a log line and not answered.
func TestDroppedMessages(t *testing.T) {
	s, l := listen(t, tcp())
	mirror(s)
	fresh := func(key string) [][]byte {
		c := s.Connection()
		c.Key = key
		frames, _, err := newCodec(c, "test").encode("test_request", nil, nil, rawJSON(`{"mark":1}`))
		if err != nil {
			t.Fatal(err)
		}
		return frames
	}
	resign := func(f [][]byte) [][]byte {
		f[3] = fmt.Appendf(nil, `{"msg_id":%q}`, newID()) // no other message has this signature
		f[1] = (&signer{key: []byte(testKey)}).sign(f[2:6])
		return f
	}
	change := func(i int, to string) [][]byte {
		f := fresh(testKey)
		f[i] = []byte(to)
		return f
	}
	replayed := fresh(testKey)
	head := string(fresh(testKey)[2])
	for _, c := range []struct {
		name   string
		frames func() [][]byte // made anew for every channel
		why    string
	}{
		{"sent twice", func() [][]byte { return replayed }, "replayed"},
		{"unsigned", func() [][]byte { return change(1, "") }, "unsigned"},
		{"zeros", func() [][]byte { return change(1, strings.Repeat("0", 64)) }, "wrong signature"},
		{"cut signature", func() [][]byte { return change(1, string(replayed[1][:63])) }, "wrong signature"},
		{"no hex", func() [][]byte { return change(1, strings.Repeat("z", 64)) }, "wrong signature"},
		{"another key", func() [][]byte { return fresh("another") }, "wrong signature"},
		{"content changed", func() [][]byte { return change(5, `{"mark":2}`) }, "wrong signature"},
		{"header changed", func() [][]byte { return change(2, strings.Replace(head, "test_request", "tess_request", 1)) }, "wrong signature"},
		{"parent changed", func() [][]byte { return change(3, `{"msg_id":"x"}`) }, "wrong signature"},
		{"metadata changed", func() [][]byte { return change(4, `{"x":1}`) }, "wrong signature"},
		{"no delimiter", func() [][]byte { return fresh(testKey)[1:] }, "no <IDS|MSG>"},
		{"nothing at all", func() [][]byte { return [][]byte{nil} }, "no <IDS|MSG>"},
		{"frames missing", func() [][]byte { return fresh(testKey)[:5] }, "4 frames after the delimiter"},
		{"header no JSON", func() [][]byte { return resign(change(2, "{")) }, "the header is no JSON object"},
		{"header a list", func() [][]byte { return resign(change(2, "[]")) }, "the header is no JSON object"},
		{"content a number", func() [][]byte { return resign(change(5, "1")) }, "the content is no JSON object"},
		{"content empty", func() [][]byte { return resign(change(5, "")) }, "the content is no JSON object"},
		{"content deep", func() [][]byte {
			return resign(change(5, `{"a":`+strings.Repeat("[", 20000)+strings.Repeat("]", 20000)+"}"))
		}, "the content is no JSON object"},
		{"header no UTF-8", func() [][]byte { return resign(change(2, "{\"msg_id\":\"\xff\",\"msg_type\":\"x\"}")) }, "the header is no JSON object"},
		{"metadata null", func() [][]byte { return resign(change(4, "null")) }, "the metadata is no JSON object"},
		{"no msg_id", func() [][]byte { return resign(change(2, `{"msg_type":"x"}`)) }, "without msg_id"},
		{"no msg_type", func() [][]byte { return resign(change(2, `{"msg_id":"x"}`)) }, "without msg_id"},
		{"msg_id a number", func() [][]byte { return resign(change(2, `{"msg_id":1,"msg_type":"x"}`)) }, "header"},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, ch := range []Channel{Shell, Control, Stdin} {
				p := greeted(t, s, ch, zmq4.Dealer, "")
				frames := c.frames()
				if c.name == "sent twice" && ch == Shell {
					p.send(wireMessage(frames))
					p.message()
				}
				s.log.mu.Lock()
				s.log.lines = 0 // ten a second are written otherwise
				s.log.mu.Unlock()
				before := len(l.String())
				p.send(wireMessage(frames))
				for end := time.Now().Add(5 * time.Second); !strings.Contains(l.String()[before:], c.why); time.Sleep(time.Millisecond) {
					if time.Now().After(end) {
						t.Fatalf("%s: log %q does not say %q", ch, l.String()[before:], c.why)
					}
				}
				if ch == Stdin {
					continue // nobody answers there
				}
				p.send(signed(t, s, `{"good":1}`))
				if m := p.message(); string(m[len(m)-1]) != `{"good":1}` {
					t.Errorf("%s: answered %q", ch, m)
				}
			}
		})
	}
}

// A parent header is the request's header as it came, whatever is in it and however it is written.
func TestParentIsEchoedByteForByte(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	const head = "{ \"msg_type\": \"test_request\",\t\"msg_id\": \"m\\u0031\", \"date\": \"2020-01-01T00:00:00Z\", \"extra\": [1.0, 1e2, \"\\u00e9 <&>\"] }"
	f := [][]byte{delimiter, nil, []byte(head), []byte("{}"), []byte("{}"), []byte("{}")}
	f[1] = (&signer{key: []byte(testKey)}).sign(f[2:])
	k := dialServer(t, s)
	p := greeted(t, s, Shell, zmq4.Dealer, "")
	p.send(wireMessage(f))
	if m := p.message(); string(m[3]) != head {
		t.Errorf("parent of the reply: %s", m[3])
	}
	if m := await(t, k, IOPub, "m1"); string(m.Parent) != head {
		t.Errorf("parent of the status: %s", m.Parent)
	}
}

// Routing frames between the identity and the delimiter, and buffers after the content, are kept.
func TestRoutingAndBuffers(t *testing.T) {
	s, _ := listen(t, tcp())
	p := greeted(t, s, Control, zmq4.Dealer, "client")
	frames, _, err := newCodec(s.Connection(), "test").encode("test_request", nil, nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	p.send(wireMessage(append(append([][]byte{[]byte("hop")}, frames...), []byte("b1"), nil)))
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	m, ok := s.Receive(ctx, Control)
	if !ok {
		t.Fatal("not received")
	}
	if got := fmt.Sprintf("%q %q", m.Identities, m.Buffers); got != `["client" "hop"] ["b1" ""]` {
		t.Errorf("identities and buffers: %s", got)
	}
	if _, err := s.Reply(Control, m, "test_reply", nil, nil); err != nil {
		t.Fatal(err)
	}
	if r := p.message(); string(r[0]) != "hop" || string(r[1]) != string(delimiter) {
		t.Errorf("reply %q", r)
	}
}

// Signatures are remembered over two generations, and no longer.
func TestReplayMemory(t *testing.T) {
	s := signer{key: []byte("k")}
	message := func(i int) ([]byte, [][]byte) {
		f := [][]byte{fmt.Append(nil, i)}
		return s.sign(f), f
	}
	for i := range 3*generation + 1 {
		sig, f := message(i)
		if err := s.verify(sig, f); err != nil {
			t.Fatalf("message %d: %v", i, err)
		}
	}
	for i, want := range map[int]error{0: nil, 2 * generation: errReplay, 3 * generation: errReplay} {
		sig, f := message(i)
		if err := s.verify(sig, f); err != want {
			t.Errorf("message %d again: %v, want %v", i, err, want)
		}
	}
}

// RFC 4231, test case 2: HMAC-SHA-256 with key "Jefe".
func TestSignature(t *testing.T) {
	s := signer{key: []byte("Jefe")}
	const want = "5bdcc146bf60754e6a042426089575c75a003f089d2739839dec58b964ec3843"
	if got := string(s.sign([][]byte{[]byte("what do ya want "), []byte("for nothing?")})); got != want {
		t.Errorf("signature %s, want %s", got, want)
	}
}

// A client that asks the moment it has connected hears the status messages of its first request.
func TestNewClientHearsItsFirstStatus(t *testing.T) {
	s, _ := listen(t, tcp())
	mirror(s)
	for i := range 100 {
		p := greeted(t, s, []Channel{Shell, Control}[i%2], zmq4.Dealer, fmt.Sprint("client", i))
		sub := connect(t, s, IOPub)
		p.send(signed(t, s, `{}`)) // before the subscriber has so much as greeted
		sub.send(greeting, ready(zmq4.Sub, ""), wireFrame(0, "\x01"))
		sub.welcome()
		for _, want := range []string{"iopub_welcome", "busy", "idle"} {
			if m := sub.message(); !strings.Contains(string(m[3])+string(m[len(m)-1]), want) {
				t.Fatalf("client %d heard %q, want %s", i, m, want)
			}
		}
		p.Close()
		sub.Close()
	}
}

func TestLobby(t *testing.T) {
	from := func(client string) *Message { return &Message{ID: client, Identities: [][]byte{[]byte(client)}} }
	out := NewQueue[*Message]()
	passed := func() (ids string) {
		for _, m := range out.Take() {
			ids += m.ID
		}
		return ids
	}
	l := newLobby()
	l.put(out, from("a"))
	l.put(out, from("b"))
	l.put(out, from("a"))
	if got := passed(); got != "" {
		t.Fatalf("let through without a subscription: %s", got)
	}
	var peers [6]net.TCPConn
	var others [4]net.TCPConn
	l.subscribed(&peers[1])
	if got := passed(); got != "aa" {
		t.Errorf("first subscription lets %q through, want a's two", got)
	}
	l.put(out, from("a"))
	l.subscribed(&peers[2])
	if got := passed(); got != "ab" {
		t.Errorf("%q, want a (known) and b (second subscription)", got)
	}
	l.subscribed(&peers[3])
	l.subscribed(&peers[4])
	l.left(&peers[4])
	l.put(out, from("c"))
	l.put(out, from("d"))
	if got := passed(); got != "c" {
		t.Errorf("%q, want c, which came after its subscription", got)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	if m, ok := out.Get(ctx); !ok || m.ID != "d" {
		t.Error("a client without a subscription is held for ever")
	}
	l.subscribed(&peers[5]) // d's, which came late
	l.put(out, from("e"))
	if got := passed(); got != "" {
		t.Errorf("%q is let through on another's subscription", got)
	}
	l.entered(&others[0])
	l.subscribed(&others[1]) // somebody's who only listens, perhaps
	l.put(out, from("f"))
	if got := passed(); got != "" {
		t.Errorf("%q is let through while a connection has yet to subscribe", got)
	}
	l.subscribed(&others[0])
	if got := passed(); got != "ef" {
		t.Errorf("%q, want e and f", got)
	}
	l.subscribed(&others[2])
	l.entered(&others[3])
	l.put(out, from("g"))
	l.left(&others[3]) // it has given up
	if got := passed(); got != "g" {
		t.Errorf("%q, want g", got)
	}
}

// All that was sent before Drain arrives, the last message too.
func TestDrain(t *testing.T) {
	big := rawJSON(`{"text":"` + strings.Repeat("x", 4<<20) + `"}`)
	for range 20 {
		s, _ := listen(t, tcp())
		mirror(s)
		k := dialServer(t, s)
		ask(t, k, `{}`)
		for range 5 {
			s.Publish(nil, "stream", big)
		}
		s.Publish(nil, "last", nil)
		s.Drain(5 * time.Second)
		s.Close()
		got := ""
		for {
			m, ok := k.Receive(context.Background(), IOPub)
			if !ok {
				break
			}
			got = m.Type
		}
		if got != "last" {
			t.Fatalf("the last message received is %q", got)
		}
		k.Close()
	}
}

// Drain does not wait for a peer that does not read longer than it is told to.
func TestDrainWithStuckPeer(t *testing.T) {
	s, _ := listen(t, tcp())
	stuck := greeted(t, s, IOPub, zmq4.Sub, "")
	stuck.send(wireFrame(0, "\x01"))
	k := dialServer(t, s)
	warm(t, s, k, 2)
	for range 30 {
		s.Publish(nil, "stream", rawJSON(`{"text":"`+strings.Repeat("x", 1<<20)+`"}`))
	}
	start := time.Now()
	s.Drain(200 * time.Millisecond)
	if d := time.Since(start); d < 200*time.Millisecond || d > 5*time.Second {
		t.Errorf("Drain took %v", d)
	}
}

// Far more requests than zmq4 keeps for a socket can wait.
func TestManyRequestsWait(t *testing.T) {
	s, _ := listen(t, tcp())
	k := dialServer(t, s)
	var ids []string
	for range 1000 {
		id, err := k.Send(Shell, "test_request", nil, nil)
		if err != nil {
			t.Fatal(err)
		}
		ids = append(ids, id)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	for _, want := range ids {
		if m, ok := s.Receive(ctx, Shell); !ok || m.ID != want {
			t.Fatalf("received %v, want %s", m, want)
		}
	}
}

func TestReceiveEndsWithClose(t *testing.T) {
	s, _ := listen(t, tcp())
	go func() {
		time.Sleep(10 * time.Millisecond)
		s.Close()
	}()
	if m, ok := s.Receive(context.Background(), Shell); ok {
		t.Errorf("received %v", m)
	}
}

func TestReadConnection(t *testing.T) {
	const good = `{"shell_port":1001,"iopub_port":1002,"stdin_port":1003,"control_port":1004,"hb_port":1005,"ip":"127.0.0.1","key":"k","transport":"tcp","signature_scheme":"hmac-sha256","kernel_name":"x"}`
	for name, c := range map[string]struct{ text, want string }{
		"good":             {good, ""},
		"no scheme":        {strings.Replace(good, `"signature_scheme":"hmac-sha256",`, "", 1), ""},
		"ipc":              {strings.Replace(good, `"tcp"`, `"ipc"`, 1), ""},
		"empty":            {"", "is not JSON"},
		"not JSON":         {"shell_port = 1", "is not JSON: invalid character 's' looking for beginning of value at byte 1"},
		"cut":              {good[:40], "is not JSON"},
		"a list":           {"[]", "no connection file"},
		"another scheme":   {strings.Replace(good, "sha256", "md5", 1), `signature scheme "hmac-md5" is not known; this kernel signs with hmac-sha256`},
		"transport":        {strings.Replace(good, `"tcp"`, `"pgm"`, 1), `transport "pgm" is not known; use tcp or ipc`},
		"no transport":     {strings.Replace(good, `"transport":"tcp",`, "", 1), `transport "" is not known`},
		"no address":       {strings.Replace(good, `"ip":"127.0.0.1",`, "", 1), `no "ip"`},
		"no port":          {strings.Replace(good, `"hb_port":1005,`, "", 1), "hb_port is 0; a port is 1 to 65535"},
		"negative port":    {strings.Replace(good, "1003", "-3", 1), "stdin_port is -3"},
		"port too large":   {strings.Replace(good, "1001", "70000", 1), "shell_port is 70000"},
		"port as text":     {strings.Replace(good, "1004", `"1004"`, 1), `"control_port" is a JSON string and should be of type int`},
		"fraction of port": {strings.Replace(good, "1004", `1004.5`, 1), `"control_port" is a JSON number 1004.5`},
		"port twice":       {strings.Replace(good, "1002", "1001", 1), "shell_port and iopub_port are both 1001"},
		"huge":             {good + strings.Repeat(" ", maxConnectionFile), "larger than"},
	} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "kernel.json")
			if err := os.WriteFile(path, []byte(c.text), 0o600); err != nil {
				t.Fatal(err)
			}
			got, err := ReadConnection(path)
			if c.want == "" {
				if err != nil || got.ShellPort != 1001 || got.HeartbeatPort != 1005 || got.Key != "k" {
					t.Errorf("%+v, %v", got, err)
				}
				return
			}
			if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), path) {
				t.Errorf("error %v, want %q and the path", err, c.want)
			}
		})
	}
	dir := t.TempDir()
	if _, err := ReadConnection(filepath.Join(dir, "none.json")); err == nil || !strings.Contains(err.Error(), "no connection file") {
		t.Errorf("missing file: %v", err)
	}
	if _, err := ReadConnection(dir); err == nil || !strings.Contains(err.Error(), "cannot read the connection file") {
		t.Errorf("a directory: %v", err)
	}
	locked := filepath.Join(dir, "locked.json")
	if err := os.WriteFile(locked, []byte(good), 0); err != nil {
		t.Fatal(err)
	}
	if f, err := os.Open(locked); err == nil {
		f.Close()
		t.Log("this user may read everything; the case of a file that cannot be opened is left out")
	} else if _, err := ReadConnection(locked); err == nil || !strings.Contains(err.Error(), "cannot read the connection file") {
		t.Errorf("an unreadable file: %v", err)
	}
}

// Ports in use are an error that names the channel, and those opened before it are free again.
func TestPortInUse(t *testing.T) {
	for name, c := range map[string]Connection{
		"tcp": tcp(),
		"ipc": {Transport: "ipc", IP: t.TempDir() + "/k", ShellPort: 1, IOPubPort: 2, StdinPort: 3, ControlPort: 4, HeartbeatPort: 5},
	} {
		t.Run(name, func(t *testing.T) {
			first, l := listen(t, c)
			second := first.Connection()
			if name == "tcp" {
				second.ShellPort, second.ControlPort = 0, 0
			} else {
				second.ShellPort, second.ControlPort = 11, 14
			}
			_, err := Listen(second, first.log.log)
			if err == nil || !strings.Contains(err.Error(), "cannot open the stdin channel") {
				t.Fatalf("error %v, want one that names the stdin channel", err)
			}
			first.Close()
			again, err := Listen(first.Connection(), first.log.log)
			if err != nil {
				t.Fatalf("not free after Close: %v; log %s", err, l)
			}
			again.Close()
		})
	}
	if _, err := Listen(Connection{Transport: "tcp", IP: "127.0.0.1", Key: "k", SignatureScheme: "hmac-md5"}, nil); err == nil || !strings.Contains(err.Error(), "hmac-md5") {
		t.Errorf("another scheme: %v", err)
	}
}

func TestLongSocketPath(t *testing.T) {
	c := Connection{Transport: "ipc", IP: "/tmp/" + strings.Repeat("x", 100), ShellPort: 1}
	if _, err := Listen(c, nil); err == nil || !strings.Contains(err.Error(), "the socket's path has 107 bytes, above 103") {
		t.Errorf("error %v", err)
	}
}

// Whoever floods the kernel does not flood its log.
func TestLogIsLimited(t *testing.T) {
	var text logged
	l := limitedLog{log: slog.New(slog.NewTextHandler(&text, nil))}
	for range 1000 {
		l.warn("dropped")
	}
	if n := strings.Count(text.String(), "dropped"); n != 10 {
		t.Errorf("%d lines in one second, want 10", n)
	}
	l.second = l.second.Add(-time.Second)
	l.warn("dropped")
	if !strings.Contains(text.String(), `"left out before"=990`) {
		t.Errorf("the line afterwards does not count those left out: %s", &text)
	}
}

// The socket files of a process that died are in nobody's way; files of other kinds are left alone.
func TestStaleSocketFile(t *testing.T) {
	c := Connection{Transport: "ipc", IP: t.TempDir() + "/k", ShellPort: 1, IOPubPort: 2, StdinPort: 3, ControlPort: 4, HeartbeatPort: 5}
	_, path := c.address(Shell)
	leaveSocket(t, path)
	s, _ := listen(t, c)
	mirror(s)
	ask(t, dialServer(t, s), `{}`)
	s.Close()
	if err := os.WriteFile(path, []byte("mine"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Listen(c, nil); err == nil || !strings.Contains(err.Error(), "shell channel") {
		t.Errorf("error %v, want one that names the shell channel", err)
	}
	if text, err := os.ReadFile(path); err != nil || string(text) != "mine" {
		t.Errorf("the file that was there: %q, %v", text, err)
	}
}

func TestContentThatCannotBeMarshalled(t *testing.T) {
	s, _ := listen(t, tcp())
	if err := s.Publish(nil, "x", func() {}); err == nil || !strings.Contains(err.Error(), "content of x") {
		t.Errorf("error %v", err)
	}
	m := &Message{Identities: [][]byte{{1}}, Header: json.RawMessage("{}")}
	if _, err := s.Reply(Shell, m, "x", func() {}, nil); err == nil || !strings.Contains(err.Error(), "metadata of x") {
		t.Errorf("error %v", err)
	}
}
