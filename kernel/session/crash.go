package session

import (
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
)

// crashSuffix names the file beside the connection file in which the runtime writes why the process dies. The next
// kernel on the same connection file, which a front end starts when one has died, says it to the reader.
const crashSuffix = ".linewright-crash"

// A crash is the crash file of this process. The runtime writes to descriptor 2, and that leads to the file.
// debug.SetCrashOutput is not enough: with Go 1.26 it gets the stacks of a fatal error (concurrent use of a map, a mutex
// unlocked twice) but not the line that names it, which is written before.
type crash struct {
	path   string
	file   *os.File // nil where none can be written
	notice string   // what the reader should know about the kernel before; "" where that one ended well
	told   int64    // bytes of the file that a cell has shown; owned by whoever settles
}

// openCrash reads what the last kernel left and lets descriptor 2 lead to the file. Without a file the kernel goes on.
func openCrash(connectionFile string, log *slog.Logger) *crash {
	c := &crash{path: strings.TrimSuffix(connectionFile, ".json") + crashSuffix}
	c.notice = notice(c.path)
	sweep(filepath.Dir(c.path))
	f, err := os.OpenFile(c.path, os.O_CREATE|os.O_TRUNC|os.O_RDWR|os.O_APPEND, 0o600)
	if err == nil {
		if err = leadErrors(f); err != nil {
			f.Close()
		}
	}
	if err != nil {
		log.Warn("no crash file: a fatal error of this kernel will go unexplained", "error", err)
		return c
	}
	c.file = f
	return c
}

// rest returns what has been written to descriptor 2 since the last call: the built-in println of compiled code does.
func (c *crash) rest() []byte {
	if c.file == nil {
		return nil
	}
	info, err := c.file.Stat()
	if err != nil || info.Size() <= c.told {
		return nil
	}
	text, _ := io.ReadAll(io.NewSectionReader(c.file, c.told, info.Size()-c.told))
	c.told += int64(len(text))
	return text
}

// notice finds the line of a crash file that says what happened.
func notice(path string) string {
	f, err := os.Open(path)
	if err != nil {
		return ""
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, 16<<20))
	if err != nil {
		return ""
	}
	for line := range strings.Lines(string(text)) {
		for _, start := range []string{"fatal error: ", "panic: ", "SIG"} {
			if strings.HasPrefix(line, start) {
				why := strings.ToValidUTF8(strings.TrimSpace(line), "\ufffd")
				return fmt.Sprintf("linewright: the kernel before this one died: %s\nIts variables are gone; run the cells from the top.\n", why)
			}
		}
	}
	return "" // it was killed, which is how some front ends restart
}

// close removes the file: the kernel ends in order. Twice does no harm. Descriptor 2 has been led back before.
func (c *crash) close() {
	if c.file != nil {
		c.file.Close()
		os.Remove(c.path)
		c.file = nil
	}
}

// sweep removes crash files whose connection file is gone: no kernel will read them.
func sweep(dir string) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return
	}
	for _, e := range entries {
		name, ok := strings.CutSuffix(e.Name(), crashSuffix)
		if !ok {
			continue
		}
		if _, err := os.Stat(filepath.Join(dir, name+".json")); os.IsNotExist(err) {
			if _, err := os.Stat(filepath.Join(dir, name)); os.IsNotExist(err) { // a connection file without a suffix
				os.Remove(filepath.Join(dir, e.Name()))
			}
		}
	}
}
