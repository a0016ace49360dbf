package session

import (
	"math"
	"runtime/debug"
	"runtime/metrics"
	"sync"
	"time"
)

const (
	longCell = 250 * time.Millisecond
	narrow   = 24 << 20  // bytes of garbage that may pile up
	wide     = 128 << 20 // and while a cell runs long
	spare    = 32 << 20  // bytes that may be kept of the system although nobody may need them
	smallest = 8 << 20   // bytes that a kernel uses at least
)

// A space is the memory that cells work in. The heap of a kernel is small, so with the runtime's rule, as much garbage as
// there is live memory, interpreted code that allocates would have it collected twenty times a second. Each time everything
// stops until the system has let every thread have its say: milliseconds where cells keep all cores busy, in which no
// heartbeat is answered. So a little garbage may always pile up, and more while a cell runs long; a large heap is collected
// as ever. When a cell has ended, what it has used much of goes back to the system.
type space struct {
	mu      sync.Mutex
	lowest  int         // percentage with which the process was started
	percent int         // as it is set
	timer   *time.Timer // of the cell that runs, or nil
	settled uint64      // bytes that were held when memory was last given back
}

func newSpace() *space {
	s := &space{lowest: int(min(metric("/gc/gogc:percent"), math.MaxInt32))} // the largest of all numbers stands for off
	s.percent = s.lowest
	s.allow(narrow)
	return s
}

// close leaves the process as it was.
func (s *space) close() { debug.SetGCPercent(s.lowest) }

// begin is called when a cell begins.
func (s *space) begin() {
	s.mu.Lock()
	defer s.mu.Unlock()
	var timer *time.Timer
	timer = time.AfterFunc(longCell, func() {
		s.mu.Lock()
		defer s.mu.Unlock()
		if s.timer == timer {
			s.allow(wide)
			timer.Reset(longCell) // what is right for a small heap would let a large one grow without bound
		}
	})
	s.timer = timer
}

// end is called when the cell has been answered.
func (s *space) end() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.timer.Stop()
	s.timer = nil
	s.allow(narrow)
	h := held()
	s.settled = min(s.settled, h)
	if h > s.settled+spare {
		s.settled = h // until it is known
		go func() {
			debug.FreeOSMemory()
			s.mu.Lock()
			defer s.mu.Unlock()
			s.settled = held()
		}()
	}
}

// allow lets so many bytes of garbage pile up, for the memory that is in use, with mu held. Each change stops everything,
// too, so small ones are not made.
func (s *space) allow(garbage uint64) {
	percent := max(s.lowest, int(100*garbage/max(metric("/gc/heap/live:bytes"), smallest)))
	if s.percent < percent/2 || s.percent > percent+percent/2 {
		debug.SetGCPercent(percent)
		s.percent = percent
	}
}

// held is how much memory the heap has of the system.
func held() uint64 {
	sample := []metrics.Sample{{Name: "/memory/classes/heap/objects:bytes"}, {Name: "/memory/classes/heap/free:bytes"}}
	metrics.Read(sample)
	return sample[0].Value.Uint64() + sample[1].Value.Uint64()
}

func metric(name string) uint64 {
	sample := []metrics.Sample{{Name: name}}
	metrics.Read(sample)
	return sample[0].Value.Uint64()
}
