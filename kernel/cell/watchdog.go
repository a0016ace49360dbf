package cell

import (
	"errors"
	"runtime/metrics"
	"time"
)

// Runaway recursion of interpreted code fills a Go stack of 1 GB in about a second, and that is fatal and cannot be
// caught. The watchdog looks at the memory of all stacks while cells' code runs, and stops that code in time.

const (
	stackLimit    = 192 << 20 // bytes of all stacks together
	watchInterval = 5 * time.Millisecond
)

var errStack = errors.New("stack overflow: the running code used over 192 MB of stack, as a recursion without an end does; all running code was stopped")

// watch starts the watchdog unless it is awake.
func (in *Interpreter) watch() {
	if in.watching.CompareAndSwap(false, true) {
		time.AfterFunc(watchInterval, in.look)
	}
}

// look is one look of the watchdog. It goes to sleep when no cell runs and no goroutine of cells is left.
func (in *Interpreter) look() {
	idle := in.running.TryLock()
	if idle {
		defer in.running.Unlock()
		if in.goroutines.others.Load() == 0 {
			in.watching.Store(false)
			return
		}
	}
	if stacks() > stackLimit {
		if !idle {
			in.current.Load().cancel(errStack)
		} else {
			// No cell runs, so this is the work of goroutines that cells have left.
			for _, r := range in.goroutines.runs() {
				r.out.Stream("stderr", []byte("goroutine: "+errStack.Error()+"\n"))
			}
			done := make(chan error, 1)
			done <- nil
			r := in.current.Load()
			r.cancel(errStack)
			in.stop(r, done)
			<-in.settled
		}
	}
	time.AfterFunc(watchInterval, in.look)
}

func stacks() uint64 {
	sample := []metrics.Sample{{Name: "/memory/classes/heap/stacks:bytes"}}
	metrics.Read(sample)
	return sample[0].Value.Uint64()
}
