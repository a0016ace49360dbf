package session

import (
	"context"
	"encoding/json"
	"fmt"
	"sync"
	"time"
	"unicode/utf8"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

const (
	collectFor  = 50 * time.Millisecond // how long text waits for more
	collectSize = 64 << 10              // bytes at which it does not, at first
	collectMost = 512 << 10             // and where much follows: each message costs a front end more than its bytes do
)

// textLimit is how many bytes of text one cell may send to the front ends. All of it is in a file when there is more.
const textLimit = 64 << 20

// An output is what one cell puts out, under the request that started it. It implements [cell.Output].
type output struct {
	k          *kernel
	ctx        context.Context // of the cell
	request    *wire.Message
	allowStdin bool

	mu     sync.Mutex
	text   [2][]byte   // of stdout and stderr, not sent yet; guarded by mu
	timer  *time.Timer // runs while text waits, else nil; guarded by mu
	step   int         // bytes at which text does not wait; guarded by mu
	taken  int         // bytes of text so far, sent or not; guarded by mu
	record record      // guarded by mu
}

var _ cell.Output = (*output)(nil)

var streams = [2]string{"stdout", "stderr"}

func newOutput(k *kernel, ctx context.Context, request *wire.Message, allowStdin bool) *output {
	return &output{k: k, ctx: ctx, request: request, allowStdin: allowStdin, step: collectSize}
}

// Stream takes text of the interpreter. What compiled code wrote to the same descriptor before it comes first.
func (o *output) Stream(name string, p []byte) {
	o.k.capture.glance()
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
	case len(o.text[which]) >= o.step:
		o.flush(false)
		o.step = min(2*o.step, collectMost)
	case o.timer == nil && len(p) > 0:
		o.timer = time.AfterFunc(collectFor, func() {
			o.mu.Lock()
			defer o.mu.Unlock()
			o.flush(false)
			o.step = collectSize
		})
	}
}

// admit counts p and returns what of it may be sent, with mu held.
func (o *output) admit(p []byte) []byte {
	over := o.taken > textLimit
	room := max(textLimit-o.taken, 0)
	o.taken += len(p)
	o.record.add(p)
	if over || o.taken <= textLimit {
		return p[:min(len(p), room)]
	}
	// p crosses the line.
	where := "is not kept: " + o.record.lost
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
	if o.timer != nil {
		o.timer.Stop()
		o.timer = nil
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
	rest := text[n:]
	if cap(text) > 2*collectMost {
		text = nil // a large buffer is not kept for what may be little
	}
	o.text[which] = append(text[:0], rest...)
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
	if o.taken > textLimit {
		o.record.write()
		note := fmt.Appendf(nil, "[linewright: %d bytes of text in all, %d not shown", o.taken, o.taken-textLimit)
		if o.record.kept && o.record.size < o.taken {
			note = fmt.Appendf(note, ", the first %d in the file", o.record.size)
		}
		o.text[1] = append(o.text[1], append(note, "]\n"...)...)
		o.flush(true)
	}
	o.taken = 0
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
