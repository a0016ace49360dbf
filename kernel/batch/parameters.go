package batch

import (
	"go/scanner"
	"go/token"
	"strconv"
	"strings"
)

// Parameter is one that a notebook asks for, as its cells spell it.
type Parameter struct {
	Name     string
	Type     string // "number", "whole number", "true or false" or "text"
	Standard string // the Go expression of the standard value
	Unit     string // of numbers; may be empty
	Cell     int    // number of the first cell that asks, from 1, of those with code
}

// kinds are the functions of package page that ask for a parameter.
var kinds = map[string]string{"Float": "number", "Int": "whole number", "Bool": "true or false", "Text": "text"}

// Parameters returns the parameters that the cells ask for, in the order of the cells. It reads the cells and does not
// run them: a name that is not written as a literal is not found.
func (n *Notebook) Parameters() []Parameter {
	var all []Parameter
	seen := map[string]bool{}
	for i, c := range n.Code() {
		tokens := tokensOf(c.Source)
		for k := range tokens {
			p, ok := parameterAt(c.Source, tokens[k:])
			if ok && !seen[p.Name] {
				seen[p.Name] = true
				p.Cell = i + 1
				all = append(all, p)
			}
		}
	}
	return all
}

type lexeme struct {
	offset  int
	token   token.Token
	literal string
}

func tokensOf(source string) []lexeme {
	var s scanner.Scanner
	file := token.NewFileSet().AddFile("", -1, len(source))
	s.Init(file, []byte(source), func(token.Position, string) {}, 0)
	var all []lexeme
	for {
		pos, tok, literal := s.Scan()
		all = append(all, lexeme{file.Offset(pos), tok, literal})
		if tok == token.EOF {
			return all
		}
	}
}

// parameterAt reads page.KIND("name", standard [, "unit"]) at the beginning of tokens.
func parameterAt(source string, tokens []lexeme) (p Parameter, ok bool) {
	shape := []token.Token{token.IDENT, token.PERIOD, token.IDENT, token.LPAREN, token.STRING, token.COMMA}
	if len(tokens) <= len(shape) {
		return p, false
	}
	for i, want := range shape {
		if tokens[i].token != want {
			return p, false
		}
	}
	if p.Type, ok = kinds[tokens[2].literal]; !ok || tokens[0].literal != "page" {
		return p, false
	}
	p.Name, _ = strconv.Unquote(tokens[4].literal) // the scanner has seen that it is a string
	arguments := []string{}
	depth, start := 0, tokens[len(shape)].offset
	for _, t := range tokens[len(shape):] {
		switch t.token {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
		case token.RPAREN, token.RBRACE, token.RBRACK:
			depth--
		case token.EOF:
			return p, false
		}
		if depth < 0 || depth == 0 && t.token == token.COMMA {
			arguments = append(arguments, strings.TrimSpace(source[start:t.offset]))
			start = t.offset + 1
		}
		if depth < 0 {
			break
		}
	}
	p.Standard = arguments[0]
	if len(arguments) > 1 {
		p.Unit, _ = strconv.Unquote(arguments[1])
	}
	return p, true
}
