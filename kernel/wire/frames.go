package wire

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// The flags of a ZMTP 3 frame.
const (
	flagMore    = 1
	flagLong    = 2
	flagCommand = 4
)

var errFlags = errors.New("reserved flags in a frame's header")

// readFrameHeader reads flags and size of the next frame.
func readFrameHeader(r io.Reader) (flags byte, size uint64, err error) {
	var b [9]byte
	if _, err := io.ReadFull(r, b[:2]); err != nil {
		return 0, 0, err
	}
	flags = b[0]
	if flags&^(flagMore|flagLong|flagCommand) != 0 {
		return 0, 0, errFlags
	}
	if flags&flagLong == 0 {
		return flags, uint64(b[1]), nil
	}
	if _, err := io.ReadFull(r, b[2:9]); err != nil {
		return 0, 0, err
	}
	return flags, binary.BigEndian.Uint64(b[1:9]), nil
}

// appendFrameHeader appends the header of a frame of that size.
func appendFrameHeader(b []byte, flags byte, size int) []byte {
	if size <= 255 {
		return append(b, flags, byte(size))
	}
	return binary.BigEndian.AppendUint64(append(b, flags|flagLong), uint64(size))
}

// appendBody appends size bytes of r to b. It makes room as they come: a peer that announces much and sends little costs
// little.
func appendBody(b []byte, r io.Reader, size uint64) ([]byte, error) {
	for size > 0 {
		step := int(min(size, uint64(max(64<<10, len(b)))))
		at := len(b)
		b = append(b, make([]byte, step)...)
		if _, err := io.ReadFull(r, b[at:]); err != nil {
			return nil, err
		}
		size -= uint64(step)
	}
	return b, nil
}

// A meter follows frames that are written piece by piece, and knows where messages begin and end. Commands count as
// messages.
type meter struct {
	head  []byte // of the frame whose header is not complete
	left  uint64 // bytes of the frame's body still to come
	inner bool   // inside a message: after its first byte and before its last
	size  int    // bytes of bodies in the message so far
}

// write follows p and calls done with the size of every message that ends in it.
func (m *meter) write(p []byte, done func(size int)) {
	for len(p) > 0 {
		if m.left == 0 {
			m.inner = true
			m.head = append(m.head, p[0])
			p = p[1:]
			if len(m.head) < 2 || m.head[0]&flagLong != 0 && len(m.head) < 9 {
				continue
			}
			m.left = uint64(m.head[1])
			if m.head[0]&flagLong != 0 {
				m.left = binary.BigEndian.Uint64(m.head[1:])
			}
			m.size += int(m.left)
		} else {
			n := min(m.left, uint64(len(p)))
			m.left -= n
			p = p[n:]
		}
		if m.left == 0 {
			if m.head[0]&flagMore == 0 {
				done(m.size)
				m.inner, m.size = false, 0
			}
			m.head = m.head[:0]
		}
	}
}

// limits bounds what a peer of one channel may send and leave unread.
type limits struct {
	message uint64 // bytes of one message, all frames together
	frames  int    // frames of one message
	backlog int    // bytes that wait for the peer before it counts as full
	patient bool   // whether senders wait for a full peer that is reading
}

// A message that breaks these is no message of Jupyter's. 256 MB of one message leaves room for large widget buffers.
var (
	requestLimits   = limits{message: 256 << 20, frames: 4096, backlog: 64 << 20}
	heartbeatLimits = limits{message: 64 << 10, frames: 16, backlog: 1 << 20}
	broadcastLimits = limits{message: 1 << 10, frames: 1, backlog: 64 << 20, patient: true}
)

func (l limits) check(size uint64, frames int) error {
	if size > l.message {
		return fmt.Errorf("a message of %d bytes or more, above %d", size, l.message)
	}
	if frames > l.frames {
		return fmt.Errorf("a message of more than %d frames", l.frames)
	}
	return nil
}
