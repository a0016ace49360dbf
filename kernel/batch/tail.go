package batch

import (
	"strings"
	"sync"
)

// tailSize is how much of a kernel's log is kept, in bytes.
const tailSize = 16 << 10

// tail keeps the end of a log.
type tail struct {
	mu  sync.Mutex
	end []byte // guarded by mu
}

func (t *tail) Write(b []byte) (int, error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.end = append(t.end, b...)
	if over := len(t.end) - tailSize; over > 0 {
		t.end = append(t.end[:0], t.end[over:]...)
	}
	return len(b), nil
}

// last returns the last line, or "".
func (t *tail) last() string {
	t.mu.Lock()
	defer t.mu.Unlock()
	text := strings.TrimSpace(string(t.end))
	return text[strings.LastIndexByte(text, '\n')+1:]
}
