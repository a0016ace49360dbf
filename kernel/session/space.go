package session

import (
	"math"
	"runtime/debug"
	"runtime/metrics"
	"sync"
	"sync/atomic"
	"time"
)

const (
	longCell = 250 * time.Millisecond
	wide     = 128 << 20 // bytes of garbage that may pile up while a cell runs long
	spare    = 32 << 20  // bytes that may be kept of the system although nobody may need them
)

// A space is the memory that a cell works in. The heap of a kernel is small, so interpreted code that allocates would have
// it collected twenty times a second, and each time everything stops until the system has let every thread have its say:
// milliseconds each where cells keep all cores busy, in which no heartbeat is answered. A cell that runs long therefore may
// leave more garbage before it is collected. When a cell has ended, what it has used much of goes back to the system.
type space struct {
	mu     sync.Mutex
	timer  *time.Timer
	normal int  // percentage before, while wide
	now    int  // percentage set, 0 while the space is not wide
	over   bool // the cell has ended

	settled *atomic.Uint64 // bytes that were held when memory was last given back
}

// newSpace is called when a cell begins.
func newSpace(settled *atomic.Uint64) *space {
	s := &space{settled: settled}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.timer = time.AfterFunc(longCell, s.widen)
	return s
}

// widen sets the percentage for the memory that is in use, again and again: what is right for a small heap would let a
// large one grow without bound.
func (s *space) widen() {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.over {
		return
	}
	s.timer.Reset(longCell)
	normal := s.normal
	if s.now == 0 {
		normal = int(min(metric("/gc/gogc:percent"), math.MaxInt32)) // the largest of all numbers stands for off
	}
	percent := max(normal, int(100*wide/max(metric("/gc/heap/live:bytes"), 1<<20)))
	if s.now == 0 && percent == normal || s.now > percent/2 && s.now < percent+percent/2 {
		return // each change stops everything, too
	}
	debug.SetGCPercent(percent)
	s.normal, s.now = normal, percent
}

// end is called when the cell has been answered.
func (s *space) end() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.over = true
	s.timer.Stop()
	if s.now != 0 {
		debug.SetGCPercent(s.normal)
	}
	h := held()
	if h < s.settled.Load() {
		s.settled.Store(h)
	}
	if s.now != 0 || h > s.settled.Load()+spare {
		go func() {
			debug.FreeOSMemory()
			s.settled.Store(held())
		}()
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
