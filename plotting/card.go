package plotting

import (
	"fmt"
	"html"
	"strconv"
	"strings"
	"unicode/utf8"

	"linewright/builtins/linecode"
	"linewright/builtins/page"
)

// A fact is one row of a card.
type fact struct{ what, value string }

// facts returns what a card says of a code.
func facts(c *linecode.Code) []fact {
	levels := make([]string, len(c.Levels()))
	for i, a := range c.Levels() {
		levels[i] = minus(strconv.FormatFloat(a, 'g', 6, 64))
	}
	const most = 16
	if n := len(levels); n > most {
		levels = append(levels[:most-1], "… "+levels[n-1], fmt.Sprintf("(%d levels)", n))
	}
	list := []fact{{"defined by", c.Reference()}}
	if c.Reference() == "" {
		list[0] = fact{"defined by", "a script"}
	}
	list = append(list,
		fact{"source bits per step", strconv.Itoa(c.Bits())},
		fact{"rate", tryFact(func() string { return rateFact(c) })},
		fact{"levels", strings.Join(levels, ", ")},
		fact{"states", tryFact(func() string {
			return fmt.Sprintf("%d, of which %d recurrent and distinct", c.States(), c.Minimal())
		})},
		fact{"delay", delayFact(c.Delay())},
		fact{"data", c.Source().String()},
		fact{"decoding", tryFact(func() string { return decodingFact(c) })},
	)
	return list
}

// rateFact says how many source bits a symbol carries.
func rateFact(c *linecode.Code) string {
	if bits, symbols, fixed := c.FixedRate(); fixed {
		if symbols == 1 {
			return plural(bits, "bit") + " per symbol"
		}
		return fmt.Sprintf("%d/%d bits per symbol", bits, symbols)
	}
	return fmt.Sprintf("%.6g bits per symbol in the mean; data change it", c.Rate())
}

// decodingFact says whether the symbols determine the data.
func decodingFact(c *linecode.Code) string {
	v := c.Decodable()
	if v.Decodable {
		return "decodable, words told apart within " + plural(v.Delay+1, "symbol")
	}
	return v.String()
}

func delayFact(symbols int) string {
	if symbols == 0 {
		return "none"
	}
	return plural(symbols, "symbol")
}

func plural(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// tryFact returns a fact that may be beyond reach, such as the mean rate of a code whose chain is too large: then the
// reason stands in its place. An interrupt goes on.
func tryFact(f func() string) (s string) {
	defer func() {
		if r := recover(); r != nil {
			if page.Context().Err() != nil {
				panic(r)
			}
			s = fmt.Sprint("not worked out: ", r)
		}
	}()
	return f()
}

// wrap breaks a text into lines of at most width characters where its words allow it, those after the first indented.
func wrap(s string, width, indent int) string {
	var b strings.Builder
	column := 0
	for _, w := range strings.Fields(s) {
		n := utf8.RuneCountInString(w)
		switch {
		case column == 0:
		case column+1+n > width:
			b.WriteString("\n" + strings.Repeat(" ", indent))
			column = 0
		default:
			b.WriteByte(' ')
			column++
		}
		b.WriteString(w)
		column += n
	}
	return b.String()
}

// card returns a code's figures as text/html and text/plain.
func card(c *linecode.Code) Bundle {
	list := facts(c)
	width := 0
	for _, f := range list {
		width = max(width, utf8.RuneCountInString(f.what))
	}
	var text, table strings.Builder
	text.WriteString(c.Name())
	fmt.Fprintf(&table, `<table class="linewright"><caption style="text-align:left;color:inherit"><b>%s</b></caption>`, html.EscapeString(c.Name()))
	for _, f := range list {
		fmt.Fprintf(&text, "\n  %-*s  %s", width, f.what, wrap(f.value, 76-width-4, width+4))
		fmt.Fprintf(&table, "\n"+`<tr><th style="text-align:left;vertical-align:top;white-space:nowrap">%s</th><td style="text-align:left;color:inherit">%s</td></tr>`, html.EscapeString(f.what), html.EscapeString(f.value))
	}
	table.WriteString("</table>")
	b := textBundle(text.String())
	b.Data[mimeHTML] = table.String()
	return b
}
