package spectrum

import (
	"context"
	"fmt"
)

// level brings an irreducible machine to edges that all emit the same number of waveforms: as it stands if they do
// (block codes), otherwise one waveform an edge. Probabilities of a step are then probabilities per unit of time, as
// the averages of variable-length codes must be taken (Cariolaro, Pierobon and Pupolin 1982).
func (m *machine) level(ctx context.Context) (*machine, int, error) {
	lo, hi := len(m.edges[0].word), 0
	for _, e := range m.edges {
		lo, hi = min(lo, len(e.word)), max(hi, len(e.word))
	}
	if hi == 0 {
		return nil, 0, fmt.Errorf("spectrum: the data can end in %d states that emit no symbols for ever; the waveform has no power spectrum", m.states)
	}
	if lo == hi {
		return m, lo, nil
	}
	if lo == 0 {
		var err error
		if m, err = m.speak(ctx); err != nil {
			return nil, 0, err
		}
	}
	return m.expand(), 1, nil
}

// speak eliminates the edges that emit nothing: a state s that is reached silently is passed through, its silent loop
// (the probability left for its other edges is 1 - loop) summed as a geometric series. It is Gaussian elimination, and
// the sums of positive numbers lose no digits (Grassmann, Taksar and Heyman 1985).
func (m *machine) speak(ctx context.Context) (*machine, error) {
	type key struct {
		to   int32
		word string
	}
	rows := make([]map[key]float64, m.states)
	order := make([][]key, m.states) // the keys of a row in order of arrival: results do not depend on a map's order
	words := map[string][]int32{}
	add := func(s int32, k key, p float64) {
		if rows[s] == nil {
			rows[s] = map[key]float64{}
		}
		if _, ok := rows[s][k]; !ok {
			order[s] = append(order[s], k)
		}
		rows[s][k] += p
	}
	silent := make([][]int32, m.states) // states with a silent edge to this one, some perhaps twice or no longer
	for _, e := range m.edges {
		w := spell(e.word)
		words[w] = e.word
		add(e.from, key{e.to, w}, e.p)
		if w == "" {
			silent[e.to] = append(silent[e.to], e.from)
		}
	}
	for s := range int32(m.states) {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		if len(silent[s]) == 0 {
			continue
		}
		self := key{s, ""}
		rest := 0.0
		for _, k := range order[s] {
			if k != self {
				rest += rows[s][k]
			}
		}
		for _, u := range silent[s] {
			p, ok := rows[u][self]
			if !ok || p == 0 || u == s {
				continue
			}
			rows[u][self] = 0
			for _, k := range order[s] {
				if q := rows[s][k]; k != self && q > 0 {
					add(u, k, p*q/rest)
					if k.word == "" {
						silent[k.to] = append(silent[k.to], u)
					}
				}
			}
		}
		if _, ok := rows[s][self]; ok {
			rows[s][self] = 0
			for _, k := range order[s] {
				rows[s][k] /= rest
			}
		}
	}
	out := &machine{states: m.states}
	for s := range int32(m.states) {
		for _, k := range order[s] {
			if p := rows[s][k]; p > 0 {
				out.edges = append(out.edges, edge{s, k.to, p, words[k.word]})
			}
		}
	}
	return out.recurrent(), nil
}

// recurrent drops the states that nothing enters any more, which passing through silent states leaves behind.
func (m *machine) recurrent() *machine {
	entered := make([]bool, m.states)
	for again := true; again; {
		again = false
		clear(entered)
		for _, e := range m.edges {
			entered[e.to] = true
		}
		kept := m.edges[:0]
		for _, e := range m.edges {
			if entered[e.from] {
				kept = append(kept, e)
			} else {
				again = true
			}
		}
		m.edges = kept
	}
	place := make([]int32, m.states)
	n := int32(0)
	for s, in := range entered {
		if in {
			place[s] = n
			n++
		}
	}
	for i := range m.edges {
		m.edges[i].from, m.edges[i].to = place[m.edges[i].from], place[m.edges[i].to]
	}
	m.states = int(n)
	return m
}

// expand cuts every edge into edges of one waveform. The states in between are shared by edges that have the same rest
// before them.
func (m *machine) expand() *machine {
	type rest struct {
		to   int32
		word string
	}
	out := &machine{states: m.states}
	known := map[rest]int32{}
	for _, e := range m.edges {
		from, p := e.from, e.p
		for k := range e.word {
			next := e.to
			fresh := false
			if left := e.word[k+1:]; len(left) > 0 {
				r := rest{e.to, spell(left)}
				n, ok := known[r]
				if !ok {
					n = int32(out.states)
					out.states++
					known[r] = n
					fresh = true
				}
				next = n
			}
			out.edges = append(out.edges, edge{from, next, p, e.word[k : k+1]})
			if k+1 < len(e.word) && !fresh {
				break // the rest stands already
			}
			from, p = next, 1
		}
	}
	return out
}

// spell makes a word a map's key.
func spell(word []int32) string {
	b := make([]byte, 0, 4*len(word))
	for _, w := range word {
		b = append(b, byte(w), byte(w>>8), byte(w>>16), byte(w>>24))
	}
	return string(b)
}
