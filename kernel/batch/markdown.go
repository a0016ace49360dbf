package batch

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"html"
	"io"
	"net/url"
	"os"
	"path"
	"regexp"
	"strconv"
	"strings"
	"unicode"

	"github.com/yuin/goldmark"
	"github.com/yuin/goldmark/ast"
	"github.com/yuin/goldmark/extension"
	"github.com/yuin/goldmark/parser"
	"github.com/yuin/goldmark/renderer"
	ghtml "github.com/yuin/goldmark/renderer/html"
	gtext "github.com/yuin/goldmark/text"
	"github.com/yuin/goldmark/util"
)

// Heading is one heading of the notebook's text.
type Heading struct {
	Level  int
	Text   string
	Anchor string // id of the heading's element
}

// prose turns the Markdown cells of one notebook into HTML. Headings get anchors that are unique in the page, and
// pictures that the notebook has beside it are put into the page.
type prose struct {
	folder   string // of the notebook; relative pictures are looked up below it
	anchors  anchors
	headings []Heading
	markdown goldmark.Markdown
}

func newProse(folder string) *prose {
	return &prose{
		folder:  folder,
		anchors: anchors{},
		markdown: goldmark.New(
			goldmark.WithExtensions(extension.GFM),
			goldmark.WithParserOptions(parser.WithAutoHeadingID()),
			goldmark.WithRendererOptions(ghtml.WithUnsafe(), renderer.WithNodeRenderers(util.Prioritized(fences{}, 100))),
		),
	}
}

// html returns a cell's text as sanitised HTML. attachments are the cell's, by name and MIME type.
func (p *prose) html(source string, attachments map[string]any) string {
	source, formulas := holdFormulas(source)
	src := []byte(source)
	doc := p.markdown.Parser().Parse(gtext.NewReader(src), parser.WithContext(parser.NewContext(parser.WithIDs(p.anchors))))
	var images []*ast.Image
	ast.Walk(doc, func(n ast.Node, entering bool) (ast.WalkStatus, error) {
		if !entering {
			return ast.WalkContinue, nil
		}
		switch n := n.(type) {
		case *ast.Heading:
			id, _ := n.AttributeString("id")
			anchor, _ := id.([]byte)
			p.headings = append(p.headings, Heading{n.Level, formulas.plain(plainText(n, src)), string(anchor)})
		case *ast.Image:
			images = append(images, n)
		}
		return ast.WalkContinue, nil
	})
	for _, n := range images {
		p.picture(n, attachments)
	}
	var b bytes.Buffer
	if err := p.markdown.Renderer().Render(&b, src, doc); err != nil { // a write to memory does not fail
		return "<pre>" + html.EscapeString(source) + "</pre>"
	}
	return formulas.back(sanitise(b.String()))
}

// plainText returns the text of a node without its markup.
func plainText(n ast.Node, src []byte) string {
	var b strings.Builder
	ast.Walk(n, func(n ast.Node, entering bool) (ast.WalkStatus, error) {
		if t, ok := n.(*ast.Text); ok && entering {
			b.Write(t.Value(src))
		} else if t, ok := n.(*ast.String); ok && entering {
			b.Write(t.Value)
		}
		return ast.WalkContinue, nil
	})
	return b.String()
}

// picture puts the picture that an image refers to into its URL. One that cannot be had without the network becomes a
// link.
func (p *prose) picture(n *ast.Image, attachments map[string]any) {
	target := string(n.Destination)
	if name, ok := strings.CutPrefix(target, "attachment:"); ok {
		bundle, _ := attachments[name].(map[string]any)
		for _, mime := range pictures {
			data, _ := text(bundle[mime])
			if raw, err := base64.StdEncoding.DecodeString(strings.Join(strings.Fields(data), "")); err == nil && len(raw) > 0 {
				n.Destination = []byte(dataURL(mime, raw))
			}
		}
		return
	}
	if data, ok := p.local(target); ok {
		n.Destination = []byte(data)
		return
	}
	if strings.HasPrefix(target, "data:") {
		return
	}
	link := ast.NewLink()
	link.Destination = n.Destination
	for n.HasChildren() {
		link.AppendChild(link, n.FirstChild())
	}
	if !link.HasChildren() {
		link.AppendChild(link, ast.NewString([]byte(target)))
	}
	n.Parent().ReplaceChild(n.Parent(), n, link)
}

// maxPicture is the largest file that is put into a report, in bytes.
const maxPicture = 32 << 20

// local returns the picture in a file below the notebook's folder as a data URL.
func (p *prose) local(target string) (string, bool) {
	mime := pictures[strings.ToLower(path.Ext(target))]
	u, err := url.Parse(target)
	if mime == "" || err != nil || u.Scheme != "" || u.Host != "" {
		return "", false
	}
	f, err := os.OpenInRoot(p.folder, u.Path)
	if err != nil {
		return "", false
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxPicture+1))
	if err != nil || len(data) > maxPicture {
		return "", false
	}
	return dataURL(mime, data), true
}

// anchors makes the ids of headings as front ends make them, blanks as hyphens, so that links within a notebook hold.
// It maps the ids that are taken.
type anchors map[string]bool

var _ parser.IDs = anchors{}

func (a anchors) Generate(value []byte, _ ast.NodeKind) []byte {
	id := strings.Map(func(r rune) rune {
		switch {
		case unicode.IsSpace(r):
			return '-'
		case strings.ContainsRune("\"'<>`*", r) || !unicode.IsGraphic(r) || unicode.Is(unicode.Co, r):
			return -1
		}
		return r
	}, strings.TrimSpace(string(value)))
	if id == "" {
		id = "section"
	}
	for base, k := id, 2; a[id]; k++ {
		id = fmt.Sprintf("%s-%d", base, k)
	}
	a[id] = true
	return []byte(id)
}

func (a anchors) Put(value []byte) { a[string(value)] = true }

// fences renders fenced code in Go with its tokens marked and all other code as it stands.
type fences struct{}

func (f fences) RegisterFuncs(r renderer.NodeRendererFuncRegisterer) {
	r.Register(ast.KindFencedCodeBlock, f.render)
}

func (fences) render(w util.BufWriter, src []byte, n ast.Node, entering bool) (ast.WalkStatus, error) {
	if !entering {
		return ast.WalkContinue, nil
	}
	block := n.(*ast.FencedCodeBlock)
	code := string(block.Lines().Value(src))
	if string(block.Language(src)) == "go" {
		code = highlight(code)
	} else {
		code = html.EscapeString(code)
	}
	w.WriteString("<pre><code>" + code + "</code></pre>\n")
	return ast.WalkSkipChildren, nil
}

// formulas are the TeX formulas of a cell. A report shows them as they are written; Markdown must not see them, or it
// would take an index for emphasis.
type formulas []string

// A held formula stands in the text as its number between two characters of the private use area.
const holdOpen, holdShut = "\ue000", "\ue001"

var (
	codeOrFormula = regexp.MustCompile("(?s)```.*?```|~~~.*?~~~|`[^`\n]+`|\\$\\$.+?\\$\\$|\\\\\\$|\\$[^\\s$](?:[^$\n]*?[^\\s$\\\\])?\\$")
	held          = regexp.MustCompile(holdOpen + `(\d+)` + holdShut)
)

// holdFormulas takes the formulas out of a text: what stands between dollar signs that are no prices, outside of code.
func holdFormulas(source string) (string, formulas) {
	source = strings.NewReplacer(holdOpen, "", holdShut, "").Replace(source)
	var (
		f    formulas
		b    strings.Builder
		done int
	)
	for _, at := range codeOrFormula.FindAllStringIndex(source, -1) {
		found := source[at[0]:at[1]]
		digitFollows := at[1] < len(source) && source[at[1]] >= '0' && source[at[1]] <= '9'
		if found[0] != '$' || digitFollows && !strings.HasPrefix(found, "$$") {
			continue
		}
		b.WriteString(source[done:at[0]] + holdOpen + strconv.Itoa(len(f)) + holdShut)
		f = append(f, found)
		done = at[1]
	}
	return b.String() + source[done:], f
}

// back puts the formulas into HTML, each in an element of its own.
func (f formulas) back(page string) string {
	return f.replace(page, func(s string) string { return `<span class="math">` + html.EscapeString(s) + `</span>` })
}

// plain puts the formulas into plain text.
func (f formulas) plain(s string) string {
	return f.replace(s, func(s string) string { return s })
}

func (f formulas) replace(s string, form func(string) string) string {
	return held.ReplaceAllStringFunc(s, func(m string) string {
		i, err := strconv.Atoi(m[len(holdOpen) : len(m)-len(holdShut)])
		if err != nil || i >= len(f) {
			return ""
		}
		return form(f[i])
	})
}
