package batch

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"image"
	"image/png"
	"maps"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// comparison tells outputs apart.
type comparison struct {
	tolerance float64 // relative, between numbers in text
}

// drawingTolerance is the distance in units of a drawing below which nobody sees a difference.
const drawingTolerance = 0.05

// output returns in which way two outputs differ, or "".
func (c comparison) output(stored, now *Output) string {
	if stored.Type != now.Type || stored.Stream != now.Stream {
		return fmt.Sprintf("was %s and is %s", stored.summary(), now.summary())
	}
	switch stored.Type {
	case stream:
		return c.text(stored.Stream, stored.Text, now.Text, 0)
	case failure:
		return c.text("error", joinError(stored.Name, stored.Value), joinError(now.Name, now.Value), 0)
	}
	was, is := slices.Sorted(maps.Keys(stored.Data)), slices.Sorted(maps.Keys(now.Data))
	if !slices.Equal(was, is) {
		return fmt.Sprintf("had the forms %s and has %s", strings.Join(was, ", "), strings.Join(is, ", "))
	}
	_, drawn := stored.Data["image/svg+xml"]
	for _, mime := range was {
		var text string
		a, b := stored.Data[mime], now.Data[mime]
		s, isText := a.(string)
		t, isTextNow := b.(string)
		switch {
		case !isText || !isTextNow:
			text = c.text(mime, tree(a), tree(b), 0)
		case mime == "image/svg+xml":
			text = c.text(mime, s, t, drawingTolerance)
		case mime == "image/png":
			if !drawn { // beside a drawing, the picture is that drawing
				text = pixels(s, t)
			}
		case strings.HasPrefix(mime, "text/"):
			text = c.text(mime, s, t, 0)
		case s != t:
			text = mime + " differs"
		}
		if text != "" {
			return text
		}
	}
	return ""
}

// tree returns a JSON tree as text, the same for the same tree.
func tree(v any) string {
	var e encoder
	if err := e.value(v, 0); err != nil {
		return err.Error()
	}
	return e.String()
}

// number matches a number that is no part of a word, in the forms in which Go prints numbers.
var number = regexp.MustCompile(`[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?`)

// text returns in which way two texts differ, or "". Numbers may differ by the tolerance, or by absolute.
func (c comparison) text(what, stored, now string, absolute float64) string {
	stored, now = strings.TrimRight(uncoloured(stored), "\n"), strings.TrimRight(uncoloured(now), "\n")
	if stored == now {
		return ""
	}
	same := true
	was, is := slices.Collect(strings.Lines(stored)), slices.Collect(strings.Lines(now))
	for i := range is {
		if i < len(was) && c.line(was[i], is[i], absolute) {
			is[i] = was[i] // only what really differs is shown
		} else {
			same = false
		}
	}
	if same && len(was) == len(is) {
		return ""
	}
	return what + " differs:\n" + show(stored, strings.Join(is, ""))
}

// line reports whether two lines are the same up to numbers that are near enough.
func (c comparison) line(was, is string, absolute float64) bool {
	if was == is {
		return true
	}
	a, b := number.FindAllStringIndex(was, -1), number.FindAllStringIndex(is, -1)
	if len(a) != len(b) {
		return false
	}
	doneA, doneB := 0, 0
	for i := range a {
		if was[doneA:a[i][0]] != is[doneB:b[i][0]] || !c.near(was[a[i][0]:a[i][1]], is[b[i][0]:b[i][1]], absolute) {
			return false
		}
		doneA, doneB = a[i][1], b[i][1]
	}
	return was[doneA:] == is[doneB:]
}

// near reports whether two numbers are the same up to the tolerance.
func (c comparison) near(was, is string, absolute float64) bool {
	if was == is {
		return true
	}
	a, errA := strconv.ParseFloat(was, 64)
	b, errB := strconv.ParseFloat(is, 64)
	if errA != nil || errB != nil {
		return false
	}
	return math.Abs(a-b) <= max(c.tolerance*max(math.Abs(a), math.Abs(b)), absolute)
}

const (
	visible   = 16    // difference of one channel, of 255, that is seen
	tolerable = 0.001 // part of the pixels that may differ visibly, for instance where an edge is rounded otherwise
)

// pixels returns in which way two PNG pictures in base64 differ, or "".
func pixels(stored, now string) string {
	if stored == now {
		return ""
	}
	a, errA := decodePNG(stored)
	b, errB := decodePNG(now)
	if errA != nil || errB != nil {
		return "image/png differs and cannot be read"
	}
	if a.Bounds() != b.Bounds() {
		return fmt.Sprintf("image/png was %v and is %v pixels", a.Bounds().Size(), b.Bounds().Size())
	}
	count, size := 0, a.Bounds()
	for y := size.Min.Y; y < size.Max.Y; y++ {
		for x := size.Min.X; x < size.Max.X; x++ {
			if differ(a, b, x, y) {
				count++
			}
		}
	}
	if part := float64(count) / float64(size.Dx()*size.Dy()); part > tolerable {
		return fmt.Sprintf("image/png differs in %.2g %% of its pixels", 100*part)
	}
	return ""
}

func differ(a, b image.Image, x, y int) bool {
	r1, g1, b1, a1 := a.At(x, y).RGBA()
	r2, g2, b2, a2 := b.At(x, y).RGBA()
	far := func(p, q uint32) bool { return max(p, q)-min(p, q) > visible<<8 }
	return far(r1, r2) || far(g1, g2) || far(b1, b2) || far(a1, a2)
}

func decodePNG(s string) (image.Image, error) {
	raw, err := base64.StdEncoding.DecodeString(strings.Join(strings.Fields(s), ""))
	if err != nil {
		return nil, err
	}
	return png.Decode(bytes.NewReader(raw))
}
