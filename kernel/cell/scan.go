package cell

import (
	"go/scanner"
	"go/token"
	"strings"
)

// A chunk is one top-level declaration or statement of a cell: the bytes [start, end) of its source.
type chunk struct {
	kind       token.Token // IMPORT, TYPE, CONST or FUNC for a declaration; ILLEGAL for a statement
	start, end int
}

// item is one token of a cell's source.
type item struct {
	tok        token.Token
	lit        string
	start, end int
}

// tokens scans src, with the semicolons that Go inserts. It stops at nothing: errors are the parser's matter.
func tokens(src string) []item {
	fset := token.NewFileSet()
	f := fset.AddFile("", -1, len(src))
	var s scanner.Scanner
	s.Init(f, []byte(src), func(token.Position, string) {}, 0)
	var items []item
	for {
		pos, tok, lit := s.Scan()
		if tok == token.EOF {
			return items
		}
		start := f.Offset(pos)
		end := start + len(lit)
		if lit == "" {
			end = start + len(tok.String())
		}
		if tok == token.SEMICOLON && lit != ";" {
			end = start
		}
		items = append(items, item{tok, lit, start, min(end, len(src))})
	}
}

// split cuts a cell at the semicolons outside of all brackets.
func split(src string) []chunk {
	var chunks []chunk
	items := tokens(src)
	depth, first := 0, -1
	for i, it := range items {
		switch it.tok {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
		case token.RPAREN, token.RBRACE, token.RBRACK:
			depth--
		}
		if it.tok == token.SEMICOLON && depth <= 0 {
			if first >= 0 {
				chunks = append(chunks, chunk{kind(items[first:i]), items[first].start, it.end})
			}
			first, depth = -1, 0
			continue
		}
		if first < 0 {
			first = i
		}
	}
	if first >= 0 {
		chunks = append(chunks, chunk{kind(items[first:]), items[first].start, len(src)})
	}
	return chunks
}

// kind tells a declaration from a statement by its first tokens.
func kind(items []item) token.Token {
	switch tok := items[0].tok; tok {
	case token.IMPORT, token.TYPE, token.CONST, token.PACKAGE:
		return tok
	case token.FUNC:
		if len(items) > 1 && items[1].tok == token.IDENT {
			return tok
		}
		// A method has a receiver, a name and parameters; a function literal that is called has no name.
		if len(items) > 1 && items[1].tok == token.LPAREN {
			if i := closing(items, 1); i+2 < len(items) && items[i+1].tok == token.IDENT && items[i+2].tok == token.LPAREN {
				return tok
			}
		}
	}
	return token.ILLEGAL
}

// closing returns the index of the bracket that closes the one at items[open], or len(items).
func closing(items []item, open int) int {
	depth := 0
	for i := open; i < len(items); i++ {
		switch items[i].tok {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
		case token.RPAREN, token.RBRACE, token.RBRACK:
			if depth--; depth == 0 {
				return i
			}
		}
	}
	return len(items)
}

// IsComplete reports whether code can be run as it stands ("complete"), goes on in another line ("incomplete", with the
// indent of that line), or is wrong however it goes on ("invalid").
func (in *Interpreter) IsComplete(code string) (status, indent string) {
	if strings.TrimSpace(code) == "" {
		return "complete", ""
	}
	if status, indent := open(code); status != "" {
		return status, indent
	}
	if _, err := parse(token.NewFileSet(), 0, code); err != nil {
		// A statement that ends in an operator or a comma goes on; so does one that the parser misses the end of.
		items := tokens(code)
		if last := items[len(items)-1].tok; last.IsOperator() && last != token.SEMICOLON && !closes(last) && last != token.INC && last != token.DEC {
			return "incomplete", ""
		}
		return "invalid", ""
	}
	return "complete", ""
}

func closes(t token.Token) bool { return t == token.RPAREN || t == token.RBRACE || t == token.RBRACK }

// open finds brackets, raw strings and comments that are still open.
func open(code string) (status, indent string) {
	fset := token.NewFileSet()
	f := fset.AddFile("", -1, len(code))
	var s scanner.Scanner
	status = ""
	s.Init(f, []byte(code), func(_ token.Position, msg string) {
		switch msg {
		case "raw string literal not terminated", "comment not terminated":
			status = "incomplete"
		default:
			status = "invalid"
		}
	}, 0)
	var stack []token.Token
	for {
		_, tok, _ := s.Scan()
		switch tok {
		case token.EOF:
			if status == "" && len(stack) > 0 {
				return "incomplete", strings.Repeat("\t", len(stack))
			}
			return status, ""
		case token.LPAREN, token.LBRACE, token.LBRACK:
			stack = append(stack, tok)
		case token.RPAREN, token.RBRACE, token.RBRACK:
			want := map[token.Token]token.Token{token.RPAREN: token.LPAREN, token.RBRACE: token.LBRACE, token.RBRACK: token.LBRACK}[tok]
			if len(stack) == 0 || stack[len(stack)-1] != want {
				return "invalid", ""
			}
			stack = stack[:len(stack)-1]
		}
	}
}
