package session

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"sync"
	"time"
	"unicode/utf8"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

const (
	collectFor  = 50 * time.Millisecond // how long text waits for more
	collectSize = 64 << 10              // bytes at which it does not
)

// textLimit is how many bytes of text one cell may send to the front ends. All of it is in a file when there is more.
const textLimit = 64 << 20

// An output is what one cell puts out, under the request that started it. It implements [cell.Output].
type output struct {
	k          *kernel
	ctx        context.Context // of the cell
	request    *wire.Message
	allowStdin bool

	mu      sync.Mutex
	text    [2][]byte   // of stdout and stderr, not sent yet; guarded by mu
	timer   *time.Timer // runs while text waits; guarded by mu
	waiting bool        // whether it runs; guarded by mu
	sent    int         // bytes of text taken; guarded by mu
	record  record      // guarded by mu
}

var _ cell.Output = (*output)(nil)

var streams = [2]string{"stdout", "stderr"}

func newOutput(k *kernel, ctx context.Context, request *wire.Message, allowStdin bool) *output {
	o := &output{k: k, ctx: ctx, request: request, allowStdin: allowStdin}
	o.timer = time.AfterFunc(time.Hour, func() {
		o.mu.Lock()
		defer o.mu.Unlock()
		o.flush(false)
	})
	o.timer.Stop()
	return o
}

// Stream takes text of the interpreter. What compiled code wrote to the same descriptor before it comes first.
func (o *output) Stream(name string, p []byte) {
	o.k.capture.catchUp()
	which := 0
	if name == streams[1] {
		which = 1
	}
	o.write(which, p)
}

// write collects text.
func (o *output) write(which int, p []byte) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if len(o.text[1-which]) > 0 {
		o.flushOne(1-which, false) // the order between the two is kept
	}
	p = o.admit(p)
	o.text[which] = append(o.text[which], p...)
	switch {
	case len(o.text[which]) >= collectSize:
		o.flush(false)
	case !o.waiting && len(p) > 0:
		o.waiting = true
		o.timer.Reset(collectFor)
	}
}

// admit counts p and returns what of it may be sent, with mu held.
func (o *output) admit(p []byte) []byte {
	over := o.sent > textLimit
	room := max(textLimit-o.sent, 0)
	o.sent += len(p)
	o.record.add(p)
	if over || o.sent <= textLimit {
		return p[:min(len(p), room)]
	}
	// p crosses the line.
	where := "could not be kept: no file can be written"
	if path := o.record.keep(); path != "" {
		where = "is in " + path
	}
	return fmt.Appendf(p[:room:room], "\n[linewright: this cell has put out %d MB of text; the rest is not shown here, the whole %s]\n", textLimit>>20, where)
}

// flush sends the text that waits, with mu held. The beginning of a character whose rest has not come waits on, unless
// nothing more will come.
func (o *output) flush(whole bool) {
	o.flushOne(0, whole)
	o.flushOne(1, whole)
	if o.waiting {
		o.waiting = false
		o.timer.Stop()
	}
}

func (o *output) flushOne(which int, whole bool) {
	text := o.text[which]
	n := len(text)
	if !whole {
		n -= unfinished(text)
	}
	if n == 0 {
		return
	}
	content := make([]byte, 0, n+n/8+64)
	content = append(content, `{"name":"`...)
	content = append(content, streams[which]...)
	content = append(content, `","text":`...)
	content = append(appendText(content, text[:n]), '}')
	o.text[which] = append([]byte(nil), text[n:]...)
	if cap(text) <= 2*collectSize {
		o.text[which] = append(text[:0], text[n:]...)
	}
	o.k.publish(o.request, "stream", json.RawMessage(content))
}

// unfinished returns how many bytes at the end of text are the beginning of a character.
func unfinished(text []byte) int {
	for n := 1; n <= min(len(text), utf8.UTFMax-1); n++ {
		if tail := text[len(text)-n:]; utf8.RuneStart(tail[0]) {
			if utf8.FullRune(tail) {
				return 0
			}
			return n
		}
	}
	return 0
}

// send publishes a message of the cell behind the text that came before it.
func (o *output) send(kind string, content any) {
	o.k.capture.catchUp()
	o.mu.Lock()
	defer o.mu.Unlock()
	o.flush(false)
	o.k.publish(o.request, kind, content)
}

// finish sends what waits. Text that comes later, of goroutines, is counted anew.
func (o *output) finish() {
	o.k.capture.settle()
	o.mu.Lock()
	defer o.mu.Unlock()
	o.flush(true)
	if o.sent > textLimit {
		const format = "[linewright: %d bytes of text in all, %d not shown]\n"
		note := fmt.Appendf(nil, format, o.sent, o.sent-textLimit)
		o.text[1] = append(o.text[1], note...)
		o.flush(true)
	}
	o.sent = 0
	o.record.end()
}

// Display implements [cell.Output].
func (o *output) Display(b plotting.Bundle, id string, update bool) {
	kind := "display_data"
	if update {
		kind = "update_display_data"
	}
	transient := map[string]string{}
	if id != "" {
		transient["display_id"] = id
	}
	o.send(kind, raw(map[string]any{"transient": transient}, b))
}

// Clear implements [cell.Output].
func (o *output) Clear(wait bool) { o.send("clear_output", map[string]bool{"wait": wait}) }

// Exit ends the process with that code when everything that was put out has reached the front ends. It is how os.Exit of
// a cell ends, and it does not return.
func (o *output) Exit(code int) {
	o.finish()
	o.k.publish(o.request, "status", status{"idle"})
	o.k.wire.Drain(linger)
	o.k.exit(code)
}

// spoolFrom is the number of bytes from which a cell's text is kept in a file beside being sent.
const spoolFrom = 1 << 20

// A record keeps all text of a cell as long as it may still grow beyond what is sent. Only a file that was asked for
// outlives the cell.
type record struct {
	head   []byte   // the text, while it is short
	file   *os.File // the text, when it is not
	kept   bool
	failed bool
}

func (r *record) add(p []byte) {
	if r.failed {
		return
	}
	if r.file == nil {
		if len(r.head)+len(p) <= spoolFrom {
			r.head = append(r.head, p...)
			return
		}
		f, err := os.CreateTemp("", "linewright-*.txt")
		if err != nil {
			r.fail()
			return
		}
		r.file = f
		if _, err := f.Write(r.head); err != nil {
			r.fail()
			return
		}
		r.head = nil
	}
	if _, err := r.file.Write(p); err != nil {
		r.fail()
	}
}

// keep lets the file outlive the cell and returns its path, or "" where there is none.
func (r *record) keep() string {
	if r.failed || r.file == nil {
		return ""
	}
	r.kept = true
	return r.file.Name()
}

// fail gives up, for instance on a full disk.
func (r *record) fail() {
	r.failed, r.kept = true, false
	r.head = nil
	r.remove()
}

func (r *record) remove() {
	if r.file != nil {
		r.file.Close()
		if !r.kept {
			os.Remove(r.file.Name())
		}
		r.file = nil
	}
}

// end forgets the text.
func (r *record) end() {
	r.remove()
	*r = record{}
}
