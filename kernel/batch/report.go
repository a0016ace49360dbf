package batch

import (
	_ "embed"
	"encoding/base64"
	"encoding/json"
	"fmt"
	"html"
	"html/template"
	"io"
	"maps"
	"regexp"
	"slices"
	"strings"
	"unicode/utf8"
)

// About is what a report says of the run beside the notebook itself.
type About struct {
	File       string            // name of the notebook's file, without its folder
	Folder     string            // the notebook's folder, for the pictures that its text shows
	Program    string            // what executed it, with its version
	Parameters map[string]string // that the run set
	Failure    string            // why the run failed, as a sentence; empty if it did not
}

var (
	//go:embed report.html
	page string
	//go:embed report.css
	css string

	pageTemplate = template.Must(template.New("report").Parse(page))
)

// reportView is what the page's template shows.
type reportView struct {
	About
	Title    string
	CSS      template.CSS
	Set      []string // parameters as name = value
	Headings []Heading
	Cells    []cellView
}

type cellView struct {
	Prose   template.HTML // of a Markdown cell
	Rest    template.HTML // of the Markdown cell with the title, what comes after the title and the table of contents
	Raw     string        // of a raw cell
	Number  int           // execution count of a code cell
	Source  template.HTML // of a code cell
	Outputs []outputView
}

type outputView struct {
	Class string        // "stream", "stderr", "error", "html" or "figure"
	Text  string        // of the first three
	HTML  template.HTML // of the last two
}

// contentsFrom is the number of headings from which a report has a table of contents.
const contentsFrom = 4

// Report writes the notebook as one HTML page that needs no other file and no network. The same notebook gives the same
// bytes.
func (n *Notebook) Report(w io.Writer, about About) error {
	p := newProse(about.Folder)
	v := reportView{About: about, CSS: template.CSS(css)}
	for _, c := range n.Cells {
		if c.Type == "code" {
			p.anchors.Put(fmt.Appendf(nil, "cell-%d", c.Count))
		}
	}
	for _, c := range n.Cells {
		if !c.blank() {
			v.Cells = append(v.Cells, p.view(c))
		}
	}
	v.Title = about.File
	if len(p.headings) > 0 {
		v.Title = p.headings[0].Text
	}
	if len(p.headings) >= contentsFrom {
		for _, h := range p.headings[1:] {
			if h.Level <= 3 {
				v.Headings = append(v.Headings, h)
			}
		}
		v.splitAtTitle(p.headings[0])
	}
	for _, name := range slices.Sorted(maps.Keys(about.Parameters)) {
		v.Set = append(v.Set, name+" = "+about.Parameters[name])
	}
	return pageTemplate.Execute(w, v)
}

// splitAtTitle cuts the cell with the title behind the title, where the table of contents goes.
func (v *reportView) splitAtTitle(title Heading) {
	closing := fmt.Sprintf("</h%d>", title.Level)
	for i, c := range v.Cells {
		if before, after, ok := strings.Cut(string(c.Prose), closing); ok {
			v.Cells[i].Prose, v.Cells[i].Rest = template.HTML(before+closing), template.HTML(after)
			return
		}
	}
}

// view returns what a report shows of a cell.
func (p *prose) view(c *Cell) cellView {
	switch c.Type {
	case "markdown":
		attachments, _ := c.fields["attachments"].(map[string]any)
		return cellView{Prose: template.HTML(p.html(c.Source, attachments))}
	case "raw":
		return cellView{Raw: c.Source}
	}
	v := cellView{Number: c.Count, Source: template.HTML(highlight(strings.TrimRight(c.Source, "\n")))}
	for i, o := range c.Outputs {
		alt := fmt.Sprintf("Figure: output %d of cell %d", i+1, c.Count)
		if o, ok := p.output(o, alt); ok {
			v.Outputs = append(v.Outputs, o)
		}
	}
	return v
}

// output returns what a report shows of an output, of its forms the richest.
func (p *prose) output(o *Output, alt string) (outputView, bool) {
	switch o.Type {
	case stream:
		class := "stream"
		if o.Stream == "stderr" {
			class = "stderr"
		}
		return outputView{Class: class, Text: shorten(uncoloured(o.Text))}, true
	case failure:
		trace := uncoloured(strings.Join(o.Traceback, "\n"))
		if head := joinError(o.Name, o.Value); !strings.Contains(trace, o.Value) || trace == "" {
			trace = strings.TrimSuffix(head+"\n"+trace, "\n")
		}
		return outputView{Class: "error", Text: shorten(trace)}, true
	}
	if s, ok := o.text("text/html"); ok {
		return outputView{Class: "html", HTML: template.HTML(sanitise(s))}, true
	}
	if s, ok := o.text("text/markdown"); ok {
		return outputView{Class: "html", HTML: template.HTML(p.html(s, nil))}, true
	}
	for _, mime := range []string{"image/svg+xml", "image/png", "image/jpeg", "image/gif", "image/webp"} {
		if picture, ok := o.picture(mime); ok {
			img := fmt.Sprintf(`<img src="%s" alt="%s"%s>`, dataURL(mime, picture), html.EscapeString(alt), width(o.Metadata[mime]))
			return outputView{Class: "figure", HTML: template.HTML(img)}, true
		}
	}
	for _, mime := range []string{"text/plain", "text/latex"} {
		if s, ok := o.text(mime); ok {
			return outputView{Class: "stream", Text: shorten(uncoloured(s))}, true
		}
	}
	if len(o.Data) == 0 {
		return outputView{}, false
	}
	kinds := strings.Join(slices.Sorted(maps.Keys(o.Data)), ", ")
	return outputView{Class: "stream", Text: "An output of type " + kinds + " is in the notebook."}, true
}

// picture returns the bytes of a picture.
func (o *Output) picture(mime string) ([]byte, bool) {
	s, ok := o.text(mime)
	if !ok || mime == "image/svg+xml" {
		return []byte(s), ok
	}
	b, err := base64.StdEncoding.DecodeString(strings.Join(strings.Fields(s), ""))
	return b, err == nil
}

// width returns the attribute for the width that a picture's metadata asks for, in pixels of the page.
func width(metadata any) string {
	m, _ := metadata.(map[string]any)
	n, _ := m["width"].(json.Number)
	if f, err := n.Float64(); err == nil && f >= 1 {
		return fmt.Sprintf(` width="%.0f"`, f)
	}
	return ""
}

// maxText is the length of a text from which a report shows only its two ends, in bytes: pages of many megabytes stop
// browsers. The notebook has all of it.
const maxText = 200_000

func shorten(s string) string {
	s = strings.TrimRight(s, "\n")
	if len(s) <= maxText {
		return s
	}
	head, tail := maxText*3/4, len(s)-maxText/4
	for !utf8.RuneStart(s[head]) {
		head--
	}
	for !utf8.RuneStart(s[tail]) {
		tail++
	}
	return fmt.Sprintf("%s\n… %d bytes left out here; the notebook has them …\n%s", s[:head], tail-head, s[tail:])
}

// escape matches the control sequences of terminals (ECMA-48, 5.4).
var escape = regexp.MustCompile("\x1b\\[[0-?]*[ -/]*[@-~]")

// uncoloured returns a text without its control sequences.
func uncoloured(s string) string { return escape.ReplaceAllString(s, "") }
