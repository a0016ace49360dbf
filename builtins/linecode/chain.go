package linecode

import (
	"context"
	"fmt"

	"linewright/builtins/internal/markov"
	"linewright/builtins/page"
)

// A Chain is a Markov chain that emits symbols: the joint machine of an encoder and the model of its data, or one
// given edge by edge. It is what the exact spectrum is computed from.
type Chain struct {
	Name   string    // of the code and its data, for labels
	States int       // states are 0 .. States-1
	Start  []float64 // probability of starting in each state; nil means state 0
	Edges  []Edge    // in any order; the probabilities that leave a state add up to 1
}

// An Edge of a [Chain] is one step: with probability P the chain goes from From to To and emits Levels.
type Edge struct {
	From   int       // state before the step
	To     int       // state after it
	P      float64   // probability of the step, given From
	Levels []float64 // symbol levels in order of time; may be empty
	Bits   int       // source bits that the step consumes
}

// maxEdges is the size above which a joint chain is refused: its edges then take about 1 GB.
const maxEdges = 1 << 24

// Chain returns the joint Markov chain of the encoder and its data, one step a word. A joint state is a state of the
// encoder with one of the data's model; those that the data cannot reach are left out, and so are words of probability
// zero. States are numbered in the order in which they are found, breadth first from the start in the order of the
// words, and the edges are in the order of their states and words.
//
// The chain is made once and shared: read only. Chain panics if it would have more than 2^24 edges, and when the running
// cell is interrupted.
func (c *Code) Chain() *Chain {
	c.made().mu.Lock()
	defer c.mu.Unlock()
	if c.joint == nil {
		joint, err := c.join(page.Context(), maxEdges)
		if err != nil {
			panic(err)
		}
		c.joint = joint
	}
	return c.joint
}

// join makes the joint chain, of no more than about limit edges.
func (c *Code) join(ctx context.Context, limit int) (*Chain, error) {
	m, data := c.machine, c.data
	chain := &Chain{Name: c.Label()}
	type pair struct{ state, data int }
	number := make(map[pair]int)
	var pairs []pair
	enter := func(p pair) int {
		n, ok := number[p]
		if !ok {
			n = len(pairs)
			number[p] = n
			pairs = append(pairs, p)
		}
		return n
	}
	for q, p := range data.Initial() {
		if p > 0 {
			enter(pair{0, q})
			chain.Start = append(chain.Start, p)
		}
	}
	// words walks the tree of the words that the data can give from state q.
	var words func(from, bits, word, q int, p float64)
	words = func(from, bits, word, q int, p float64) {
		if p == 0 {
			return
		}
		if bits == m.bits {
			step := pairs[from].state<<m.bits | word
			to := enter(pair{int(m.next[step]), q})
			chain.Edges = append(chain.Edges, Edge{from, to, p, m.outputs.levelsOf(m.output[step]), m.bits})
			return
		}
		one := data.One(q)
		words(from, bits+1, word<<1, data.Next(q, 0), p*(1-one))
		words(from, bits+1, word<<1|1, data.Next(q, 1), p*one)
	}
	for from := 0; from < len(pairs); from++ {
		if from&(1<<8-1) == 0 && ctx.Err() != nil {
			return nil, interrupted(ctx, "joining the data to", c.name)
		}
		words(from, 0, 0, pairs[from].data, 1)
		if len(chain.Edges) > limit {
			return nil, fmt.Errorf("linecode: %s with %v gives a chain of more than %d edges (%d states of the code, %d of the data, %d words); take a smaller code or data with fewer states",
				c.name, data, limit, m.states, data.States(), m.words())
		}
	}
	chain.States = len(pairs)
	chain.Start = append(chain.Start, make([]float64, len(pairs)-len(chain.Start))...)
	return chain, nil
}

// graph returns the chain without its symbols.
func (ch *Chain) graph() *markov.Graph {
	return markov.New(ch.States, len(ch.Edges), func(i int) (from, to int, p float64) {
		e := &ch.Edges[i]
		return e.From, e.To, e.P
	})
}
