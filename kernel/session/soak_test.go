//go:build unix

package session

import (
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"linewright/kernel/wire"
)

const (
	soakVariable = "LINEWRIGHT_SOAK" // how long TestSoak works, such as 30m
	soakPatience = 20 * time.Second  // no answer within this is a kernel that hangs
	soakClients  = 4
)

// cells of a soak: each ends by itself, whatever the others have done.
var soakCells = []string{
	"1+1",
	"x := 3\nx * 14",
	"func f(n int) int { return n + 1 }\nf(x)", // fails before another has declared x
	`fmt.Println("żółć 日本 😀")`,
	"for i := 0; i < 5000; i++ {\n\tfmt.Println(i)\n}",
	"import \"strings\"\nfmt.Println(strings.Repeat(\"x\", 3<<20))",
	"import \"os\"\nfor i := 0; i < 300; i++ {\n\tfmt.Fprintln(os.Stderr, i)\n\tos.Stdout.WriteString(\"raw\\n\")\n}",
	"import \"time\"\ntime.Sleep(30 * time.Millisecond)",
	"import \"time\"\ngo func() {\n\tfor i := 0; i < 20; i++ {\n\t\ttime.Sleep(5 * time.Millisecond)\n\t\tfmt.Println(\"later\", i)\n\t}\n}()",
	"go func() { panic(\"of a goroutine\") }()",
	"panic(\"boom\")",
	"uint8(200) + 100",
	"func = }",
	"var m map[string]int\nm[\"a\"] = 1",
	"linecode.AMI()",
	"p, err := spectrum.Exact(linecode.HDB3(), pulse.Train{})\npage.Show(plotting.Spectrum(p))",
	"page.Slot(\"best\").Set(x)",
	"page.Clear()",
	"page.Ask(\"nobody answers\")", // fails: nobody can be asked
	"page.Show(make([]int, 2000))",
}

// endless cells end by an interrupt only.
var endless = []string{
	"for {\n}",
	"select {}",
	"import \"time\"\ntime.Sleep(time.Hour)",
	"for i := 0; ; i++ {\n\tfmt.Println(i)\n}",
	"c := make(chan int)\n<-c",
}

// asides are requests that are answered while a cell runs.
var asides = []struct {
	kind    string
	content object
}{
	{"kernel_info_request", object{}},
	{"complete_request", object{"code": "linecode.A", "cursor_pos": 10}},
	{"inspect_request", object{"code": "linecode.AMI", "cursor_pos": 12}},
	{"is_complete_request", object{"code": "for {"}},
	{"history_request", object{"hist_access_type": "tail", "n": 3}},
	{"comm_info_request", object{}},
	{"no_such_request", object{}},
	{"execute_request", object{"code": 1}},
}

// A soak is a kernel under random load: several front ends that run cells, interrupt, ask, vanish and come back, while
// the kernel is restarted, told to end and killed. Whatever is asked of a kernel that lives on is answered.
type soak struct {
	t    *testing.T
	file string
	at   wire.Connection
	end  time.Time

	mu    sync.Mutex
	life  context.Context // over when the process is gone; guarded by mu
	cmd   *exec.Cmd       // guarded by mu
	count map[string]int  // of what was done; guarded by mu
}

// TestSoak works for ten seconds, or as long as LINEWRIGHT_SOAK says.
func TestSoak(t *testing.T) {
	work := 10 * time.Second
	if text := os.Getenv(soakVariable); text != "" {
		var err error
		if work, err = time.ParseDuration(text); err != nil {
			t.Fatal(err)
		}
	} else if testing.Short() {
		work = 2 * time.Second
	}
	seed := uint64(time.Now().UnixNano())
	t.Logf("seed %d", seed) // of the load; what becomes of it is the scheduler's
	file, c := connectionFile(t)
	temporary := filepath.Join(filepath.Dir(file), "tmp")
	if err := os.Mkdir(temporary, 0o700); err != nil {
		t.Fatal(err)
	}
	t.Setenv("TMPDIR", temporary)
	s := &soak{t: t, file: file, at: c, end: time.Now().Add(work), count: map[string]int{}}
	s.start()
	t.Cleanup(func() { s.cmd.Process.Kill() })
	var clients sync.WaitGroup
	for i := range soakClients {
		clients.Go(func() { s.client(rand.New(rand.NewPCG(seed, uint64(i)))) })
	}
	r := rand.New(rand.NewPCG(seed, soakClients))
	for time.Now().Before(s.end) && !t.Failed() {
		time.Sleep(min(time.Second+rand.N(4*time.Second), time.Until(s.end)))
		if time.Now().Before(s.end) {
			s.restart(r)
		}
	}
	clients.Wait()
	s.settled()
	s.restart(rand.New(rand.NewPCG(0, 0)))
	k := front(t, c)
	k.execute("1", nil)
	k.ask(wire.Control, "shutdown_request", object{"restart": false})
	<-s.life.Done()
	if left, err := filepath.Glob(filepath.Join(filepath.Dir(file), "*", "*")); err != nil || len(left) > 0 && s.count["killed"] == 0 {
		t.Errorf("files left: %v, %v", left, err)
	}
	t.Logf("done: %v", s.count)
}

// settled reports descriptors that the kernel keeps although nobody is connected any more.
func (s *soak) settled() {
	const most = 32 // its listeners, pipes, logs and what the runtime has
	_, p := s.now()
	var open []os.DirEntry
	for range 50 {
		var err error
		if open, err = os.ReadDir(fmt.Sprintf("/proc/%d/fd", p.Pid)); err != nil || len(open) <= most {
			return // or no system that tells
		}
		time.Sleep(100 * time.Millisecond)
	}
	s.t.Errorf("%d descriptors are open without a client, want %d at most", len(open), most)
}

// did counts what was done.
func (s *soak) did(what string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.count[what]++
}

// start starts a kernel.
func (s *soak) start() {
	cmd := command(s.file, "")
	if err := cmd.Start(); err != nil {
		s.t.Fatal(err)
	}
	life, over := context.WithCancel(context.Background())
	go func() {
		cmd.Wait()
		over()
	}()
	s.mu.Lock()
	defer s.mu.Unlock()
	s.cmd, s.life = cmd, life
}

func (s *soak) now() (life context.Context, p *os.Process) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.life, s.cmd.Process
}

// hangs reports a kernel that does not answer, with what its goroutines do.
func (s *soak) hangs(what string) {
	_, p := s.now()
	p.Signal(syscall.SIGQUIT)
	time.Sleep(time.Second)
	text, _ := os.ReadFile(strings.TrimSuffix(s.file, ".json") + crashSuffix)
	s.t.Errorf("%s\n%.100000s", what, text)
}

// restart ends the kernel, in one way or another, and starts another.
func (s *soak) restart(r *rand.Rand) {
	life, p := s.now()
	ctx, cancel := context.WithTimeout(life, soakPatience)
	defer cancel()
	k, err := wire.Dial(ctx, s.at)
	if err != nil {
		if life.Err() == nil {
			s.hangs("nobody can connect")
		}
		return
	}
	defer k.Close()
	want := 0
	switch r.IntN(5) {
	case 0, 1:
		s.did("shut down")
		k.Send(wire.Control, "shutdown_request", nil, object{"restart": true})
	case 2:
		s.did("terminated")
		p.Signal(syscall.SIGTERM)
	case 3:
		s.did("killed")
		p.Kill()
		want = -1
	case 4:
		s.did("left by os.Exit")
		want = 3
		for life.Err() == nil && ctx.Err() == nil { // the others interrupt it and let it be aborted
			k.Send(wire.Shell, "execute_request", nil, object{"code": "import \"os\"\nos.Exit(3)", "silent": true})
			time.Sleep(100 * time.Millisecond)
		}
	}
	<-ctx.Done()
	if life.Err() == nil {
		s.hangs("the kernel does not end")
		return
	}
	if code := s.cmd.ProcessState.ExitCode(); code != want && !raceDetector { // goroutines that cells leave behind race as they like
		s.t.Errorf("exit code %d, want %d", code, want)
	}
	s.start()
}

// client is one front end after the other until the soak is over.
func (s *soak) client(r *rand.Rand) {
	for time.Now().Before(s.end) && !s.t.Failed() {
		life, _ := s.now()
		ctx, cancel := context.WithTimeout(life, soakPatience)
		k, err := wire.Dial(ctx, s.at)
		cancel()
		if err != nil {
			if life.Err() == nil {
				s.hangs("nobody can connect")
			}
			time.Sleep(10 * time.Millisecond) // the next kernel has yet to be started
			continue
		}
		s.did("connected")
		go answerQuestions(k)
		there := s.greet(life, k)
		for range 1 + r.IntN(20) {
			if there = there && s.act(life, k, r); !there || time.Now().After(s.end) {
				break
			}
		}
		k.Close() // also in the middle of what others have started
	}
}

// answerQuestions answers what cells ask, until the connection is closed.
func answerQuestions(k *wire.Client) {
	for {
		m, ok := k.Receive(context.Background(), wire.Stdin)
		if !ok {
			return
		}
		k.Send(wire.Stdin, "input_reply", nil, json.RawMessage(`{"value":"answer to `+m.ID+`"}`))
	}
}

// greet asks for kernel_info first, as every front end does: an interrupt that is the first thing a client sends is acted
// on before the client can hear of it.
func (s *soak) greet(life context.Context, k *wire.Client) bool {
	ctx, cancel := context.WithTimeout(life, soakPatience)
	defer cancel()
	id, _ := k.Send(wire.Shell, "kernel_info_request", nil, nil)
	return s.answered(ctx, life, k, wire.Shell, id, "greeting")
}

// act does one thing and reports whether the kernel is still there.
func (s *soak) act(life context.Context, k *wire.Client, r *rand.Rand) bool {
	ctx, cancel := context.WithTimeout(life, soakPatience)
	defer cancel()
	request := func(ch wire.Channel, kind string, content any) string {
		id, _ := k.Send(ch, kind, nil, content) // an error means that the kernel is gone, which is found out below
		return id
	}
	execute := func(code string, ask bool) string {
		return request(wire.Shell, "execute_request", object{"code": code, "allow_stdin": ask, "stop_on_error": r.IntN(2) == 0})
	}
	var what string
	var ids []string
	ch := wire.Shell
	interrupted := false
	switch r.IntN(10) {
	case 0, 1, 2:
		what = "cell"
		ids = append(ids, execute(soakCells[r.IntN(len(soakCells))], false))
	case 3:
		what = "cells at once"
		for range 8 {
			ids = append(ids, execute(soakCells[r.IntN(len(soakCells))], false))
		}
	case 4, 5:
		what = "aside"
		a := asides[r.IntN(len(asides))]
		ids = append(ids, request(wire.Shell, a.kind, a.content))
	case 6:
		what, ch = "interrupt", wire.Control
		ids = append(ids, request(ch, "interrupt_request", object{}))
	case 7:
		what, interrupted = "endless cell", true
		ids = append(ids, execute(endless[r.IntN(len(endless))], false))
	case 8:
		what = "question"
		ids = append(ids, execute(`fmt.Println(page.Ask("? "))`, true))
	case 9: // a peer that says half a sentence and waits
		s.did("half a greeting")
		if c, err := net.Dial("unix", s.at.IP+fmt.Sprint("-", 1+r.IntN(5))); err == nil {
			c.Write([]byte{0xff, 0, 0, 0, 0, 0, 0, 0, 1, 0x7f, 3}[:r.IntN(12)])
			time.AfterFunc(time.Second, func() { c.Close() })
		}
		return true
	}
	if interrupted {
		stop := make(chan bool)
		defer close(stop)
		go func() { // until it is answered: before its turn, an interrupt is another's
			for {
				select {
				case <-stop:
					return
				case <-time.After(100 * time.Millisecond):
					k.Send(wire.Control, "interrupt_request", nil, object{})
				}
			}
		}()
	}
	for _, id := range ids {
		if !s.answered(ctx, life, k, ch, id, what) {
			return false
		}
	}
	s.did(what)
	return true
}

// answered waits for the reply to a request and for its idle.
func (s *soak) answered(ctx, life context.Context, k *wire.Client, ch wire.Channel, id, what string) bool {
	for _, on := range []wire.Channel{ch, wire.IOPub} {
		for {
			m, ok := k.Receive(ctx, on)
			if !ok {
				// Whoever waited is told of the connection's end before the process is gone.
				select {
				case <-life.Done():
				case <-time.After(5 * time.Second):
					s.hangs(fmt.Sprintf("no answer on %s to %s", on, what))
				}
				return false
			}
			if m.ParentID == id && (on != wire.IOPub || is(m, `"idle"`)) {
				break
			}
		}
	}
	return true
}
