package spectrum

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"testing"
	"time"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

type refCode struct {
	ID         string
	Definition struct {
		Type  string
		M, N  int
		Init  int
		Next  [][]int
		Out   [][][]float64
		Edges [][]any
	}
	Source struct {
		Type     string
		P1       *float64
		P01, P10 float64
	}
	Pulse   struct{ Duty, Offset float64 }
	Nu, Psd []float64
	Lines   [][2]float64
	Near    *struct {
		Nu, Psd []float64
	} `json:"near_dc"`
	MS float64 `json:"mean_square_symbol"`
}

func chainOf(c refCode) *linecode.Chain {
	ch := &linecode.Chain{Name: c.ID}
	d := c.Definition
	if d.Type == "chain" {
		for _, e := range d.Edges {
			var out []float64
			for _, v := range e[3].([]any) {
				out = append(out, v.(float64))
			}
			le := linecode.Edge{From: int(e[0].(float64)), To: int(e[1].(float64)), P: e[2].(float64), Levels: out, Bits: int(e[4].(float64))}
			ch.Edges = append(ch.Edges, le)
			ch.States = max(ch.States, le.From+1, le.To+1)
		}
		ch.Start = make([]float64, ch.States)
		ch.Start[d.Init] = 1
		return ch
	}
	p1 := func(last int) float64 {
		if c.Source.Type == "markov1" {
			if last == 0 {
				return c.Source.P01
			}
			return 1 - c.Source.P10
		}
		return *c.Source.P1
	}
	k := 1
	if c.Source.Type == "markov1" {
		k = 2
	}
	S := len(d.Next)
	ch.States = S * k
	for s := range S {
		for l := range k {
			for w := range 1 << d.M {
				p := 1.0
				last := l
				for b := d.M - 1; b >= 0; b-- {
					q := p1(last)
					if w>>b&1 == 1 {
						p *= q
						last = 1
					} else {
						p *= 1 - q
						last = 0
					}
				}
				if k == 1 {
					last = 0
				}
				ch.Edges = append(ch.Edges, linecode.Edge{From: s*k + l, To: d.Next[s][w]*k + last, P: p, Levels: d.Out[s][w], Bits: d.M})
			}
		}
	}
	ch.Start = make([]float64, ch.States)
	ch.Start[d.Init*k] = 1
	return ch
}

func refs(t testing.TB) []refCode {
	b, err := os.ReadFile("testdata/reference.json")
	if err != nil {
		t.Fatal(err)
	}
	var f struct{ Codes []refCode }
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	return f.Codes
}

func (p *PSD) form() string {
	f := p.parts[0].form
	if f == nil {
		return "none"
	}
	r := 0
	if f.rest != nil {
		r = len(f.rest.columns)
	}
	return fmt.Sprint("lags ", len(f.lags[0]), " rank ", r)
}

func TestDev(t *testing.T) {
	for _, c := range refs(t) {
		if c.Source.Type == "periodic" {
			continue
		}
		ch := chainOf(c)
		p, err := OfChain(ch, pulse.Train{Shape: pulse.Rect(c.Pulse.Duty)})
		if err != nil {
			t.Errorf("%s: %v", c.ID, err)
			continue
		}
		peak, worst := 0.0, 0.0
		for _, v := range c.Psd {
			peak = max(peak, v)
		}
		for i, nu := range c.Nu {
			got := p.At(nu) / 2
			e := math.Abs(got-c.Psd[i]) / (1e-9*c.Psd[i] + 1e-11*peak)
			worst = max(worst, e)
			if e > 1 {
				t.Errorf("%s nu %v got %v want %v", c.ID, nu, got, c.Psd[i])
			}
		}
		wn := 0.0
		if c.Near != nil {
			for i, nu := range c.Near.Nu {
				got := p.At(nu) / 2
				e := math.Abs(got-c.Near.Psd[i]) / c.Near.Psd[i]
				wn = max(wn, e)
				if e > 1e-9 {
					t.Errorf("%s NEAR nu %v got %v want %v", c.ID, nu, got, c.Near.Psd[i])
				}
			}
		}
		t0 := time.Now()
		sum := 0.0
		for _, e := range [][2]float64{{0, 0.1}, {0.1, 0.77}, {0.77, 3}, {3, 5.5}, {5.5, math.Inf(1)}} {
			sum += p.Power(e[0], e[1])
		}
		t1 := time.Now()
		bb := p.Power(0, 2000)
		t2 := time.Now()
		w := p.Within(0.99)
		t3 := time.Now()
		t.Log(c.ID, sum/p.Total()-1, bb/p.Total()-1, p.Power(0, 20)/p.Total(), w, len(p.plan.nu), t1.Sub(t0), t2.Sub(t1), t3.Sub(t2), p.form())
		lines := p.Lines(2)
		t.Log(c.ID, "worst", worst, "near", wn, "total", p.Total(), c.MS*c.Pulse.Duty, "lines", lines, c.Lines)
		if math.Abs(p.Total()-c.MS*c.Pulse.Duty) > 1e-12*c.MS {
			t.Errorf("%s total", c.ID)
		}
	}
}
