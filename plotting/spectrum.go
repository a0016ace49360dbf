package plotting

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg/draw"

	"linewright/builtins/spectrum"
)

const (
	spectrumPoints = 1200 // intervals: a multiple of 3, so that the nulls of a figure up to 3 symbol rates are on a point
	depth          = 70.0 // dB below the highest density that a figure shows at most
)

// density is what a spectrum figure asks of a density; *spectrum.PSD has it.
type density interface {
	Name() string
	SymbolRate() float64
	Load() float64
	Density(dst, f []float64) []float64
	Lines(fmax float64) []spectrum.Line
	Within(part float64) float64
	Classes() []spectrum.Class
	DBm(v2 float64) (float64, error)
	Watts(v2 float64) (float64, error)
}

// A SpectrumFigure is the figure that [Spectrum] draws.
type SpectrumFigure struct {
	*Figure
	of     []density
	linear bool
	upto   float64 // Hz

	curves []*curve
	stems  *tones
	legend *names
}

// Spectrum draws the one-sided densities of one or more spectra over one another, over frequency, each in a colour and
// a dash pattern of its own, and their tones as stems on the axis at the right. Where several have a tone at one
// frequency, the stems stand side by side around it.
//
// Densities are in dBm/Hz and tones in dBm where every spectrum has a load, else in dB relative to 1 V²/Hz and 1 V².
// A decibel is as high on the right axis as on the left. The figure goes at most 70 dB below the highest density, so
// that nulls do not press the rest together; what lies lower leaves it at the bottom. It goes up to where 99 % of the
// power lie, and half as far again, but to no less than one and no more than three symbol rates. [SpectrumFigure.Linear]
// and [SpectrumFigure.Upto] make other figures of the same spectra.
//
// It panics without a spectrum and on a nil one.
func Spectrum(ps ...*spectrum.PSD) *SpectrumFigure {
	if len(ps) == 0 {
		panic(fmt.Errorf("plotting: Spectrum() has no spectrum to draw; give it one or more, from spectrum.Exact"))
	}
	of := make([]density, len(ps))
	for i, p := range ps {
		if p == nil {
			panic(fmt.Errorf("plotting: spectrum %d of %d is nil; give Spectrum what spectrum.Exact returned without an error", i+1, len(ps)))
		}
		of[i] = p
	}
	return newSpectrum(of, false, spectrumRange(of))
}

// Linear returns a figure of the same spectra with linear axes: W/Hz and W where every spectrum has a load, else V²/Hz
// and V². A prefix on a squared unit is squared with it: 1 mV² is (1 mV)². Changes to the Plot are not taken over.
func (s *SpectrumFigure) Linear() *SpectrumFigure { return newSpectrum(s.of, true, s.upto) }

// Upto returns a figure of the same spectra from 0 to f Hz. Changes to the Plot are not taken over. It panics unless f
// is positive and finite.
func (s *SpectrumFigure) Upto(f float64) *SpectrumFigure {
	if !(f > 0) || math.IsInf(f, 0) {
		panic(fmt.Errorf("plotting: a figure cannot go up to %g Hz; give a positive frequency, for instance Upto(10e6)", f))
	}
	return newSpectrum(s.of, s.linear, f)
}

// spectrumRange returns the frequency up to which a figure shows by default.
func spectrumRange(of []density) float64 {
	upto := 0.0
	for _, d := range of {
		rate := d.SymbolRate()
		upto = max(upto, min(max(1.5*d.Within(0.99), rate), 3*rate))
	}
	return upto
}

func newSpectrum(of []density, linear bool, upto float64) *SpectrumFigure {
	s := &SpectrumFigure{Figure: Of(newPlot()), of: of, linear: linear, upto: upto}
	p := s.Plot
	unit := s.unit()

	symbol, factor := prefix(upto, 1)
	p.X.Min, p.X.Max = 0, upto
	p.X.Label.Text = "frequency (" + symbol + "Hz)"
	p.X.Tick.Marker = ticks{unit: factor, about: 8}

	fs := make([]float64, spectrumPoints+1)
	for k := range fs {
		fs[k] = upto * float64(k) / spectrumPoints
	}
	stems := &tones{}
	legend := &names{avoid: stems.avoid}
	labels := distinct(of)
	var densities, powers []float64 // all that is finite, in the figure's unit
	count := 0                      // of tones
	for i, d := range of {
		style := seriesStyle(i)
		v := &curve{name: labels[i], xs: fs, ys: d.Density(nil, fs), style: style}
		for k, y := range v.ys {
			v.ys[k] = unit.value(d, y)
			if !math.IsInf(v.ys[k], 0) && (!linear || v.ys[k] > 0) {
				densities = append(densities, v.ys[k])
			}
		}
		line := toneSeries{style: style, mark: markers[i%len(markers)]}
		lines := d.Lines(upto)
		count += len(lines)
		for _, tone := range prominent(lines, upto) {
			line.freqs = append(line.freqs, tone.Freq)
			line.values = append(line.values, unit.value(d, tone.Power))
		}
		powers = append(powers, line.values...)
		legend.curves = append(legend.curves, v)
		var mark draw.GlyphDrawer
		if len(line.freqs) > 0 {
			mark = line.mark
		}
		legend.marks = append(legend.marks, mark)
		stems.series = append(stems.series, line)
	}

	axis := &p.Y
	switch {
	case len(densities) == 0: // tones alone, which then have the left axis
		low, high, scale, label := unit.axis(powers, "")
		axis.Min, axis.Max, axis.Tick.Marker, axis.Label.Text = low, high, scale, "tones ("+label+")"
		stems.min, stems.max = low, high
	default:
		low, high, scale, label := unit.axis(densities, "/Hz")
		axis.Min, axis.Max, axis.Tick.Marker, axis.Label.Text = low, high, scale, "density ("+label+")"
		if len(powers) > 0 {
			stems.min, stems.max, stems.marker, label = unit.beside(powers, low, high, scale)
			stems.label = "tones (" + label + ")"
		}
	}

	grid := plotter.NewGrid()
	for _, g := range []*draw.LineStyle{&grid.Vertical, &grid.Horizontal} {
		*g = draw.LineStyle{Color: faint, Width: 0.5}
	}
	p.Add(grid)
	for _, v := range legend.curves {
		p.Add(v)
	}
	p.Add(stems, legend) // stems over curves: many stand in a null, where every curve passes
	s.fit = legend.fit
	s.curves, s.stems, s.legend = legend.curves, stems, legend
	s.Alt = s.alt(count)
	return s
}

// classes draws the spectra of the classes that data can end in.
func classes(cs []spectrum.Class) *SpectrumFigure {
	of := make([]density, len(cs))
	for i, c := range cs {
		of[i] = class{c.Spectrum, fmt.Sprintf("class %d, probability %.4g", i+1, c.Probability)}
	}
	return newSpectrum(of, false, spectrumRange(of))
}

// class is the density of a class under the class's name.
type class struct {
	density
	name string
}

func (c class) Name() string { return c.name }

// distinct returns the names of the spectra, equal ones numbered. An average over the classes in which the data can end
// says so: no single waveform has it.
func distinct(of []density) []string {
	count, seen := map[string]int{}, map[string]int{}
	for _, d := range of {
		count[d.Name()]++
	}
	out := make([]string, len(of))
	for i, d := range of {
		out[i] = d.Name()
		if count[d.Name()] > 1 {
			seen[d.Name()]++
			out[i] += fmt.Sprintf(" (%d)", seen[d.Name()])
		}
		if n := len(d.Classes()); n > 0 {
			out[i] += fmt.Sprintf(", average of %d classes", n)
		}
	}
	return out
}

// alt says what the figure shows.
func (s *SpectrumFigure) alt(tones int) string {
	stems := "no tones"
	if tones > 0 {
		stems = fmt.Sprintf("%d tones as stems, %s", tones, s.unit().name(""))
	}
	return fmt.Sprintf("Power density of %s from 0 to %s in %s; %s.", strings.Join(distinct(s.of), ", "), quantity(s.upto, "Hz"), s.unit().name("/Hz"), stems)
}

// A powerUnit is what the axes of a spectrum figure count in.
type powerUnit struct{ linear, loaded bool }

// unit returns the figure's unit: watts need the load of every spectrum.
func (s *SpectrumFigure) unit() powerUnit {
	return powerUnit{s.linear, !slices.ContainsFunc(s.of, func(d density) bool { return d.Load() <= 0 })}
}

// value returns v2, in V² or V²/Hz, in the unit; a logarithmic unit has -Inf for 0.
func (u powerUnit) value(d density, v2 float64) float64 {
	switch {
	case !u.linear && v2 <= 0:
		return math.Inf(-1)
	case !u.loaded && !u.linear:
		return 10 * math.Log10(v2)
	case !u.loaded:
		return v2
	}
	convert := d.DBm
	if u.linear {
		convert = d.Watts
	}
	v, err := convert(v2)
	if err != nil {
		panic(err)
	}
	return v
}

// name returns the unit's name without an SI prefix.
func (u powerUnit) name(per string) string {
	switch {
	case u.linear && u.loaded:
		return "W" + per
	case u.linear:
		return "V²" + per
	case u.loaded:
		return "dBm" + per
	}
	return "dB re 1 V²" + per
}

// axis returns the range, the ticks and the unit of an axis that shows values.
func (u powerUnit) axis(values []float64, per string) (low, high float64, scale ticks, unit string) {
	top := 0.0
	if len(values) > 0 {
		top = slices.Max(values)
	}
	if u.linear {
		power := 2
		if u.loaded {
			power = 1
		}
		symbol, factor := prefix(top, power)
		if top == 0 {
			top = 1
		}
		return 0, 1.1 * top, ticks{unit: factor}, symbol + u.name(per)
	}
	// The lowest hundredth belongs to nulls, which run off at the bottom.
	sorted := slices.Sorted(slices.Values(values))
	low = top - depth
	if n := len(sorted); n > 0 {
		low = max(low, sorted[n/100]-3)
	}
	low, high = 5*math.Floor(low/5), 5*math.Ceil((top+4)/5)
	if high-low < 20 {
		low = high - 20
	}
	return low, high, ticks{unit: 1}, u.name(per)
}

// beside returns the range, the ticks and the unit of the axis of tones beside an axis of densities from low to high.
// In decibels both have the same ticks, so that one grid serves both.
func (u powerUnit) beside(powers []float64, low, high float64, scale ticks) (lowTone, highTone float64, right ticks, unit string) {
	if u.linear {
		return u.axis(powers, "")
	}
	step, _ := roundStep((high - low) / 6)
	shift := step * math.Ceil((slices.Max(powers)+2-high)/step)
	return low + shift, high + shift, scale, u.name("")
}
