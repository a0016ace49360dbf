package batch

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// onePixel is a PNG of one pixel.
var onePixel, _ = base64.StdEncoding.DecodeString("iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAAAAAA6fptVAAAACklEQVR4nGNgAAAAAgABSK+kcQAAAABJRU5ErkJggg==")

// reportOf returns the report of a notebook with these cells.
func reportOf(t *testing.T, about About, cells ...*Cell) string {
	t.Helper()
	var b bytes.Buffer
	if err := (&Notebook{Cells: cells}).Report(&b, about); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func markdown(source string) *Cell { return &Cell{Type: "markdown", Source: source} }

func code(source string, count int, outputs ...*Output) *Cell {
	return &Cell{Type: "code", Source: source, Count: count, Outputs: outputs}
}

func TestReportShowsTheRichestForm(t *testing.T) {
	figure := &Output{
		Type:     displayData,
		Data:     map[string]any{"image/svg+xml": "<svg/>", "image/png": "iVBORw0KGgo=", "text/plain": "braille"},
		Metadata: map[string]any{"image/png": map[string]any{"width": json.Number("320")}},
	}
	picture := &Output{Type: displayData, Data: map[string]any{"image/png": "iVBOR\nw0KGgo=", "text/plain": "braille"}, Metadata: figure.Metadata}
	page := reportOf(t, About{},
		code("f", 1, figure),
		code("g", 2, picture),
		code("h", 3, &Output{Type: executeResult, Data: map[string]any{"text/html": "<table><tr><td>card</td></tr></table>", "text/plain": "plain card"}}),
		code("i", 4, &Output{Type: executeResult, Data: map[string]any{"text/plain": "a < b"}}),
		code("j", 5, &Output{Type: stream, Stream: "stderr", Text: "\x1b[31mwarned\x1b[0m\n"}),
		code("k", 6, &Output{Type: failure, Name: "panic", Value: "bad", Traceback: []string{"panic: bad", "cell[6]:1:1"}}),
		code("l", 7, &Output{Type: displayData, Data: map[string]any{"application/x": "AA"}}),
	)
	for _, want := range []string{
		`<img src="data:image/svg+xml;base64,PHN2Zy8+" alt="Figure: output 1 of cell 1">`,
		`<img src="data:image/png;base64,iVBORw0KGgo=" alt="Figure: output 1 of cell 2" width="320">`,
		`<td>card</td>`,
		`<pre class="stream">a &lt; b</pre>`,
		`<pre class="stderr">warned</pre>`,
		"<pre class=\"error\">panic: bad\ncell[6]:1:1</pre>",
		`An output of type application/x is in the notebook.`,
	} {
		if !strings.Contains(page, want) {
			t.Errorf("no %s", want)
		}
	}
	for _, unwanted := range []string{"braille", "plain card", "\x1b"} {
		if strings.Contains(page, unwanted) {
			t.Errorf("it has %q", unwanted)
		}
	}
}

// A report must show what others wrote without running it and without asking the network.
func TestReportRunsNothingAndLoadsNothing(t *testing.T) {
	hostile := strings.Join([]string{
		`<script>alert(1)</script>`, `<img src="https://example.com/a.png" onerror="alert(2)">`, `<b onclick="alert(3)">bold</b>`,
		`<a href="javascript:alert(4)">link</a>`, `<iframe src="https://example.com/"></iframe>`, `<style>@import url(https://example.com/a.css)</style>`,
		`<p style="background-image: url(https://example.com/b.png); color: red">red</p>`, `<object data="https://example.com/c"></object>`,
		`<link rel="stylesheet" href="https://example.com/d.css">`, `<form action="https://example.com/"><input type="submit"></form>`,
		`<img src="data:text/html;base64,PHNjcmlwdD4=">`, `<svg onload="alert(5)"></svg>`, `<video src="https://example.com/e"></video>`,
	}, "\n\n")
	page := reportOf(t, About{},
		markdown("# <script>alert(6)</script>Title\n\n"+hostile+"\n\n![net](https://example.com/f.png) [x](javascript:alert(7)) <https://example.com/page>"),
		code("</code><script>alert(8)</script>", 1,
			&Output{Type: displayData, Data: map[string]any{"text/html": hostile}},
			&Output{Type: displayData, Data: map[string]any{"text/markdown": hostile}},
			&Output{Type: stream, Stream: "stdout", Text: "<script>alert(9)</script>"},
			&Output{Type: displayData, Data: map[string]any{"image/svg+xml": `<svg onload="alert(10)"/>`}}),
		&Cell{Type: "raw", Source: "<script>alert(11)</script>"},
	)
	if found := regexp.MustCompile(`(?i)<(script|iframe|object|link|form|video|svg|embed)|[\s"]on\w+\s*=|javascript:|@import`).FindString(page); found != "" {
		t.Errorf("the page has %q:\n%s", found, page)
	}
	// Whatever a browser fetches by itself is data.
	for _, m := range regexp.MustCompile(`(?:src|srcset|poster|data)\s*=\s*"?([^">]*)|url\(([^)]*)`).FindAllStringSubmatch(page, -1) {
		if !strings.HasPrefix(m[1], "data:image/") {
			t.Errorf("the page loads %q", m[0])
		}
	}
	for _, want := range []string{`<a href="https://example.com/f.png"`, "<b>bold</b>", "Title"} {
		if !strings.Contains(page, want) {
			t.Errorf("no %s", want)
		}
	}
}

func TestReportHasPicturesOfTheText(t *testing.T) {
	dir := t.TempDir()
	sub := filepath.Join(dir, "notebooks")
	if err := os.Mkdir(sub, 0o755); err != nil {
		t.Fatal(err)
	}
	for _, path := range []string{filepath.Join(sub, "boom sketch.png"), filepath.Join(dir, "outside.png")} {
		if err := os.WriteFile(path, onePixel, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	cell := markdown("![a](boom%20sketch.png) ![b](attachment:c.png) ![d](../outside.png) ![e](missing.png)")
	cell.fields = map[string]any{"attachments": map[string]any{"c.png": map[string]any{"image/png": base64.StdEncoding.EncodeToString(onePixel)}}}
	page := reportOf(t, About{Folder: sub}, cell)
	if n := strings.Count(page, `<img src="`+dataURL("image/png", onePixel)+`"`); n != 2 {
		t.Errorf("%d pictures, want that of the file and the attachment:\n%s", n, page)
	}
	for _, want := range []string{`<a href="../outside.png"`, `<a href="missing.png"`} {
		if !strings.Contains(page, want) {
			t.Errorf("no %s", want)
		}
	}
}

func TestReportTitleAndContents(t *testing.T) {
	page := reportOf(t, About{File: "x.ipynb"},
		markdown("# Boom $f_0$ & *link*\n\nintro"), markdown("## Codes\n\n### AMI\n\n#### detail"), markdown("## Codes"))
	for _, want := range []string{
		"<title>Boom $f_0$ &amp; link</title>",
		`<h2 id="Codes">Codes</h2>`, `<h2 id="Codes-2">Codes</h2>`,
		`<li class="l2"><a href="#Codes">Codes</a></li>`, `<li class="l3"><a href="#AMI">AMI</a></li>`, `<li class="l2"><a href="#Codes-2">Codes</a></li>`,
	} {
		if !strings.Contains(page, want) {
			t.Errorf("no %s", want)
		}
	}
	if strings.Contains(page, `href="#detail"`) {
		t.Error("the contents go below the third level")
	}
	title, contents, intro := strings.Index(page, "</h1>"), strings.Index(page, "<nav"), strings.Index(page, "intro")
	if !(title < contents && contents < intro) {
		t.Errorf("title, contents and text stand at %d, %d, %d", title, contents, intro)
	}
	if page := reportOf(t, About{File: "x.ipynb"}, code("1", 1)); !strings.Contains(page, "<title>x.ipynb</title>") || strings.Contains(page, "<nav") {
		t.Error("a notebook without headings has its file's name as title, and no contents")
	}
}

func TestReportSaysWhatWasRun(t *testing.T) {
	about := About{File: "link.ipynb", Program: "Linewright 1.2", Parameters: map[string]string{"b": "2", "a": "<1>"}, Failure: "Cell 3 failed."}
	page := reportOf(t, about, code("1", 1))
	for _, want := range []string{"link.ipynb, executed by Linewright 1.2.", "Set for this run: <code>a = &lt;1&gt;</code>, <code>b = 2</code>.", "<b>This run failed.</b> Cell 3 failed."} {
		if !strings.Contains(page, want) {
			t.Errorf("no %s", want)
		}
	}
	if again := reportOf(t, about, code("1", 1)); again != page {
		t.Error("the same notebook gives other bytes")
	}
}

func TestFormulasStayReadable(t *testing.T) {
	for source, want := range map[string]string{
		"$a_1 b_1$ and $c_2$":              `<p><span class="math">$a_1 b_1$</span> and <span class="math">$c_2$</span></p>`,
		"$$\na\n- b < *c*\n$$":             `<p><span class="math">$$` + "\na\n- b &lt; *c*\n" + `$$</span></p>`,
		"costs $5 and $6":                  `<p>costs $5 and $6</p>`,
		"in `$x_1$` code $y$":              `<p>in <code>$x_1$</code> code <span class="math">$y$</span></p>`,
		"```\n$x_1$ $y_1$\n```":            "<pre><code>$x_1$ $y_1$\n</code></pre>",
		`an escaped \$x_1$ y_1$`:           `<p>an escaped $x_1$ y_1$</p>`,
		"private \ue0000\ue001 characters": `<p>private 0 characters</p>`,
	} {
		got := strings.TrimSpace(newProse("").html(source, nil))
		if got != want {
			t.Errorf("%q gives\n%s\nwant\n%s", source, got, want)
		}
	}
}

func TestHighlight(t *testing.T) {
	for source, want := range map[string]string{
		"x := f(1, \"a<b\") // c": `x := <span class="f">f</span>(<span class="n">1</span>, <span class="s">&#34;a&lt;b&#34;</span>) <span class="c">// c</span>`,
		"for {\n}":                "<span class=\"k\">for</span> {\n}",
		"s := `a\r\nb`\r\nt":      "s := <span class=\"s\">`a\r\nb`</span>\r\nt", // the scanner leaves carriage returns out
		"\"open\nµ := 'x'":        "<span class=\"s\">&#34;open</span>\nµ := <span class=\"s\">&#39;x&#39;</span>",
		"# no Go @ all \x00":      "# no Go @ all \x00",
		"":                        "",
	} {
		if got := highlight(source); got != want {
			t.Errorf("%q gives\n%q\nwant\n%q", source, got, want)
		}
	}
}

func FuzzHighlightLosesNothing(f *testing.F) {
	for _, s := range []string{"x := f(1) // c", "`a\r\nb`", "/* \r */ \"", "'\\x'", "\xff\ufeff§"} {
		f.Add(s)
	}
	tags := regexp.MustCompile(`</?span[^>]*>`)
	unescape := strings.NewReplacer("&lt;", "<", "&gt;", ">", "&#34;", `"`, "&#39;", "'", "&amp;", "&")
	f.Fuzz(func(t *testing.T, source string) {
		if got := unescape.Replace(tags.ReplaceAllString(highlight(source), "")); got != source && !strings.Contains(source, "span") {
			t.Errorf("%q became %q", source, got)
		}
	})
}

func TestLongTextIsShortened(t *testing.T) {
	s := shorten(strings.Repeat("€", maxText))
	if len(s) > maxText+200 || !strings.Contains(s, "bytes left out here") || strings.ContainsRune(s, '\ufffd') {
		t.Errorf("%d bytes", len(s))
	}
	if short := strings.Repeat("a", maxText); shorten(short) != short {
		t.Error("a short text was changed")
	}
}
