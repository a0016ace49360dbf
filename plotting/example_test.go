package plotting_test

import (
	"fmt"
	"log"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
	"linewright/plotting"
)

// Each example of a figure ends with save, which keeps its three forms; TestGolden holds them against those in testdata.

// Spectra of three codes at one bit rate over one another. The tones of the return-to-zero code stand as stems, with
// the scale at the right.
func ExampleSpectrum() {
	train := pulse.Train{BitRate: 2.048e6, Level: 3, Load: 120}
	var ps []*spectrum.PSD
	for _, c := range []*linecode.Code{linecode.UnipolarRZ(0.5), linecode.BiphaseL(), linecode.HDB3()} {
		p, err := spectrum.Exact(c, train)
		if err != nil {
			log.Fatal(err)
		}
		ps = append(ps, p)
	}
	save("spectrum", plotting.Spectrum(ps...))
}

// Two codes on linear axes, up to a frequency of one's own.
func ExampleSpectrumFigure_Linear() {
	train := pulse.Train{BitRate: 10e6, Peak: 1}
	biphase, err := spectrum.Exact(linecode.BiphaseL(), train)
	if err != nil {
		log.Fatal(err)
	}
	coded, err := spectrum.Exact(linecode.CMI(), train)
	if err != nil {
		log.Fatal(err)
	}
	save("linear", plotting.Spectrum(biphase, coded).Linear().Upto(32e6))
}

// Data that repeat have tones and no density.
func ExampleSpectrum_periodic() {
	code := linecode.AMI().Fed(source.Repeating(source.PRBS(7).Bits(127)))
	p, err := spectrum.Exact(code, pulse.Train{BitRate: 2.048e6, Level: 3, Load: 120, Shape: pulse.Rect(0.5)})
	if err != nil {
		log.Fatal(err)
	}
	save("periodic", plotting.Spectrum(p))
}

// HDB3 with half-width pulses: the bits stand above their symbols, also in the two runs of four zeros for which the
// code puts marks of its own.
func ExampleWaveform() {
	train := pulse.Train{BitRate: 2.048e6, Level: 3, Shape: pulse.Rect(0.5)}
	bits := []byte{1, 0, 1, 1, 0, 0, 0, 0, 1, 1, 0, 1, 0, 0, 0, 0}
	save("waveform", plotting.Waveform(linecode.HDB3(), train, bits))
}

// A driver that settles with a time constant of 0.15 symbols.
func ExampleWaveform_driver() {
	train := pulse.Train{BitRate: 1e6, Level: 0.4, Transition: func(prev, next float64) pulse.Shape {
		return pulse.Settle(prev, next, 0.15)
	}}
	bits := []byte{1, 0, 1, 1, 0, 0, 0, 1, 1, 1}
	save("driver", plotting.Waveform(linecode.Code2B1Q(), train, bits))
}

// A figure is a gonum plot: here a limit is drawn over a spectrum.
func ExampleFigure() {
	p, err := spectrum.Exact(linecode.PolarNRZ(), pulse.Train{BitRate: 1e6, Load: 50})
	if err != nil {
		log.Fatal(err)
	}
	figure := plotting.Spectrum(p)
	limit := plotter.NewFunction(func(f float64) float64 { return -45 - 5e-6*f })
	limit.Width = 1.5
	figure.Plot.Add(limit)
	figure.Plot.Title.Text = "polar NRZ and a limit"
	save("limit", figure)
}

// Any gonum plot can be shown.
func ExampleOf() {
	p := plot.New()
	p.Title.Text = "droop of a coupling"
	p.X.Label.Text, p.Y.Label.Text = "time (ms)", "voltage (V)"
	droop := plotter.NewFunction(func(t float64) float64 { return math.Exp(-t) })
	p.Add(droop)
	p.X.Max, p.Y.Max = 5, 1
	figure := plotting.Of(p)
	figure.Height = 200
	save("gonum", figure)
}

func ExampleText() {
	fmt.Println(plotting.Text(mirror{1, 0.5}, "level", []byte{1, 0, 1}))
	// Output: {1 0.5} level [1 0 1]
}

type mirror struct{ A, B float64 }

// A code shows as a card.
func ExampleRender() {
	code, err := linecode.New(linecode.Spec{
		Name:  "balanced marks",
		Bits:  1,
		Start: 0,
		Step: func(s any, word uint) (any, []float64) {
			switch sum := s.(int); {
			case word == 0:
				return sum, []float64{0, 0}
			case sum > 0:
				return 0, []float64{-1, 0}
			}
			return 1, []float64{1, 0}
		},
	})
	if err != nil {
		log.Fatal(err)
	}
	b, err := plotting.Render(code)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(b.Data["text/plain"])
	// Output:
	// balanced marks
	//   defined by            a script
	//   source bits per step  1
	//   rate                  1/2 bits per symbol
	//   levels                −1, 0, 1
	//   states                2, of which 2 recurrent and distinct
	//   delay                 none
	//   data                  P(1) = 0.5
	//   decoding              decodable, words told apart within 1 symbol
}
