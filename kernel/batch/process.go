package batch

import (
	"context"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"sync"
	"time"

	"linewright/kernel/wire"
)

// limits are how long is waited for a kernel.
type limits struct {
	start     time.Duration // to answer its first request
	repeat    time.Duration // to answer it before it is sent again
	shutdown  time.Duration // to end when it is told to
	interrupt time.Duration // to stop a cell that is interrupted, before the kernel is ended
	idle      time.Duration // between the reply to a cell, or its output, and the word that all output is out
	lastWords time.Duration // for the last output of a kernel that has died to come in
}

var usualLimits = limits{
	start:     30 * time.Second,
	repeat:    500 * time.Millisecond,
	shutdown:  3 * time.Second,
	interrupt: 5 * time.Second,
	idle:      10 * time.Second,
	lastWords: time.Second,
}

// process is a kernel that this program has started.
type process struct {
	limits limits
	cmd    *exec.Cmd
	client *wire.Client
	folder string // holds the connection file and, where there are any, the sockets
	log    tail   // what the kernel wrote on its standard error

	ended   chan struct{} // closed when the process has ended
	failure error         // how it ended; read after ended is closed

	language map[string]any // language_info of the kernel

	events chan event    // what comes in on shell and iopub; closed when the kernel has closed its connections
	stop   chan struct{} // closed when nobody takes events any more
}

// event is a message that came in.
type event struct {
	channel wire.Channel
	message *wire.Message
}

// ParametersVariable is the environment variable that gives a kernel the values of page parameters, as a JSON object of
// texts.
const ParametersVariable = "LINEWRIGHT_PARAMETERS"

// parentVariable is Jupyter's: a kernel ends when the process with this number is gone.
const parentVariable = "JPY_PARENT_PID"

// start starts the kernel whose command line is argv, with {connection_file} for its connection file, in the working
// folder, and waits until it answers.
func start(ctx context.Context, l limits, argv []string, folder string, parameters map[string]string) (_ *process, err error) {
	p := &process{limits: l, ended: make(chan struct{}), events: make(chan event), stop: make(chan struct{})}
	defer func() {
		if err != nil {
			p.close()
		}
	}()
	if p.folder, err = os.MkdirTemp("", "linewright-"); err != nil {
		return nil, err
	}
	connection, err := newConnection(p.folder)
	if err != nil {
		return nil, err
	}
	text, err := json.Marshal(connection)
	if err != nil {
		return nil, err
	}
	file := filepath.Join(p.folder, "connection.json")
	if err := os.WriteFile(file, text, 0o600); err != nil {
		return nil, err
	}
	args := make([]string, len(argv))
	for i, a := range argv {
		args[i] = strings.ReplaceAll(a, "{connection_file}", file)
	}
	cmd := exec.Command(args[0], args[1:]...)
	cmd.Dir = folder
	cmd.Stdout, cmd.Stderr = &p.log, &p.log
	cmd.WaitDelay = time.Second // a program that a cell left running must not hold up the kernel's end
	cmd.Env = append(os.Environ(), parentVariable+"="+strconv.Itoa(os.Getpid()))
	if len(parameters) > 0 {
		set, err := json.Marshal(parameters)
		if err != nil {
			return nil, err
		}
		cmd.Env = append(cmd.Env, ParametersVariable+"="+string(set))
	}
	detach(cmd)
	if err := cmd.Start(); err != nil {
		return nil, fmt.Errorf("cannot start the kernel: %w", err)
	}
	p.cmd = cmd
	go func() {
		p.failure = cmd.Wait()
		close(p.ended)
	}()
	if err := p.connect(ctx, connection); err != nil {
		return nil, err
	}
	return p, nil
}

// maxSocketPath is the longest path of a socket that every Unix takes, with some to spare (104 bytes on macOS).
const maxSocketPath = 100

// newConnection returns a connection within the folder, on which nobody else can take a port. Where sockets cannot be
// files it is one on the loopback interface.
func newConnection(folder string) (wire.Connection, error) {
	c := wire.Connection{
		Transport: "ipc", IP: filepath.Join(folder, "k"), Key: rand.Text(), SignatureScheme: wire.Scheme,
		ShellPort: 1, IOPubPort: 2, StdinPort: 3, ControlPort: 4, HeartbeatPort: 5,
	}
	if runtime.GOOS != "windows" && len(c.IP)+len("-1") <= maxSocketPath {
		return c, nil
	}
	c.Transport, c.IP = "tcp", "127.0.0.1"
	for _, port := range []*int{&c.ShellPort, &c.IOPubPort, &c.StdinPort, &c.ControlPort, &c.HeartbeatPort} {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			return c, fmt.Errorf("no free port for the kernel: %w", err)
		}
		defer l.Close() // all are held until all are found, so that no two are the same
		*port = l.Addr().(*net.TCPAddr).Port
	}
	return c, nil
}

// connect connects to the kernel and asks for its kernel_info until the answer is heard on both channels: only then is
// it sure that no broadcast is lost.
func (p *process) connect(ctx context.Context, c wire.Connection) error {
	ctx, cancel := context.WithTimeoutCause(ctx, p.limits.start, fmt.Errorf("the kernel did not answer within %v", p.limits.start))
	defer cancel()
	dialling, stopDialling := context.WithCancel(ctx)
	defer stopDialling()
	go func() {
		select {
		case <-p.ended:
			stopDialling()
		case <-dialling.Done():
		}
	}()
	var err error
	if p.client, err = wire.Dial(dialling, c); err != nil {
		switch {
		case p.over():
			return p.death()
		case ctx.Err() != nil:
			return context.Cause(ctx)
		}
		return err
	}
	p.listen()
	for {
		id, err := p.client.Send(wire.Shell, "kernel_info_request", nil, nil)
		if err != nil {
			return err
		}
		done, err := p.settle(ctx, id)
		if err != nil || done {
			return err
		}
	}
}

// settle waits a moment for the reply and the idle state that answer a request.
func (p *process) settle(ctx context.Context, id string) (done bool, err error) {
	again := time.After(p.limits.repeat)
	var replied, idle bool
	for !replied || !idle {
		select {
		case e, ok := <-p.events:
			if !ok {
				return false, p.death()
			}
			if e.message.ParentID == id {
				idle = idle || isIdle(e)
				if e.channel == wire.Shell {
					replied = true
					if err := p.read(e.message); err != nil {
						return false, err
					}
				}
			}
		case <-again:
			return false, nil
		case <-ctx.Done():
			return false, context.Cause(ctx)
		}
	}
	return true, nil
}

// read reads the kernel_info_reply.
func (p *process) read(m *wire.Message) error {
	var info struct {
		Language map[string]any `json:"language_info"`
	}
	if err := decodeTree(m.Content, &info); err != nil {
		return fmt.Errorf("the kernel's %s is malformed: %w", m.Type, err)
	}
	p.language = info.Language
	return nil
}

// isIdle reports whether the event says that the kernel is done with a request.
func isIdle(e event) bool {
	if e.channel != wire.IOPub || e.message.Type != "status" {
		return false
	}
	var status content
	return json.Unmarshal(e.message.Content, &status) == nil && status.State == "idle"
}

// listen lets events come in.
func (p *process) listen() {
	var both sync.WaitGroup
	for _, ch := range []wire.Channel{wire.Shell, wire.IOPub} {
		both.Go(func() {
			for {
				m, ok := p.client.Receive(context.Background(), ch)
				if !ok {
					return
				}
				select {
				case p.events <- event{ch, m}:
				case <-p.stop:
					return
				}
			}
		})
	}
	go func() {
		both.Wait()
		close(p.events)
	}()
}

// interrupt asks the kernel to stop what it executes.
func (p *process) interrupt() { p.client.Send(wire.Control, "interrupt_request", nil, nil) }

// over reports whether the process has ended.
func (p *process) over() bool {
	select {
	case <-p.ended:
		return true
	default:
		return false
	}
}

// death waits for the end of a kernel that has closed its connections, and says why it ended as well as can be known.
func (p *process) death() error {
	select {
	case <-p.ended:
	case <-time.After(p.limits.shutdown):
		kill(p.cmd)
		<-p.ended
		return errors.New("the kernel closed its connections and was ended")
	}
	how := "exit status 0"
	if p.failure != nil {
		how = p.failure.Error()
	}
	if why := p.reason(); why != "" {
		return fmt.Errorf("the kernel died (%s): %s", how, why)
	}
	if how == "signal: killed" {
		how += "; perhaps the system ran out of memory"
	}
	return fmt.Errorf("the kernel died (%s)", how)
}

// crashFile is where a kernel of this project leaves, beside its connection file, why it dies: its standard error
// belongs to its cells by then.
const crashFile = "connection.linewright-crash"

// reason returns the line that says best why the process has ended, or "".
func (p *process) reason() string {
	crash, err := os.ReadFile(filepath.Join(p.folder, crashFile))
	if err != nil {
		return p.log.last()
	}
	first, _, _ := strings.Cut(strings.TrimSpace(string(crash)), "\n") // stacks follow
	return first
}

// close ends the kernel, when it does not end by itself in time, and removes its traces.
func (p *process) close() {
	if p.client != nil && !p.over() {
		p.client.Send(wire.Control, "shutdown_request", nil, map[string]bool{"restart": false})
		select {
		case <-p.ended:
		case <-time.After(p.limits.shutdown):
		}
	}
	if p.cmd != nil {
		kill(p.cmd) // also what a cell has started
		<-p.ended
	}
	close(p.stop)
	if p.client != nil {
		p.client.Close()
	}
	if p.folder != "" {
		os.RemoveAll(p.folder)
	}
}
