package session

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
	"sync"

	"linewright/kernel/wire"
)

// session is the number of this session in a history: there is no other, since nothing is kept on disk.
const session = 1

// A history holds the cells that were numbered.
type history struct {
	mu    sync.Mutex
	cells []ran // guarded by mu
}

type ran struct {
	line   int // execution count
	input  string
	output *string // text/plain of its result; nil where there was none
}

func (h *history) add(r ran) {
	h.mu.Lock()
	defer h.mu.Unlock()
	h.cells = append(h.cells, r)
}

func (h *history) all() []ran {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.cells[:len(h.cells):len(h.cells)]
}

// tellHistory answers history_request: the last n cells, those of a range of lines, or those that match a glob.
func (k *kernel) tellHistory(m *wire.Message) (any, error) {
	var r struct {
		Output  bool
		Access  string `json:"hist_access_type"`
		Session int
		Start   int
		Stop    *int
		N       *int
		Pattern string
		Unique  bool
	}
	if err := read(m, &r); err != nil {
		return nil, err
	}
	cells := k.history.all()
	switch r.Access {
	case "tail", "":
		cells = last(cells, r.N)
	case "range":
		cells = between(cells, r.Session, r.Start, r.Stop)
	case "search":
		cells = last(search(cells, r.Pattern, r.Unique), r.N)
	default:
		return nil, fmt.Errorf("history_request: hist_access_type %q is not known; use tail, range or search", r.Access)
	}
	list := make([][3]any, len(cells))
	for i, c := range cells {
		list[i] = [3]any{session, c.line, c.input}
		if r.Output {
			list[i][2] = [2]any{c.input, c.output}
		}
	}
	return map[string]any{"status": "ok", "history": list}, nil
}

// last returns the last n cells; all of them without n.
func last(cells []ran, n *int) []ran {
	if n == nil || *n >= len(cells) {
		return cells
	}
	return cells[len(cells)-max(*n, 0):]
}

// between returns the cells with start <= line < stop. Session 0 is this one; negative numbers count back from it, and
// nothing is there.
func between(cells []ran, number, start int, stop *int) []ran {
	if number != 0 && number != session {
		return nil
	}
	var found []ran
	for _, c := range cells {
		if c.line >= start && (stop == nil || c.line < *stop) {
			found = append(found, c)
		}
	}
	return found
}

// search returns the cells whose whole text matches a glob; of equal texts only the last one if unique is set.
func search(cells []ran, glob string, unique bool) []ran {
	pattern := globPattern(glob)
	var found []ran
	seen := map[string]bool{}
	for i := len(cells) - 1; i >= 0; i-- {
		c := cells[i]
		if !pattern.MatchString(c.input) || unique && seen[c.input] {
			continue
		}
		seen[c.input] = true
		found = append(found, c)
	}
	slices.Reverse(found)
	return found
}

// globPattern translates a glob: * any text, ? any character, [abc] [a-z] [!a] [^a] one of a set. A bracket that is
// not closed, or whose set is none, stands for itself.
func globPattern(glob string) *regexp.Regexp {
	var b strings.Builder
	b.WriteString(`(?s)\A`)
	for i := 0; i < len(glob); i++ {
		switch c := glob[i]; c {
		case '*':
			b.WriteString(".*")
		case '?':
			b.WriteByte('.')
		case '[':
			if n := strings.IndexByte(glob[i+1:], ']'); n > 0 {
				if set := globSet(glob[i+1 : i+1+n]); set != "" {
					b.WriteString(set)
					i += n + 1
					continue
				}
			}
			b.WriteString(`\[`)
		default:
			j := i + 1
			for j < len(glob) && strings.IndexByte("*?[", glob[j]) < 0 {
				j++
			}
			b.WriteString(regexp.QuoteMeta(glob[i:j]))
			i = j - 1
		}
	}
	b.WriteString(`\z`)
	return regexp.MustCompile(b.String())
}

func globSet(set string) string {
	not := ""
	if set[0] == '!' || set[0] == '^' {
		not, set = "^", set[1:]
	}
	// Within brackets only these mean something to package regexp; "-" means the same to both.
	expr := "[" + not + strings.NewReplacer(`\`, `\\`, `[`, `\[`, `^`, `\^`).Replace(set) + "]"
	if _, err := regexp.Compile(expr); err != nil {
		return ""
	}
	return expr
}
