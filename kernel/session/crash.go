package session

import (
	"bufio"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"runtime/debug"
	"strings"
)

// crashSuffix names the file beside the connection file in which the runtime writes why the process dies. The next
// kernel on the same connection file, which a front end starts when one has died, says it to the reader.
const crashSuffix = ".linewright-crash"

// A crash is the crash file of this process.
type crash struct {
	path   string
	notice string // what the reader should know about the kernel before; "" where that one ended well
}

// openCrash reads what the last kernel left and lets the runtime write to the file. Without a file the kernel goes on.
func openCrash(connectionFile string, log *slog.Logger) *crash {
	c := &crash{path: strings.TrimSuffix(connectionFile, ".json") + crashSuffix}
	c.notice = notice(c.path)
	sweep(filepath.Dir(c.path))
	f, err := os.OpenFile(c.path, os.O_CREATE|os.O_TRUNC|os.O_WRONLY, 0o600)
	if err == nil {
		defer f.Close()
		err = debug.SetCrashOutput(f, debug.CrashOptions{}) // keeps a descriptor of its own
	}
	if err != nil {
		log.Warn("no crash file: a fatal error of this kernel will go unexplained", "error", err)
		c.path = ""
	}
	return c
}

// notice tells the first line of a crash file, which says what happened; the rest are stacks.
func notice(path string) string {
	f, err := os.Open(path)
	if err != nil {
		return ""
	}
	defer f.Close()
	lines := bufio.NewScanner(io.LimitReader(f, 64<<10))
	for lines.Scan() {
		if why := strings.TrimSpace(lines.Text()); why != "" {
			return fmt.Sprintf("linewright: the kernel before this one died: %s\nIts variables are gone; run the cells from the top.\n", strings.ToValidUTF8(why, "\ufffd"))
		}
	}
	return "" // empty: it was killed, which is how some front ends restart
}

// close removes the file: the kernel ends in order. Twice does no harm.
func (c *crash) close() {
	if c.path != "" {
		debug.SetCrashOutput(nil, debug.CrashOptions{})
		os.Remove(c.path)
		c.path = ""
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
