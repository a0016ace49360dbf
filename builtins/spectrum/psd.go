package spectrum

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"strings"
	"sync"
	"sync/atomic"

	"linewright/builtins/linecode"
	"linewright/builtins/page"
	"linewright/builtins/pulse"
)

// A PSD is the exact power spectrum of a coded pulse train: a one-sided continuous density in V^2/Hz and tones in V^2.
// It does not change once it is made and may be used from several goroutines.
type PSD struct {
	name  string
	drive *pulse.Drive
	basis []pulse.Shape // what all waveforms are sums of
	flat  bool          // the one basis shape is a full-width rectangle
	parts []part        // one for each closed class
	total float64       // V^2

	planned sync.Mutex
	plan    *plan // for integrals, made when first asked for
}

// A part is the spectrum of one closed class, in units of the drive's volts, squared, and of the symbol period.
type part struct {
	prob  float64 // of ending there
	tones *comb
	form  *form // of the basis coefficients; nil if they have no continuous part
	near  *null // nil if the density does not vanish at 0 Hz
}

// A Class is one of several closed classes that the data can end in.
type Class struct {
	Probability float64 // of ending there
	Spectrum    *PSD    // of a waveform that did
}

// Exact returns the exact spectrum of a code, fed as it is, sent by a train. It is an error if the train does not fit the
// code (pulse.Train.Drive), if the machine is too large for the method, and if data that repeat give symbols that do so
// only after more than 12,000,000; the message has the sizes.
//
// Where the data can end in one of several closed classes, density and tones are averaged with the probabilities of
// ending there, and [PSD.Classes] gives each.
//
// What does not depend on the train is kept with the code: the next train of the same code is quick.
func Exact(c *linecode.Code, t pulse.Train) (*PSD, error) {
	if c == nil {
		return nil, errors.New("spectrum: Exact got a nil code; look at the error that linecode.New or linecode.ByName returned")
	}
	d, err := t.Drive(c)
	if err != nil {
		return nil, err
	}
	return exact(page.Context(), c.Label(), d, func(ctx context.Context, p *PSD) error {
		if len(p.basis) == 1 {
			return p.recall(ctx, c)
		}
		return p.study(ctx, c)
	})
}

// OfChain is [Exact] for a chain that is given edge by edge.
func OfChain(ch *linecode.Chain, t pulse.Train) (*PSD, error) {
	if ch == nil {
		return nil, errors.New("spectrum: OfChain got a nil chain; give it states and edges")
	}
	if err := check(ch); err != nil {
		return nil, err
	}
	d, err := t.Drive(coder{ch})
	if err != nil {
		return nil, err
	}
	return exact(page.Context(), ch.Name, d, func(ctx context.Context, p *PSD) error { return p.analyse(ctx, ch) })
}

// exact makes the PSD whose parts, and basis if there is not one pulse for all levels, the function finds.
func exact(ctx context.Context, name string, d *pulse.Drive, find func(context.Context, *PSD) error) (*PSD, error) {
	p := &PSD{name: name, drive: d}
	shape, single := d.Single()
	if single {
		p.basis = []pulse.Shape{shape}
	}
	switch err := find(ctx, p); {
	case err != nil && ctx.Err() != nil:
		return nil, interrupted(ctx)
	case err != nil:
		return nil, err
	}
	// A shape of energy 1 whose overlap with the rectangle of energy 1 is 1 is that rectangle (Schwarz).
	p.flat = single && shape.Overlap(shape, 0) == 1 && shape.Overlap(pulse.Rect(1), 0) == 1
	for _, c := range p.parts {
		p.total += c.prob * p.square(&c) * p.volts2()
	}
	return p, nil
}

// study works out the parts of a code: from the symbols that come again and again if its data repeat, otherwise from its
// chain.
func (p *PSD) study(ctx context.Context, c *linecode.Code) error {
	symbols, err := c.Cycle(mostPeriod)
	if err != nil {
		return fmt.Errorf("spectrum: %w", err)
	}
	if symbols != nil {
		return p.repeat(ctx, c.Levels(), symbols)
	}
	ch, err := chainOf(c)
	if err != nil {
		return err
	}
	return p.analyse(ctx, ch)
}

// chainOf returns the code's chain. One that is too large, or an interrupt, panics there and is an error here.
func chainOf(c *linecode.Code) (ch *linecode.Chain, err error) {
	defer func() {
		switch r := recover().(type) {
		case nil:
		case error:
			err = fmt.Errorf("spectrum: %w", r)
		default:
			panic(r)
		}
	}()
	return c.Chain(), nil
}

// repeat is analyse for symbols, places in levels, that come again and again.
func (p *PSD) repeat(ctx context.Context, levels []float64, symbols []int32) error {
	x := newLexicon(p.drive)
	x.levels = levels
	waves, err := x.follow(ctx, symbols)
	if err != nil {
		return err
	}
	coef, lags, err := p.express(x)
	if err != nil {
		return err
	}
	part, err := recurrent(ctx, waves, coef, len(p.basis), lags)
	if err != nil {
		return err
	}
	p.parts = append(p.parts, *part)
	return nil
}

// analyse works out the parts of a chain.
func (p *PSD) analyse(ctx context.Context, ch *linecode.Chain) error {
	m, x, err := read(ctx, ch, p.drive)
	if err != nil {
		return err
	}
	coef, lags, err := p.express(x)
	if err != nil {
		return err
	}
	parts, prob := []*machine{m}, []float64{1}
	if _, ok := m.begin(); !ok || !m.single() {
		if parts, prob, err = m.closed(ctx); err != nil {
			return err
		}
	}
	for i, m := range parts {
		part, err := p.class(ctx, m, coef, lags)
		if err != nil {
			return err
		}
		part.prob = prob[i]
		p.parts = append(p.parts, *part)
	}
	return nil
}

// express gives the waveforms' coefficients in the basis, which it makes unless there is one pulse for all levels, and the
// number of lags at which they may overlap.
func (p *PSD) express(x *lexicon) (coef [][]float64, lags int, err error) {
	if p.basis == nil {
		p.basis, coef = waveforms(x.shapes)
	} else {
		for _, a := range x.levels {
			coef = append(coef, []float64{a})
		}
	}
	lags, err = p.reach()
	return coef, lags, err
}

// mostSymbols is the longest support of a waveform, in symbols.
const mostSymbols = 1 << 16

// reach is the number of lags at which two waveforms may overlap.
func (p *PSD) reach() (int, error) {
	far := 1.0
	for _, a := range p.basis {
		from, to := a.Support()
		if to-from > mostSymbols {
			return 0, fmt.Errorf("spectrum: a pulse from %v to %v symbols is too long; the limit is %d symbols", from, to, mostSymbols)
		}
		for _, b := range p.basis {
			_, to := b.Support()
			far = max(far, to-from)
		}
	}
	return int(math.Ceil(far)), nil
}

// waveforms expresses the shapes of symbols through few of them; several are brought to energy 1.
func waveforms(shapes []pulse.Shape) (basis []pulse.Shape, coef [][]float64) {
	basis, coef = pulse.Basis(shapes)
	switch len(basis) {
	case 0: // nothing but zero: any shape will do
		basis = []pulse.Shape{pulse.Rect(1)}
		for i := range coef {
			coef[i] = []float64{0}
		}
	case 1:
	default:
		for j, s := range basis {
			size := math.Sqrt(s.Overlap(s, 0))
			basis[j] = pulse.Scaled(s, 1/size)
			for i := range coef {
				coef[i][j] *= size
			}
		}
	}
	return basis, coef
}

// class computes the spectrum of one closed class, with so many lags for the time domain.
func (p *PSD) class(ctx context.Context, m *machine, coef [][]float64, lags int) (*part, error) {
	width := len(p.basis)
	if m.single() {
		s, _ := m.begin()
		return periodic(ctx, m, s, coef, width, lags)
	}
	m, length, err := m.level(ctx)
	if err != nil {
		return nil, err
	}
	if m, err = m.lump(ctx); err != nil {
		return nil, err
	}
	law, err := newLaw(ctx, m, length)
	if err != nil {
		return nil, fmt.Errorf("spectrum: %w", err)
	}
	symbols := law.symbols(width, coef)
	out := &part{}
	if out.tones, err = symbols.means(ctx, lags); err != nil {
		return nil, err
	}
	scale := symbols.power
	for j := range width {
		scale += out.tones.square(j)
	}
	if !symbols.zero(scale) {
		if out.form, out.near, err = symbols.densities(ctx, p.basis, scale, lags); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// square is the mean square of the waveform from the time domain: with P_ij(l) the mean of c_i(n) c_j(n+l) and O_ij(l)
// the overlap of basis shape i with basis shape j that comes l symbols later,
//
//	sum over i, j of P_ij(0) O_ij(0) + 2 sum over l > 0 of P_ij(l) O_ij(l).
func (p *PSD) square(c *part) float64 {
	w, lags := len(p.basis), c.tones.lags
	sum := 0.0
	for i, a := range p.basis {
		for j, b := range p.basis {
			for l := range lags {
				both := c.tones.power[(i*w+j)*lags+l]
				if c.form != nil {
					if r := c.form.lags[i*w+j]; l < len(r) {
						both += r[l]
					}
				}
				if l > 0 {
					both *= 2
				}
				if both != 0 {
					sum += both * a.Overlap(b, float64(l))
				}
			}
		}
	}
	return max(sum, 0)
}

func (p *PSD) volts2() float64 { return p.drive.Volts * p.drive.Volts }

// errNil is what a method of a nil PSD says: the error beside it was not looked at.
var errNil = errors.New("spectrum: this spectrum is nil; look at the error that Exact or OfChain returned")

// made returns the PSD. It panics if that is nil.
func (p *PSD) made() *PSD {
	if p == nil {
		panic(errNil)
	}
	return p
}

// Name returns the name of the code and its data.
func (p *PSD) Name() string { return p.made().name }

// SymbolRate returns the rate of symbols in Hz.
func (p *PSD) SymbolRate() float64 { return p.made().drive.SymbolRate }

// Load returns the load in ohms, 0 if the train does not state one.
func (p *PSD) Load() float64 { return p.made().drive.Load }

// Total returns the mean square of the waveform in V^2. It comes from the time domain.
func (p *PSD) Total() float64 { return p.made().total }

// Classes returns the closed classes that the data can end in, with the probability and the spectrum of each; nil if
// there is one class only. The PSD itself is their average.
func (p *PSD) Classes() []Class {
	if len(p.made().parts) == 1 {
		return nil
	}
	classes := make([]Class, len(p.parts))
	for i, c := range p.parts {
		prob := c.prob
		c.prob = 1
		classes[i] = Class{prob, &PSD{
			name:  fmt.Sprintf("%s, class %d of %d", p.name, i+1, len(p.parts)),
			drive: p.drive, basis: p.basis, flat: p.flat, parts: []part{c}, total: p.square(&c) * p.volts2(),
		}}
	}
	return classes
}

// At returns the continuous density at f Hz in V^2/Hz, one-sided. At(0) is its limit. It panics unless f is finite and
// at least 0.
func (p *PSD) At(f float64) float64 {
	return p.Density(nil, []float64{f})[0]
}

// Density sets dst[i] to the continuous density at f[i] Hz in V^2/Hz, one-sided, and returns dst; a nil dst is
// allocated. It panics if an f is not finite or below 0, and if dst has another length.
func (p *PSD) Density(dst, f []float64) []float64 {
	if dst == nil {
		dst = make([]float64, len(f))
	}
	if len(dst) != len(f) {
		panic(fmt.Errorf("spectrum: Density of %d frequencies into %d values; give as many, or nil", len(f), len(dst)))
	}
	ctx := current()
	scale := 2 * p.made().volts2() / p.drive.SymbolRate
	nu := make([]float64, min(len(f), 16*block))
	for rest := dst; len(f) > 0; {
		n := min(len(f), len(nu))
		for i, x := range f[:n] {
			if !(x >= 0) || math.IsInf(x, 0) {
				panic(fmt.Errorf("spectrum: density at %v Hz; a frequency is finite and at least 0 (densities are one-sided)", x))
			}
			nu[i] = x / p.drive.SymbolRate
		}
		p.evaluate(ctx, rest[:n], nu[:n])
		for i := range n {
			rest[i] *= scale
		}
		rest, f = rest[n:], f[n:]
	}
	return dst
}

// block is the number of frequencies that are evaluated between two looks at the context, unless they are slow.
const block = 252

// evaluate sets dst to the two-sided density over the squared volts and the symbol period, at nu symbol rates. Work
// that takes longer than starting it is shared out among the processors.
func (p *PSD) evaluate(ctx context.Context, dst, nu []float64) {
	cost := 50.0 // nanoseconds a frequency
	for _, c := range p.parts {
		if c.form != nil {
			cost += c.form.cost()
		}
	}
	size := min(block, 1+int(1e7/cost))
	workers := 1
	if cost*float64(len(dst)) > 3e4 {
		workers = min(runtime.NumCPU(), (len(dst)+size-1)/size)
	}
	var next atomic.Int64
	work := func() {
		w := newWorkspace(min(size, len(dst)))
		for ctx.Err() == nil {
			lo := int(next.Add(int64(size))) - size
			if lo >= len(dst) {
				return
			}
			hi := min(lo+size, len(dst))
			p.some(dst[lo:hi], nu[lo:hi], w)
		}
	}
	if workers <= 1 {
		work()
	} else {
		var group sync.WaitGroup
		for range workers {
			group.Go(work)
		}
		group.Wait()
	}
	stop(ctx)
}

// A workspace is what a block of frequencies needs.
type workspace struct {
	t                 []angle
	energy, raw, work []float64
}

func newWorkspace(n int) *workspace {
	v := vectors(3, n)
	return &workspace{make([]angle, n), v[0], v[1], v[2]}
}

// some is evaluate for one block.
func (p *PSD) some(dst, nu []float64, w *workspace) {
	n := len(dst)
	t, energy, raw := w.t[:n], w.energy[:n], w.raw[:n]
	clear(dst)
	for i, x := range nu {
		t[i] = newAngle(x)
	}
	if len(p.basis) == 1 {
		for i, x := range nu {
			if !p.flat {
				energy[i] = p.basis[0].Energy(x)
				continue
			}
			sinc := 1.0 // its sine is at hand
			if x != 0 {
				sinc = t[i].half / (math.Pi * x)
			}
			energy[i] = sinc * sinc
		}
		for _, c := range p.parts {
			if c.form == nil {
				continue
			}
			c.form.scalar(raw, t, w.work[:n])
			least := nearPart * c.form.power(0)
			for i, v := range raw {
				if v < least && c.near != nil && math.Abs(t[i].nu) < c.near.reach {
					dst[i] += c.prob * c.near.at(t[i], energy[i])
				} else {
					dst[i] += c.prob * max(v, 0) * energy[i]
				}
			}
		}
		return
	}
	h := make([]complex128, len(p.basis))
	for i, x := range nu {
		for j := range h {
			h[j] = p.basis[j].Transform(x)
		}
		for _, c := range p.parts {
			if c.form == nil {
				continue
			}
			v := c.form.at(t[i], h)
			if c.near != nil && x < c.near.reach {
				least := 0.0
				for j := range h {
					least += nearPart * square(h[j]) * c.form.power(j)
				}
				if v < least {
					v = c.near.at(t[i], 0)
				}
			}
			dst[i] += c.prob * max(v, 0)
		}
	}
}

// String returns a summary of a few lines.
func (p *PSD) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "spectrum of %s: %.6g symbols/s, mean square %.6g V^2", p.Name(), p.drive.SymbolRate, p.total)
	lines := p.Lines(2 * p.drive.SymbolRate)
	const most = 6
	switch {
	case len(lines) == 0:
		b.WriteString(", no tones up to twice the symbol rate")
	default:
		b.WriteString("\ntones:")
		for i, l := range lines {
			if i == most {
				fmt.Fprintf(&b, " and %d more up to twice the symbol rate", len(lines)-most)
				break
			}
			fmt.Fprintf(&b, " %.6g V^2 at %.6g Hz;", l.Power, l.Freq)
		}
	}
	if n := len(p.parts); n > 1 {
		fmt.Fprintf(&b, "\naverage over %d classes that the data can end in, with probabilities", n)
		for _, c := range p.parts {
			fmt.Fprintf(&b, " %.6g", c.prob)
		}
	}
	return b.String()
}

func current() context.Context { return page.Context() }

// stop fails the cell if it was interrupted.
func stop(ctx context.Context) {
	if ctx.Err() != nil {
		panic(interrupted(ctx))
	}
}

func interrupted(ctx context.Context) error {
	return fmt.Errorf("spectrum: interrupted: %w", context.Cause(ctx))
}
