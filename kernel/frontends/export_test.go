package frontends

import (
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// worked is a notebook with stored outputs: cards, figures, text.
const worked = "../../notebooks/hoist-link.ipynb"

// pngFigures are the exporter's options that take the PNG of each figure. Its HTML form empties every SVG in versions
// 6.5.1 and later, up to one of 2023 (nbconvert issue 1849, cured by its pull request 2018). Its LaTeX form calls a
// converter for each SVG, which is usually absent, and then prefers the PNG anyway.
var pngFigures = map[string]string{
	"html":  `--NbConvertBase.display_data_priority=["text/html", "text/markdown", "image/png", "text/latex", "text/plain"]`,
	"latex": "--SVG2PDFPreprocessor.enabled=False",
	"pdf":   "--SVG2PDFPreprocessor.enabled=False",
}

// export runs the exporter on the worked notebook and returns the file that it wrote.
func export(t *testing.T, format, extension string) string {
	t.Helper()
	need(t, "jupyter-nbconvert")
	folder := t.TempDir()
	run(t, time.Minute, "jupyter-nbconvert", pngFigures[format], "--to", format, "--output-dir", folder, worked)
	file := filepath.Join(folder, strings.TrimSuffix(filepath.Base(worked), ".ipynb")+extension)
	if _, err := os.Stat(file); err != nil {
		t.Fatal(err)
	}
	return file
}

// TestExportHTML looks at the exporter's page, and at the PDF that a browser prints of it.
func TestExportHTML(t *testing.T) {
	file := export(t, "html", ".html")
	ctx := browser(t, time.Minute)
	const images = `[...document.querySelectorAll('.jp-RenderedImage img')]`
	do(t, ctx, "open the page", chromedp.Navigate("file://"+file), until(images+`.every(e => e.complete)`))
	screenshot(t, ctx, "export-html")
	checkScale(t, value[[]float64](t, ctx, images+scale))
	if !value[bool](t, ctx, `[...document.querySelectorAll('.jp-RenderedHTMLCommon table caption')].some(e => e.innerText.includes('HDB3'))`) {
		t.Error("no card of a code on the page")
	}

	printed := filepath.Join(t.TempDir(), "printed.pdf")
	run(t, time.Minute, need(t, "chromium"), "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run", "--user-data-dir="+t.TempDir(),
		"--host-resolver-rules=MAP * ~NOTFOUND", "--print-to-pdf="+printed, "file://"+file)
	checkPDF(t, "export-browser.pdf", printed)
}

// TestExportLaTeX exports without the exporter's converter of SVG: each figure is there as a PNG file.
func TestExportLaTeX(t *testing.T) {
	need(t, "pandoc")
	file := export(t, "latex", ".tex")
	source, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	figures := regexp.MustCompile(`\\adjustimage\{.*\}\{(.*)\}`).FindAllStringSubmatch(string(source), -1)
	if want := storedFigures(t); len(figures) != want {
		t.Errorf("%d figures in the document, the notebook has %d", len(figures), want)
	}
	for _, f := range figures {
		data, err := os.ReadFile(filepath.Join(filepath.Dir(file), f[1]))
		if err != nil || !strings.HasPrefix(string(data), "\x89PNG") {
			t.Errorf("%s is no PNG file: %v", f[1], err)
		}
	}
	if !strings.Contains(string(source), "alternate mark inversion") {
		t.Error("the document lacks the card of AMI")
	}
}

// TestExportPDF exports by way of TeX. TeX is half a gigabyte, so that its absence is no failure anywhere.
func TestExportPDF(t *testing.T) {
	if _, err := exec.LookPath("xelatex"); err != nil {
		t.Skip("xelatex is not installed, and too large to require; on Debian: " +
			"apt-get install -y --no-install-recommends texlive-xetex texlive-plain-generic texlive-fonts-recommended lmodern")
	}
	need(t, "pandoc")
	checkPDF(t, "export-tex.pdf", export(t, "pdf", ".pdf"))
}

// checkPDF looks for the worked notebook's figures and for its cards' text in a PDF, which it keeps under a name.
func checkPDF(t *testing.T, name, path string) {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	keep(t, name, data)
	list := run(t, time.Minute, need(t, "pdfimages"), "-list", path)
	if n, want := len(regexp.MustCompile(`(?m)^ *\d+ +\d+ image +1344 `).FindAllString(list, -1)), storedFigures(t); n != want {
		t.Errorf("%d figures of 1344 pixels in the PDF, the notebook has %d:\n%s", n, want, list)
	}
	if text := run(t, time.Minute, need(t, "pdftotext"), path, "-"); !strings.Contains(text, "−1, 0, 1") {
		t.Errorf("AMI's levels are not readable in the PDF:\n%s", text)
	}
}

// scale maps a JavaScript list of images to the pixels that each has for a pixel of the page.
const scale = `.map(e => e.naturalWidth / e.getBoundingClientRect().width)`

// checkScale checks that the worked notebook's figures are all there, at twice the page's resolution.
func checkScale(t *testing.T, scales []float64) {
	t.Helper()
	if want := storedFigures(t); len(scales) != want {
		t.Errorf("%d figures on the page, the notebook has %d", len(scales), want)
	}
	for i, s := range scales {
		if !(s > 1.99 && s < 2.01) {
			t.Errorf("figure %d has %.3g pixels for a pixel of the page, want 2", i, s)
		}
	}
}

// storedFigures counts the figures that the worked notebook stores.
func storedFigures(t *testing.T) int {
	t.Helper()
	data, err := os.ReadFile(worked)
	if err != nil {
		t.Fatal(err)
	}
	n := strings.Count(string(data), `"image/svg+xml":`)
	if n == 0 {
		t.Fatal("the worked notebook has no figures")
	}
	return n
}
