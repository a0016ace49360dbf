//go:build unix

package session

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"linewright/kernel/wire"
)

// The test binary is also the kernel that the tests start: Serve takes the descriptors and signals of its process.
const (
	serveVariable = "LINEWRIGHT_TEST_SERVE" // the connection file of a kernel to run
	spawnVariable = "LINEWRIGHT_TEST_SPAWN" // the connection file of a kernel to start, and leave alone
)

func TestMain(m *testing.M) {
	switch {
	case os.Getenv(spawnVariable) != "":
		cmd := command(os.Getenv(spawnVariable), fmt.Sprint(os.Getpid()))
		if err := cmd.Start(); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		fmt.Println(cmd.Process.Pid)
		os.Stdin.Read(make([]byte, 1)) // until the test closes it
		os.Exit(0)
	case os.Getenv(serveVariable) != "":
		if err := Serve(context.Background(), os.Getenv(serveVariable), Options{Version: "test"}); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		fmt.Fprintln(os.Stderr, "served") // the descriptors are back
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// command is a kernel on a connection file.
func command(file, parent string) *exec.Cmd {
	cmd := exec.Command(os.Args[0])
	for _, v := range os.Environ() {
		if !strings.HasPrefix(v, spawnVariable) {
			cmd.Env = append(cmd.Env, v)
		}
	}
	cmd.Env = append(cmd.Env, serveVariable+"="+file, "JPY_PARENT_PID="+parent)
	return cmd
}

// connectionFile writes a connection file. The sockets are files beside it: there are no ports to fight for.
func connectionFile(t *testing.T) (path string, c wire.Connection) {
	t.Helper()
	dir, err := os.MkdirTemp("", "lw") // t.TempDir may be too long for a socket
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	c = wire.Connection{
		Transport: "ipc", IP: filepath.Join(dir, "k"), ShellPort: 1, IOPubPort: 2, StdinPort: 3, ControlPort: 4, HeartbeatPort: 5,
		Key: "secret", SignatureScheme: wire.Scheme,
	}
	text, err := json.Marshal(c)
	if err != nil {
		t.Fatal(err)
	}
	path = filepath.Join(dir, "kernel-1.json")
	if err := os.WriteFile(path, text, 0o600); err != nil {
		t.Fatal(err)
	}
	return path, c
}

// A process is a kernel in a process of its own.
type process struct {
	*client
	cmd    *exec.Cmd
	stderr bytes.Buffer // read after ended
	ended  chan error
}

func startProcess(t *testing.T, file string, c wire.Connection) *process {
	t.Helper()
	p := &process{cmd: command(file, ""), ended: make(chan error, 1)}
	p.cmd.Stderr = &p.stderr
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() { p.ended <- p.cmd.Wait() }()
	t.Cleanup(func() { p.cmd.Process.Kill() })
	p.client = front(t, c)
	return p
}

// code waits for the process to end and returns its exit code.
func (p *process) code() int {
	p.t.Helper()
	select {
	case err := <-p.ended:
		var e *exec.ExitError
		if errors.As(err, &e) {
			return e.ExitCode()
		}
		if err != nil {
			p.t.Fatal(err)
		}
		return 0
	case <-time.After(20 * time.Second):
		p.t.Fatal("the process does not end")
		return 0
	}
}

func (p *process) shutdown() {
	p.t.Helper()
	p.ask(wire.Control, "shutdown_request", object{"restart": false})
	if code := p.code(); code != 0 {
		p.t.Errorf("exit code %d after a shutdown; standard error %s", code, &p.stderr)
	}
}

// What reaches the descriptors of the process reaches the notebook, in order with what the cell prints.
func TestDescriptors(t *testing.T) {
	file, c := connectionFile(t)
	p := startProcess(t, file, c)
	for _, test := range []struct{ code, stdout, stderr string }{
		{`import "os"` + "\n" + `os.Stdout.WriteString("a\n"); fmt.Println("b"); os.Stdout.WriteString("c\n"); fmt.Println("d")`, "a\nb\nc\nd\n", ""},
		{`fmt.Fprintln(os.Stderr, "oops")`, "", "oops\n"},
		{`import "log/slog"` + "\n" + `slog.Info("hello")`, "", "INFO hello\n"},
		{`import "log"` + "\n" + `log.Default().Println("hello")`, "", "hello\n"},
		{"for i := 0; i < 3000; i++ { fmt.Print(1); if i < 2 { os.Stdout.WriteString(\"2\") } }", "1212" + strings.Repeat("1", 2998), ""},
		{`raw := os.NewFile(2, "raw")` + "\n" + `raw.WriteString("as compiled code prints\n")`, "", "as compiled code prints\n"},
		{`for i := 0; i < 20000; i++ { os.Stdout.WriteString("0123456789\n") }`, strings.Repeat("0123456789\n", 20000), ""},
	} {
		reply, output := p.execute(test.code, nil)
		if reply["status"] != "ok" {
			t.Errorf("%s: %v", test.code, reply)
		}
		if got := text(t, output, "stdout"); got != test.stdout {
			t.Errorf("%s: stdout %.100q (%d bytes), want %.100q", test.code, got, len(got), test.stdout)
		}
		if got := text(t, output, "stderr"); !strings.HasSuffix(got, test.stderr) {
			t.Errorf("%s: stderr %q, want %q", test.code, got, test.stderr)
		}
	}
	reply, _ := p.execute("os.Stdout.Close()", nil)
	if reply["status"] != "ok" {
		t.Error(reply)
	}
	_, output := p.execute(`fmt.Println("still here")`, nil)
	if got := text(t, output, "stdout"); got != "still here\n" {
		t.Errorf("after a cell has closed its standard output: %q", got)
	}
	p.shutdown()
	if got := p.stderr.String(); got != "served\n" {
		t.Errorf("standard error of the process: %q", got)
	}
	if left, err := filepath.Glob(filepath.Join(filepath.Dir(file), "*")); err != nil || len(left) != 1 {
		t.Errorf("files left: %v, %v", left, err)
	}
}

// os.Exit of a cell ends the kernel with its code and its output delivered.
func TestExit(t *testing.T) {
	file, c := connectionFile(t)
	p := startProcess(t, file, c)
	id := p.start(`import "os"`+"\n"+`fmt.Println("last"); os.Stdout.WriteString("words\n"); os.Exit(3)`, nil)
	if got := text(t, p.output(id), "stdout"); got != "last\nwords\n" {
		t.Errorf("output %q", got)
	}
	if code := p.code(); code != 3 {
		t.Errorf("exit code %d, want 3", code)
	}
	p = startProcess(t, file, c)
	_, output := p.execute("1", nil)
	if got := kinds(output); got != "execute_input execute_result" {
		t.Errorf("the next kernel's first cell broadcasts %s", got)
	}
}

// A kernel that dies says why to the next kernel, which tells the reader once.
func TestCrash(t *testing.T) {
	file, c := connectionFile(t)
	stale := filepath.Join(filepath.Dir(file), "kernel-0"+crashSuffix)
	if err := os.WriteFile(stale, []byte("fatal error: of a kernel long gone"), 0o600); err != nil {
		t.Fatal(err)
	}
	p := startProcess(t, file, c)
	p.execute("1", nil)
	if _, err := os.Stat(stale); !os.IsNotExist(err) {
		t.Errorf("a crash file without a connection file is kept: %v", err)
	}
	p.start("m := map[int]int{}\nfor i := 0; i < 8; i++ {\n\tgo func() { for { m[1]++ } }()\n}\nfor { m[2]++ }", nil)
	if code := p.code(); code != 2 {
		t.Errorf("exit code %d, want the Go runtime's 2", code)
	}
	p = startProcess(t, file, c)
	_, output := p.execute("1", nil)
	if got := text(t, output, "stderr"); !strings.HasPrefix(got, "linewright: the kernel before this one died: fatal error: concurrent map") {
		t.Errorf("the first cell afterwards is told %q", got)
	}
	if _, output = p.execute("1", nil); text(t, output, "stderr") != "" {
		t.Error("told twice")
	}
	p.shutdown()
	p = startProcess(t, file, c)
	if _, output = p.execute("1", nil); text(t, output, "stderr") != "" {
		t.Error("told after an ordinary end")
	}
}

func TestSignals(t *testing.T) {
	file, c := connectionFile(t)
	p := startProcess(t, file, c)
	p.cmd.Process.Signal(os.Interrupt) // while idle
	p.execute("1", nil)
	id := p.start("for {\n}", nil)
	for p.answer(wire.IOPub, id).Type != "execute_input" {
	}
	p.cmd.Process.Signal(os.Interrupt)
	equal(t, "the cell", decode(t, p.answer(wire.Shell, id))["ename"], `"interrupted"`)
	p.execute("1", nil)
	p.cmd.Process.Signal(syscall.SIGTERM)
	if code := p.code(); code != 0 {
		t.Errorf("exit code %d after SIGTERM", code)
	}
}

// A kernel does not outlive the process that started it.
func TestParentDies(t *testing.T) {
	file, c := connectionFile(t)
	parent := exec.Command(os.Args[0])
	parent.Env = append(os.Environ(), spawnVariable+"="+file)
	stdin, err := parent.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	stdout, err := parent.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := parent.Start(); err != nil {
		t.Fatal(err)
	}
	var pid int
	if _, err := fmt.Fscan(stdout, &pid); err != nil {
		t.Fatal(err)
	}
	k := front(t, c)
	k.execute("1", nil)
	k.start("for {\n}", nil)
	stdin.Close()
	parent.Wait()
	for end := time.Now().Add(10 * time.Second); syscall.Kill(pid, 0) == nil; time.Sleep(10 * time.Millisecond) {
		if time.Now().After(end) {
			syscall.Kill(pid, syscall.SIGKILL)
			t.Fatal("the kernel outlives its parent")
		}
	}
}

// A kernel that cannot start says why, in one line, and ends with a code that is not zero.
func TestCannotServe(t *testing.T) {
	file, c := connectionFile(t)
	p := startProcess(t, file, c)
	p.execute("1", nil)
	bad := filepath.Join(filepath.Dir(file), "bad.json")
	if err := os.WriteFile(bad, []byte(`{"signature_scheme":"hmac-md5"}`), 0o600); err != nil {
		t.Fatal(err)
	}
	for path, want := range map[string]string{
		filepath.Join(filepath.Dir(file), "none.json"): "no connection file",
		bad:  "hmac-md5",
		file: "wire: cannot open the shell channel: listen unix " + c.IP + "-1: another process listens there",
	} {
		text, err := command(path, "").CombinedOutput()
		var e *exec.ExitError
		if !errors.As(err, &e) || e.ExitCode() != 1 || !strings.Contains(string(text), want) || strings.Count(string(text), "\n") != 1 {
			t.Errorf("%s: %v, %q, want exit code 1 and one line with %q", path, err, text, want)
		}
	}
	p.execute("1", nil) // the one that is there is not disturbed
}
