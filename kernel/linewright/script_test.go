package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/testscript"

	"linewright/kernel/batch"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"linewright": main})
}

// TestScripts runs the command as its users do; each script is one behaviour.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir: "testdata/script",
		Setup: func(e *testscript.Env) error { // for scripts that set PATH
			commands, _, _ := strings.Cut(e.Getenv("PATH"), string(filepath.ListSeparator))
			e.Setenv("LINEWRIGHT", filepath.Join(commands, "linewright"))
			return nil
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"notebook": notebookCommand,
			"sparse":   sparseCommand,
			"waitfor":  waitforCommand,
			"gone":     goneCommand,
			"busyport": busyportCommand,
		},
	})
}

// notebook OUT SOURCE makes a notebook of a file of cells. A line "--- code", "--- markdown" or "--- code TAG" starts
// each.
func notebookCommand(ts *testscript.TestScript, _ bool, args []string) {
	var cells []map[string]any
	for l := range strings.Lines(ts.ReadFile(args[1])) {
		if head, ok := strings.CutPrefix(l, "--- "); ok {
			words := strings.Fields(head)
			cell := map[string]any{"cell_type": words[0], "id": fmt.Sprintf("c%d", len(cells)), "metadata": map[string]any{}, "source": ""}
			if words[0] == "code" {
				cell["outputs"], cell["execution_count"] = []any{}, nil
			}
			if len(words) > 1 {
				cell["metadata"] = map[string]any{"tags": words[1:]}
			}
			cells = append(cells, cell)
			continue
		}
		last := cells[len(cells)-1]
		last["source"] = last["source"].(string) + l
	}
	b, err := json.Marshal(map[string]any{"cells": cells, "metadata": map[string]any{}, "nbformat": 4, "nbformat_minor": 5})
	ts.Check(err)
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), b, 0o644))
}

// sparse FILE makes a file that is too large for a notebook and has nothing in it.
func sparseCommand(ts *testscript.TestScript, _ bool, args []string) {
	path := ts.MkAbs(args[0])
	ts.Check(os.WriteFile(path, nil, 0o644))
	ts.Check(os.Truncate(path, batch.MaxSize+1))
}

// waitfor FILE waits until the file has content.
func waitforCommand(ts *testscript.TestScript, _ bool, args []string) {
	for range 300 {
		if info, err := os.Stat(ts.MkAbs(args[0])); err == nil && info.Size() > 0 {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	ts.Fatalf("%s did not appear", args[0])
}

// gone FILE waits until the process whose number is in the file is gone.
func goneCommand(ts *testscript.TestScript, _ bool, args []string) {
	pid := strings.TrimSpace(ts.ReadFile(args[0]))
	for range 300 {
		if _, err := os.Stat("/proc/" + pid); errors.Is(err, os.ErrNotExist) {
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	ts.Fatalf("process %s is still there", pid)
}

// busyport FILE writes a connection file whose shell port another process holds.
func busyportCommand(ts *testscript.TestScript, _ bool, args []string) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	ts.Check(err)
	ts.Defer(func() { l.Close() })
	ports := map[string]any{"transport": "tcp", "ip": "127.0.0.1", "key": "k", "signature_scheme": "hmac-sha256"}
	ports["shell_port"] = l.Addr().(*net.TCPAddr).Port
	for _, name := range []string{"iopub_port", "stdin_port", "control_port", "hb_port"} {
		free, err := net.Listen("tcp", "127.0.0.1:0")
		ts.Check(err)
		ports[name] = free.Addr().(*net.TCPAddr).Port
		defer free.Close()
	}
	b, err := json.Marshal(ports)
	ts.Check(err)
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), b, 0o600))
}
