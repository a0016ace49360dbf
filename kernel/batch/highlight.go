package batch

import (
	"go/scanner"
	"go/token"
	"html"
	"strings"
)

// highlight returns Go source as HTML, its tokens in spans of the classes k (keyword), s (string), n (number),
// c (comment) and f (called function). Source that is no Go comes out whole as well.
func highlight(source string) string {
	var (
		s     scanner.Scanner
		b     strings.Builder
		set   = token.NewFileSet()
		src   = []byte(source)
		file  = set.AddFile("", set.Base(), len(src))
		done  = 0 // bytes of source written
		quiet = func(token.Position, string) {}
	)
	s.Init(file, src, quiet, scanner.ScanComments)
	write := func(from, to int, class string) {
		if from < done || to <= from { // an automatic semicolon has no text
			return
		}
		b.WriteString(html.EscapeString(source[done:from]))
		text := html.EscapeString(source[from:to])
		if class == "" {
			b.WriteString(text)
		} else {
			b.WriteString(`<span class="` + class + `">` + text + `</span>`)
		}
		done = to
	}
	for {
		pos, tok, literal := s.Scan()
		if tok == token.EOF {
			break
		}
		from := file.Offset(pos)
		switch {
		case tok == token.COMMENT:
			write(from, end(source, from, literal), "c")
		case tok == token.STRING || tok == token.CHAR:
			write(from, end(source, from, literal), "s")
		case tok == token.INT || tok == token.FLOAT || tok == token.IMAG:
			write(from, from+len(literal), "n")
		case tok.IsKeyword():
			write(from, from+len(literal), "k")
		case tok == token.IDENT && strings.HasPrefix(source[from+len(literal):], "("):
			write(from, from+len(literal), "f")
		}
	}
	b.WriteString(html.EscapeString(source[done:]))
	return b.String()
}

// end returns where a token ends whose literal may lack the carriage returns of the source.
func end(source string, from int, literal string) int {
	to := from
	for _, c := range []byte(literal) {
		for to < len(source) && source[to] == '\r' && c != '\r' {
			to++
		}
		to++
	}
	return min(to, len(source))
}
