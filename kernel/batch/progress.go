package batch

import (
	"fmt"
	"io"
	"strings"
	"sync"
	"time"
)

// NewProgress returns a [Progress] that writes one line a cell: its number, its first line of code, and the seconds it
// took. On a terminal the line stands there while the cell runs, with the seconds so far.
func NewProgress(w io.Writer, terminal bool) Progress {
	return &lineProgress{w: w, terminal: terminal}
}

type lineProgress struct {
	w        io.Writer
	terminal bool

	running sync.WaitGroup // of the goroutine that counts the seconds
	stop    chan struct{}  // closed when the cell ends
}

// redraw goes back to the start of a terminal's line and erases it.
const redraw = "\r\x1b[K"

func (p *lineProgress) Begin(number, total int, c *Cell) {
	if !p.terminal {
		return
	}
	began := time.Now()
	draw := func() {
		fmt.Fprint(p.w, redraw+progressLine(number, total, c, time.Since(began).Truncate(time.Second)))
	}
	draw()
	p.stop = make(chan struct{})
	p.running.Go(func() {
		tick := time.NewTicker(time.Second)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				draw()
			case <-p.stop:
				return
			}
		}
	})
}

func (p *lineProgress) End(number, total int, c *Cell, took time.Duration, err error) {
	line := progressLine(number, total, c, took)
	if p.terminal {
		close(p.stop)
		p.running.Wait()
		line = redraw + line
	}
	if err != nil {
		line += "  stopped"
	}
	fmt.Fprintln(p.w, line)
}

// titleWidth is the number of characters of code in a line of progress.
const titleWidth = 48

func progressLine(number, total int, c *Cell, took time.Duration) string {
	title := []rune(firstLine(c.Source))
	if len(title) > titleWidth {
		title = append(title[:titleWidth-1], '…')
	}
	return fmt.Sprintf("[%*d/%d] %-*s %7.2f s", len(fmt.Sprint(total)), number, total, titleWidth, string(title), took.Seconds())
}

// firstLine returns the line by which a reader knows a cell: the first that is code and no import, or the first at all.
func firstLine(source string) string {
	first := ""
	for l := range strings.Lines(source) {
		l = strings.Join(strings.Fields(l), " ")
		if l == "" {
			continue
		}
		if !strings.HasPrefix(l, "//") && !strings.HasPrefix(l, "import ") {
			return l
		}
		if first == "" {
			first = l
		}
	}
	return first
}
