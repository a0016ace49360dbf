package plotting_test

import (
	"bytes"
	"flag"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"log"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"testing"

	"linewright/plotting"
)

var regenerate = flag.Bool("regenerate", false, "write the figures of the examples to testdata instead of comparing them")

// saved holds what the last example saved.
var saved struct {
	name   string
	bundle plotting.Bundle
}

func save(name string, figure any) {
	b, err := plotting.Render(figure)
	if err != nil {
		log.Fatal(err)
	}
	saved.name, saved.bundle = name, b
}

// TestGolden draws the figures of the examples and holds each form against the one in testdata:
//
//	go test ./plotting -run Golden -regenerate
//
// writes them anew; look at them before they are committed. Other processors round otherwise in the last digit, so
// numbers in SVG may differ by a hundredth of a point, pixels by a shade, and a few characters by a dot.
func TestGolden(t *testing.T) {
	for name, example := range map[string]func(){
		"spectrum": ExampleSpectrum, "linear": ExampleSpectrumFigure_Linear, "periodic": ExampleSpectrum_periodic,
		"waveform": ExampleWaveform, "driver": ExampleWaveform_driver, "limit": ExampleFigure, "gonum": ExampleOf,
	} {
		t.Run(name, func(t *testing.T) {
			example()
			if saved.name != name {
				t.Fatalf("the example saved %q", saved.name)
			}
			for _, form := range []struct {
				mime, extension string
				same            func(t *testing.T, got, want []byte) error
			}{{"image/svg+xml", ".svg", sameSVG}, {"image/png", ".png", samePNG}, {"text/plain", ".txt", sameText}} {
				path := filepath.Join("testdata", name+form.extension)
				var got []byte
				switch data := saved.bundle.Data[form.mime].(type) {
				case string:
					got = []byte(data)
				case []byte:
					got = data
				}
				if *regenerate {
					if err := os.WriteFile(path, got, 0o644); err != nil {
						t.Fatal(err)
					}
					continue
				}
				want, err := os.ReadFile(path)
				if err != nil {
					t.Fatal(err)
				}
				if err := form.same(t, got, want); err != nil {
					failed := filepath.Join(t.ArtifactDir(), name+form.extension)
					if err := os.WriteFile(failed, got, 0o644); err != nil {
						t.Fatal(err)
					}
					t.Errorf("%s: %v; this run's is in %s (kept with -artifacts)", path, err, failed)
				}
			}
		})
	}
}

var (
	figureID = regexp.MustCompile(`lw[0-9a-f]{12}`) // comes from the content, so the least difference changes it
	decimals = regexp.MustCompile(`-?\d+(\.\d+)?`)
	fontData = regexp.MustCompile(`base64,[^)"]*`) // the id is in it, as the font's name
)

func sameSVG(_ *testing.T, got, want []byte) error {
	split := func(svg []byte) (words []string, numbers []float64) {
		svg = fontData.ReplaceAll(figureID.ReplaceAll(svg, []byte("ID")), []byte("FONT"))
		for _, n := range decimals.FindAll(svg, -1) {
			v, _ := strconv.ParseFloat(string(n), 64) // the pattern has only numbers
			numbers = append(numbers, v)
		}
		return decimals.Split(string(svg), -1), numbers
	}
	gotWords, gotNumbers := split(got)
	wantWords, wantNumbers := split(want)
	if len(gotWords) != len(wantWords) {
		return fmt.Errorf("%d parts, want %d", len(gotWords), len(wantWords))
	}
	for i := range wantWords {
		if gotWords[i] != wantWords[i] {
			return fmt.Errorf("part %d is %.40q, want %.40q", i, gotWords[i], wantWords[i])
		}
	}
	for i, want := range wantNumbers {
		if d := gotNumbers[i] - want; d > 0.011 || d < -0.011 {
			return fmt.Errorf("number %d is %g, want %g", i, gotNumbers[i], want)
		}
	}
	return nil
}

// samePNG allows each channel of a pixel to differ by shade, and a few pixels by more: the ends of dashes.
func samePNG(t *testing.T, got, want []byte) error {
	const shade, few = 8, 20
	a, err := png.Decode(bytes.NewReader(got))
	if err != nil {
		return err
	}
	b, err := png.Decode(bytes.NewReader(want))
	if err != nil {
		return err
	}
	if a.Bounds() != b.Bounds() {
		return fmt.Errorf("size %v, want %v", a.Bounds(), b.Bounds())
	}
	difference, differing := image.NewGray(a.Bounds()), 0
	for y := range a.Bounds().Dy() {
		for x := range a.Bounds().Dx() {
			p, q := color.RGBAModel.Convert(a.At(x, y)).(color.RGBA), color.RGBAModel.Convert(b.At(x, y)).(color.RGBA)
			d := max(apart(p.R, q.R), apart(p.G, q.G), apart(p.B, q.B))
			difference.SetGray(x, y, color.Gray{255 - d})
			if d > shade {
				differing++
			}
		}
	}
	if differing <= few {
		return nil
	}
	var buf bytes.Buffer
	if err := png.Encode(&buf, difference); err != nil {
		return err
	}
	path := filepath.Join(t.ArtifactDir(), filepath.Base(t.Name())+"-difference.png")
	if err := os.WriteFile(path, buf.Bytes(), 0o644); err != nil {
		return err
	}
	return fmt.Errorf("%d pixels differ; they are dark in %s", differing, path)
}

func apart(a, b uint8) uint8 { return max(a, b) - min(a, b) }

func sameText(_ *testing.T, got, want []byte) error {
	a, b := []rune(string(got)), []rune(string(want))
	if len(a) != len(b) {
		return fmt.Errorf("%d characters, want %d", len(a), len(b))
	}
	differing := 0
	for i := range b {
		if a[i] != b[i] {
			differing++
		}
	}
	if differing > 3 {
		return fmt.Errorf("%d characters differ:\n%s", differing, got)
	}
	return nil
}
