package session

import (
	"encoding/json"
	"errors"
	"fmt"
	"runtime"
	"strings"
	"unicode/utf8"

	"linewright/kernel/wire"
	"linewright/plotting"
)

// A handler does the work of a request and returns the content of its reply. A handler of a message that has no reply
// returns nothing of interest.
type handler func(k *kernel, m *wire.Message) (any, error)

var requests = map[string]handler{
	"kernel_info_request": kernelInfo,
	"connect_request":     connect,
	"is_complete_request": isComplete,
	"complete_request":    complete,
	"inspect_request":     inspect,
	"history_request":     (*kernel).tellHistory,
	"comm_info_request":   commInfo,
	"comm_open":           commOpen,
	"comm_msg":            ignored,
	"comm_close":          ignored,
	"interrupt_request":   ok,
	"shutdown_request":    shutdown,
	"debug_request":       debugDeclined,
}

// read decodes a request's content.
func read(m *wire.Message, into any) error {
	err := json.Unmarshal(m.Content, into)
	var kind *json.UnmarshalTypeError
	if errors.As(err, &kind) {
		return fmt.Errorf("%s: %q is a JSON %s and should be of type %s", m.Type, kind.Field, kind.Value, kind.Type)
	}
	return err
}

func ok(*kernel, *wire.Message) (any, error) { return map[string]string{"status": "ok"}, nil }

// ignored is for comm messages: no comm is ever open here, so they can only be late.
func ignored(*kernel, *wire.Message) (any, error) { return nil, nil }

func kernelInfo(k *kernel, _ *wire.Message) (any, error) {
	goVersion := strings.TrimPrefix(runtime.Version(), "go")
	type link struct {
		Text string `json:"text"`
		URL  string `json:"url"`
	}
	return map[string]any{
		"status":                 "ok",
		"protocol_version":       wire.Version,
		"implementation":         "linewright",
		"implementation_version": k.version,
		"language_info": map[string]string{
			"name":               "go",
			"version":            goVersion,
			"mimetype":           "text/x-go",
			"file_extension":     ".go",
			"pygments_lexer":     "go",
			"codemirror_mode":    "go",
			"nbconvert_exporter": "",
		},
		"banner":   fmt.Sprintf("Linewright %s: Go %s cells for line codes and their spectra", k.version, goVersion),
		"debugger": false,
		"help_links": []link{
			{"Go: language specification", "https://go.dev/ref/spec"},
			{"Go: standard library", "https://pkg.go.dev/std"},
			{"gonum: numerical packages", "https://pkg.go.dev/gonum.org/v1/gonum"},
			{"gonum/plot: figures", "https://pkg.go.dev/gonum.org/v1/plot"},
		},
	}, nil
}

// connect tells the ports; front ends of protocol 4 ask.
func connect(k *kernel, _ *wire.Message) (any, error) {
	c := k.wire.Connection()
	return map[string]any{
		"status": "ok", "shell_port": c.ShellPort, "iopub_port": c.IOPubPort, "stdin_port": c.StdinPort,
		"control_port": c.ControlPort, "hb_port": c.HeartbeatPort,
	}, nil
}

func isComplete(k *kernel, m *wire.Message) (any, error) {
	var r struct{ Code string }
	if err := read(m, &r); err != nil {
		return nil, err
	}
	cells, err := k.start()
	if err != nil {
		return nil, err
	}
	state, indent := cells.IsComplete(r.Code)
	if state != "incomplete" {
		return map[string]string{"status": state}, nil
	}
	return map[string]string{"status": state, "indent": indent}, nil
}

// A position is where the cursor stands in a request's code, in code points. Front ends that leave it out mean the end.
type position struct {
	Code   string
	Cursor *int `json:"cursor_pos"`
	Detail int  `json:"detail_level"`
}

func (p position) cursor() int {
	if p.Cursor == nil {
		return utf8.RuneCountInString(p.Code)
	}
	return *p.Cursor
}

func complete(k *kernel, m *wire.Message) (any, error) {
	var r position
	if err := read(m, &r); err != nil {
		return nil, err
	}
	cells, err := k.start()
	if err != nil {
		return nil, err
	}
	c := cells.Complete(r.Code, r.cursor())
	type match struct {
		Start     int    `json:"start"`
		End       int    `json:"end"`
		Text      string `json:"text"`
		Type      string `json:"type,omitempty"`
		Signature string `json:"signature,omitempty"`
	}
	matches := make([]match, len(c.Matches))
	for i, text := range c.Matches {
		matches[i] = match{Start: c.Start, End: c.End, Text: text}
		if i < len(c.Types) {
			matches[i].Type = c.Types[i]
		}
		if i < len(c.Signatures) {
			matches[i].Signature = c.Signatures[i]
		}
	}
	return map[string]any{
		"status": "ok", "matches": append([]string{}, c.Matches...), "cursor_start": c.Start, "cursor_end": c.End,
		"metadata": map[string]any{"_jupyter_types_experimental": matches},
	}, nil
}

func inspect(k *kernel, m *wire.Message) (any, error) {
	var r position
	if err := read(m, &r); err != nil {
		return nil, err
	}
	cells, err := k.start()
	if err != nil {
		return nil, err
	}
	b, found := cells.Inspect(r.Code, r.cursor(), r.Detail)
	if !found {
		b = plotting.Bundle{}
	}
	return raw(map[string]any{"status": "ok", "found": found}, b), nil
}

func commInfo(*kernel, *wire.Message) (any, error) {
	return map[string]any{"status": "ok", "comms": map[string]any{}}, nil
}

// commOpen closes what was opened: this kernel knows no targets.
func commOpen(k *kernel, m *wire.Message) (any, error) {
	var r struct {
		ID string `json:"comm_id"`
	}
	if err := read(m, &r); err != nil {
		return nil, err
	}
	k.publish(m, "comm_close", map[string]any{"comm_id": r.ID, "data": map[string]any{}})
	return nil, nil
}

// shutdown stops the cell that runs, so that its failure is told before the reply; the kernel ends after the reply.
func shutdown(k *kernel, m *wire.Message) (any, error) {
	var r struct{ Restart bool }
	if err := read(m, &r); err != nil {
		return nil, err
	}
	k.stopCell()
	return map[string]any{"status": "ok", "restart": r.Restart}, nil
}

// debugDeclined answers in the form of the debug adapter protocol, so that a front end does not wait.
func debugDeclined(_ *kernel, m *wire.Message) (any, error) {
	var r struct {
		Seq     int
		Command string
	}
	if err := read(m, &r); err != nil {
		return nil, err
	}
	const why = "this kernel has no debugger"
	return struct {
		failed
		Type    string `json:"type"`
		Request int    `json:"request_seq"`
		Success bool   `json:"success"`
		Command string `json:"command"`
		Message string `json:"message"`
	}{failure("no debugger", errors.New(why)), "response", r.Seq, false, r.Command, why}, nil
}
