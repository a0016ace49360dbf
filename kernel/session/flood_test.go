//go:build unix

package session

import (
	"bytes"
	"fmt"
	"io"
	"net"
	"os"
	"strconv"
	"strings"
	"testing"
	"time"

	"linewright/kernel/wire"
)

// raceDetector is true in tests with the race detector.
var raceDetector bool

// subscribe connects to a kernel's broadcast byte by byte, as ZMTP 3.0 has it (RFC 23 of the ZeroMQ project), so that a
// test decides when anything is read. The welcome has been read.
func subscribe(t *testing.T, c wire.Connection) net.Conn {
	t.Helper()
	conn, err := net.Dial("unix", c.IP+"-"+fmt.Sprint(c.IOPubPort))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	greeting := make([]byte, 64)
	greeting[0], greeting[9], greeting[10] = 0xff, 0x7f, 3
	copy(greeting[12:], "NULL")
	const ready = "\x04\x19\x05READY\x0bSocket-Type\x00\x00\x00\x03SUB"
	const everything = "\x00\x01\x01"
	if _, err := conn.Write(append(greeting, ready+everything...)); err != nil {
		t.Fatal(err)
	}
	for got := []byte(nil); !bytes.Contains(got, []byte(`{"subscription":""}`)); {
		b := make([]byte, 1)
		if _, err := conn.Read(b); err != nil {
			t.Fatal("no welcome: ", err)
		}
		got = append(got, b...)
	}
	return conn
}

// memory returns a figure of a process's status in MB, such as its resident memory or the peak of it.
func memory(t *testing.T, pid int, name string) int {
	t.Helper()
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", pid))
	if err != nil {
		t.Skip("this system does not tell how much memory a process has:", err)
	}
	for line := range strings.Lines(string(text)) {
		if rest, ok := strings.CutPrefix(line, name+":"); ok {
			kB, err := strconv.Atoi(strings.TrimSuffix(strings.TrimSpace(rest), " kB"))
			if err != nil {
				t.Fatal(line, err)
			}
			return kB >> 10
		}
	}
	t.Fatal("no", name)
	return 0
}

// A million printed lines, three times over, reach who reads them, whole and in order, and reach who reads slowly, while
// somebody else does not read at all; that one is dropped, and the kernel's memory stays within what may wait for it.
func TestFlood(t *testing.T) {
	const (
		lines = 1000000
		cell  = "for i := 0; i < 1000000; i++ {\n\tfmt.Println(\"line\", i, \"of a cell that prints a great deal\")\n}"
		tail  = " of a cell that prints a great deal\n"
		most  = 400 // MB: an interpreter, 64 MB for the one and the other, 32 MB under way, and what the collector has not seen yet
	)
	file, c := connectionFile(t)
	p := startProcess(t, file, c)
	p.execute("1", nil)
	stuck, slow := subscribe(t, c), subscribe(t, c)
	read := make(chan int)
	go func() {
		idle := []byte(`"idle"`)
		ends, kept := 0, 0
		buffer := make([]byte, 256<<10)
		for {
			n, err := io.ReadFull(slow, buffer[kept:])
			n += kept
			ends += bytes.Count(buffer[:n], idle)
			kept = copy(buffer, buffer[max(n-len(idle)+1, 0):n]) // it may be cut here
			if err != nil {
				read <- ends
				return
			}
			time.Sleep(2 * time.Millisecond)
		}
	}()
	for range 3 {
		id := p.start(cell, nil)
		next, rest := 0, ""
		for m := p.answer(wire.IOPub, id); !is(m, `"idle"`); m = p.answer(wire.IOPub, id) {
			if m.Type != "stream" {
				continue
			}
			rest += decode(t, m)["text"].(string)
			for {
				line, after, whole := strings.Cut(rest, "\n")
				if !whole {
					break
				}
				if want := fmt.Sprint("line ", next, tail); line+"\n" != want {
					t.Fatalf("line %q, want %q", line, want)
				}
				next, rest = next+1, after
			}
		}
		if next != lines {
			t.Errorf("%d lines before idle, want %d", next, lines)
		}
		equal(t, "status", decode(t, p.answer(wire.Shell, id))["status"], `"ok"`)
	}
	if peak := memory(t, p.cmd.Process.Pid, "VmHWM"); peak > most && !raceDetector { // which takes several times as much
		t.Errorf("the kernel took %d MB, want %d at most", peak, most)
	} else {
		t.Logf("the kernel took %d MB", peak)
	}
	p.execute("1", nil)
	p.shutdown()
	if ends := <-read; ends != 3+2 { // of the large cells, of another and of the shutdown
		t.Errorf("who reads slowly heard idle %d times, want 5", ends)
	}
	if got := p.stderr.String(); strings.Count(got, "connection dropped") != 1 || !strings.Contains(got, "does not read") {
		t.Errorf("the log does not say that one was dropped: %s", got)
	}
	stuck.Close()
}
