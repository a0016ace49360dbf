package batch

import (
	"encoding/base64"
	"net/url"
	"regexp"
	"strings"
	"sync"

	"github.com/microcosm-cc/bluemonday"
)

// sanitise keeps of foreign HTML what a page can show without running anything and without asking the network: text
// and its structure, links, and pictures that are in the page itself.
func sanitise(html string) string { return policy().Sanitize(html) }

var policy = sync.OnceValue(func() *bluemonday.Policy {
	p := bluemonday.NewPolicy()
	p.AllowElements(
		"p", "br", "hr", "div", "span", "blockquote", "pre", "code", "kbd", "samp", "var", "b", "strong", "i", "em", "u", "s",
		"del", "ins", "sub", "sup", "small", "mark", "abbr", "cite", "q", "dfn", "h1", "h2", "h3", "h4", "h5", "h6",
		"figure", "figcaption", "details", "summary", "section", "center",
	)
	p.AllowLists()
	p.AllowTables()
	p.AllowAttrs("checked", "disabled").OnElements("input") // of task lists
	p.AllowAttrs("type").Matching(regexp.MustCompile(`^checkbox$`)).OnElements("input")
	p.AllowAttrs("open").OnElements("details")
	p.AllowAttrs("id").Matching(regexp.MustCompile(`^[^\s"'<>]+$`)).OnElements("h1", "h2", "h3", "h4", "h5", "h6")
	p.AllowAttrs("class").Matching(regexp.MustCompile(`^(linewright[a-z-]*|[ksncf])$`)).Globally()
	p.AllowAttrs("title", "dir", "lang").Globally()
	p.AllowAttrs("align").Matching(regexp.MustCompile(`^(left|right|center)$`)).Globally()
	p.AllowStyles("text-align", "vertical-align", "font-weight", "font-style", "font-variant-numeric", "white-space",
		"color", "background-color", "width", "max-width", "padding", "padding-left", "padding-right", "border-collapse").Globally()

	p.RequireParseableURLs(true)
	p.AllowRelativeURLs(true)
	p.AllowURLSchemes("http", "https", "mailto")
	p.AllowURLSchemeWithCustomPolicy("data", pictureData)
	p.AllowAttrs("href").Matching(regexp.MustCompile(`^(https?:|mailto:|#|[^:]*$)`)).OnElements("a")
	p.AllowAttrs("src").Matching(regexp.MustCompile(`^data:`)).OnElements("img")
	p.AllowAttrs("alt", "width", "height").OnElements("img")
	return p
})

// pictures are the MIME types of pictures that browsers show, by the file names' endings.
var pictures = map[string]string{
	".png": "image/png", ".jpg": "image/jpeg", ".jpeg": "image/jpeg", ".gif": "image/gif", ".webp": "image/webp", ".svg": "image/svg+xml",
}

// pictureData reports whether a data URL is a picture. An SVG in an img element runs no scripts and loads nothing.
func pictureData(u *url.URL) bool {
	mime, data, ok := strings.Cut(u.Opaque, ";base64,")
	if !ok {
		return false
	}
	for _, known := range pictures {
		if mime == known {
			_, err := base64.StdEncoding.DecodeString(data)
			return err == nil
		}
	}
	return false
}

// dataURL returns a picture as a URL that holds it.
func dataURL(mime string, data []byte) string {
	return "data:" + mime + ";base64," + base64.StdEncoding.EncodeToString(data)
}
