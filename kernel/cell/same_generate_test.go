package cell

import (
	"fmt"
	"math/rand/v2"
	"strings"
)

// generator makes small programs that are valid Go, end, and print the same on every run.
type generator struct {
	*rand.Rand
	b      strings.Builder
	depth  int // of blocks
	names  int
	scopes []map[string][]string // type -> variables, by block
	inFunc bool                  // in a function declaration, which knows no variables of the cell
}

// sameProgram returns the program of a seed.
func sameProgram(seed uint64) string {
	g := &generator{Rand: rand.New(rand.NewPCG(seed, 1))}
	g.declarations()
	g.scopes = []map[string][]string{{}}
	for _, t := range []string{"int", "uint8", "float64", "string", "bool", "[]int", "map[string]int", "pair"} {
		g.variable(t)
	}
	for range 4 + g.IntN(6) {
		g.statement()
	}
	for _, t := range []string{"int", "uint8", "float64", "string", "bool", "[]int", "map[string]int", "pair"} {
		g.line("fmt.Println(%s)", strings.Join(g.scopes[0][t], ", "))
	}
	return g.b.String()
}

func (g *generator) line(format string, args ...any) {
	g.b.WriteString(strings.Repeat("\t", g.depth))
	fmt.Fprintf(&g.b, format+"\n", args...)
}

func (g *generator) name() string {
	g.names++
	return fmt.Sprintf("v%d", g.names)
}

func (g *generator) block(head string, body func(), foot string) {
	g.line("%s", head)
	g.depth++
	g.scopes = append(g.scopes, map[string][]string{})
	body()
	g.scopes = g.scopes[:len(g.scopes)-1]
	g.depth--
	g.line("%s", foot)
}

// declarations declares what the statements use.
func (g *generator) declarations() {
	g.line("import \"slices\"")
	g.line("type pair struct {\n\ta int\n\tb string\n}")
	g.block("func (p pair) sum(k int) int {", func() {
		g.add("int", "p.a", "k")
		g.line("return %s", g.expr("int", 2))
	}, "}")
	g.block("func (p *pair) grow(k int) {", func() {
		g.add("int", "p.a", "k")
		g.line("p.a = %s", g.expr("int", 2))
		g.line("p.b += %q", "x")
	}, "}")
	g.inFunc = true
	g.block("func f(a, b int) (r int) {", func() {
		g.add("int", "a", "b", "r")
		if g.IntN(2) == 0 {
			g.line("defer func() { r += %s }()", g.expr("int", 1))
		}
		for range 1 + g.IntN(2) {
			g.statement()
		}
		g.line("return %s", g.expr("int", 2))
	}, "}")
	g.inFunc = false
	g.block("func count(n int) func(func(int) bool) {", func() {
		g.line("return func(yield func(int) bool) {\n\t\tfor i := range n {\n\t\t\tif !yield(i*i) {\n\t\t\t\treturn\n\t\t\t}\n\t\t}\n\t}")
	}, "}")
	g.line("func ordered(s []int) []int {\n\ts = slices.Clone(s)\n\tslices.Sort(s)\n\treturn s\n}")
	g.line("func apply[T, U any](s []T, f func(T) U) (out []U) {\n\tfor _, x := range s {\n\t\tout = append(out, f(x))\n\t}\n\treturn out\n}")
}

func (g *generator) add(t string, names ...string) {
	m := g.scopes[len(g.scopes)-1]
	m[t] = append(m[t], names...)
}

// pick returns a variable of a type that is in scope, or "".
func (g *generator) pick(t string) string {
	var all []string
	for _, s := range g.scopes {
		all = append(all, s[t]...)
	}
	if len(all) == 0 {
		return ""
	}
	return all[g.IntN(len(all))]
}

// variable declares a variable and uses it.
func (g *generator) variable(t string) {
	n := g.name()
	switch {
	case t == "map[string]int":
		g.line("%s := map[string]int{\"k\": %s, \"m\": %d}", n, g.expr("int", 1), g.IntN(9))
	case g.IntN(2) == 0:
		g.line("var %s %s = %s", n, t, g.expr(t, 2))
	case t == "uint8" || t == "float64":
		g.line("%s := %s(%s)", n, t, g.expr(t, 2))
	default:
		g.line("%s := %s", n, g.expr(t, 2))
	}
	g.line("_ = %s", n)
	g.add(t, n)
}

// expr returns an expression of a type. Constants never overflow, divisors are never zero, indices are never out of range.
func (g *generator) expr(t string, depth int) string {
	v := g.pick(t)
	if depth <= 0 || g.IntN(6) == 0 {
		if v != "" && g.IntN(3) > 0 {
			return v
		}
		switch t {
		case "int":
			return fmt.Sprint(g.IntN(100))
		case "uint8":
			return fmt.Sprint(g.IntN(10))
		case "float64":
			return []string{"0.5", "1.25", "3", "1e3"}[g.IntN(4)]
		case "string":
			return []string{`"a"`, `"bé"`, `""`, "`c\\n`"}[g.IntN(4)]
		case "bool":
			return []string{"true", "false"}[g.IntN(2)]
		case "[]int":
			return fmt.Sprintf("[]int{%d, %d, %d}", g.IntN(9), g.IntN(9), g.IntN(9))
		case "pair":
			return fmt.Sprintf("pair{%d, \"p\"}", g.IntN(9))
		}
	}
	sub := func(t string) string { return g.expr(t, depth-1) }
	anInt := func() string {
		if n := g.pick("int"); n != "" {
			return n
		}
		return "len([]int{1})"
	}
	switch t {
	case "int":
		switch g.IntN(13) {
		case 0, 1, 2:
			return fmt.Sprintf("(%s %s %s)", sub("int"), []string{"+", "-", "*", "&", "|", "^", "&^"}[g.IntN(7)], sub("int"))
		case 3:
			return fmt.Sprintf("(%s %s ((%s & 7) + 1))", sub("int"), []string{"/", "%"}[g.IntN(2)], sub("int"))
		case 4:
			return fmt.Sprintf("(%s %s (uint(%s) & 7))", anInt(), []string{"<<", ">>"}[g.IntN(2)], anInt())
		case 5:
			return fmt.Sprintf("len(%s)", sub("string"))
		case 6:
			if s := g.pick("[]int"); s != "" {
				return fmt.Sprintf("%s[(%s & 0xff) %% len(%s)]", s, anInt(), s)
			}
			return "len(" + sub("[]int") + ")"
		case 7:
			return "int(" + sub("uint8") + ")"
		case 8:
			if g.inFunc || len(g.scopes) == 0 || g.pick("map[string]int") == "" {
				return "-" + anInt()
			}
			return fmt.Sprintf("f(%s, %s)", sub("int"), sub("int"))
		case 9:
			if m := g.pick("map[string]int"); m != "" {
				return fmt.Sprintf("%s[%s]", m, sub("string"))
			}
			return "^" + anInt()
		case 10:
			return fmt.Sprintf("func() int { if %s { return %s }; return %s }()", sub("bool"), sub("int"), sub("int"))
		case 11:
			return fmt.Sprintf("%s(%s, %s)", []string{"min", "max"}[g.IntN(2)], sub("int"), anInt())
		default:
			if p := g.pick("pair"); p != "" {
				return fmt.Sprintf("%s.sum(%s)", p, sub("int"))
			}
			return "slices.Max(" + sub("[]int") + ")"
		}
	case "uint8":
		if v == "" {
			return fmt.Sprintf("uint8(%s)", anInt())
		}
		switch g.IntN(3) {
		case 0:
			return fmt.Sprintf("(%s %s %s)", v, []string{"+", "-", "*", "^", "|"}[g.IntN(5)], sub("uint8"))
		case 1:
			return fmt.Sprintf("uint8(%s + %s)", anInt(), sub("int"))
		default:
			return fmt.Sprintf("(%s << (%s & 7))", v, v)
		}
	case "float64":
		switch g.IntN(4) {
		case 0, 1:
			return fmt.Sprintf("(%s %s %s)", sub("float64"), []string{"+", "-", "*"}[g.IntN(3)], sub("float64"))
		case 2:
			x := g.pick("float64")
			if x == "" {
				return "2.5"
			}
			return fmt.Sprintf("(%s / (%s*%s + 1))", sub("float64"), x, x)
		default:
			return "float64(" + anInt() + ")"
		}
	case "string":
		switch g.IntN(4) {
		case 0:
			return fmt.Sprintf("(%s + %s)", sub("string"), sub("string"))
		case 1:
			return fmt.Sprintf("fmt.Sprint(%s)", sub([]string{"int", "float64", "bool", "uint8"}[g.IntN(4)]))
		case 2:
			return fmt.Sprintf("fmt.Sprintf(\"%%03d|%%v\", %s, %s)", sub("int"), sub("[]int"))
		default:
			if p := g.pick("pair"); p != "" {
				return p + ".b"
			}
			return fmt.Sprintf("string(rune('a' + %s&7))", anInt())
		}
	case "bool":
		switch g.IntN(4) {
		case 0:
			return fmt.Sprintf("(%s %s %s)", sub("int"), []string{"<", "<=", ">", ">=", "==", "!="}[g.IntN(6)], anInt())
		case 1:
			return fmt.Sprintf("(%s %s %s)", sub("bool"), []string{"&&", "||"}[g.IntN(2)], sub("bool"))
		case 2:
			return "!" + sub("bool")
		default:
			return fmt.Sprintf("(%s %s %s)", sub("string"), []string{"<", "==", ">"}[g.IntN(3)], sub("string"))
		}
	case "[]int":
		switch g.IntN(4) {
		case 0:
			return fmt.Sprintf("append([]int{%s}, %s...)", sub("int"), sub("[]int"))
		case 1:
			return fmt.Sprintf("apply([]int{%s, %s}, func(x int) int { return x + %s })", sub("int"), sub("int"), sub("int"))
		case 2:
			return fmt.Sprintf("slices.Collect(count(%d))", 1+g.IntN(5))
		default:
			return fmt.Sprintf("ordered(%s)", sub("[]int"))
		}
	default:
		return fmt.Sprintf("pair{a: %s, b: %s}", sub("int"), sub("string"))
	}
}

// statement writes one statement.
func (g *generator) statement() {
	i := g.pick("int")
	body := func() {
		for range 1 + g.IntN(2) {
			g.statement()
		}
	}
	deep := g.depth > 2
	switch k := g.IntN(22); {
	case k == 0:
		g.variable([]string{"int", "uint8", "float64", "string", "bool", "[]int"}[g.IntN(6)])
	case k <= 2 || deep:
		t := []string{"int", "uint8", "float64", "string", "bool", "pair"}[g.IntN(6)]
		if v := g.pick(t); v != "" {
			g.line("%s = %s", v, g.expr(t, 3))
		}
	case k == 3:
		g.line("%s %s= %s", i, []string{"+", "-", "*", "^"}[g.IntN(4)], g.expr("int", 2))
	case k == 4:
		g.block(fmt.Sprintf("if %s {", g.expr("bool", 2)), body, "}")
	case k == 5:
		n := g.name()
		g.block(fmt.Sprintf("if %s := %s; %s > %s {", n, g.expr("int", 2), n, i), body, fmt.Sprintf("} else {\n%s\t%s++\n%s}", strings.Repeat("\t", g.depth), i, strings.Repeat("\t", g.depth)))
	case k == 6:
		n, fs := g.name(), g.name()
		g.line("var %s []func() int", fs)
		g.block(fmt.Sprintf("for %s := 0; %s < %d; %s++ {", n, n, 2+g.IntN(4), n), func() {
			g.line("if %s == 1 {\n%s\tcontinue\n%s}", n, strings.Repeat("\t", g.depth), strings.Repeat("\t", g.depth))
			g.line("%s = append(%s, func() int { return %s + %s })", fs, fs, n, g.expr("int", 1))
			body()
		}, "}")
		f := g.name()
		g.line("for _, %s := range %s {\n%s\tfmt.Print(%s(), \" \")\n%s}", f, fs, strings.Repeat("\t", g.depth), f, strings.Repeat("\t", g.depth))
	case k == 7:
		n := g.name()
		g.block(fmt.Sprintf("for %s := range %d {", n, 1+g.IntN(5)), func() {
			g.line("%s += %s", i, n)
			body()
		}, "}")
	case k == 8:
		n, m := g.name(), g.name()
		g.block(fmt.Sprintf("for %s, %s := range %s {", n, m, g.expr("[]int", 2)), func() {
			g.line("%s ^= %s * %s", i, n, m)
			g.line("if %s {\n%s\tbreak\n%s}", g.expr("bool", 1), strings.Repeat("\t", g.depth), strings.Repeat("\t", g.depth))
			body()
		}, "}")
	case k == 9:
		n := g.name()
		outer := fmt.Sprintf("outer%d", g.names)
		g.line("%s:", outer)
		g.block(fmt.Sprintf("for %s := range count(%d) {", n, 2+g.IntN(3)), func() {
			g.line("for range 2 {\n%s\tif %s {\n%s\t\t%s %s\n%s\t}\n%s}", strings.Repeat("\t", g.depth), g.expr("bool", 1), strings.Repeat("\t", g.depth), []string{"continue", "break"}[g.IntN(2)], outer, strings.Repeat("\t", g.depth), strings.Repeat("\t", g.depth))
			g.line("%s += %s", i, n)
			body()
		}, "}")
	case k == 10:
		g.block(fmt.Sprintf("switch x := %s %% 3; {", g.expr("int", 2)), func() {
			g.line("case x > 0:")
			g.line("\tfallthrough")
			g.line("default:")
			body()
		}, "}")
	case k == 11:
		j := g.pick("int")
		g.line("%s, %s = %s, %s", i, j, g.expr("int", 1), i)
	case k == 12:
		if s := g.pick("[]int"); s != "" {
			g.line("%s[0], %s[len(%s)-1] = %s[len(%s)-1], %s", s, s, s, s, s, g.expr("int", 1))
			g.line("slices.Sort(%s)", s)
		}
	case k == 13:
		if m := g.pick("map[string]int"); m != "" {
			n, ok := g.name(), g.name()
			g.line("%s[%s] += %s", m, g.expr("string", 1), g.expr("int", 2))
			g.line("if %s, %s := %s[\"k\"]; %s {\n%s\t%s -= %s\n%s}", n, ok, m, ok, strings.Repeat("\t", g.depth), i, n, strings.Repeat("\t", g.depth))
		}
	case k == 14:
		if p := g.pick("pair"); p != "" {
			q := g.name()
			g.line("%s := &%s", q, p)
			g.line("%s.grow(%s)", q, g.expr("int", 1))
		}
	case k == 15:
		x := g.name()
		g.line("switch %s := any(%s).(type) {\n%scase int:\n%s\t%s += %s\n%scase string:\n%s\tfmt.Println(len(%s))\n%s}", x, g.expr([]string{"int", "string", "bool"}[g.IntN(3)], 1),
			strings.Repeat("\t", g.depth), strings.Repeat("\t", g.depth), i, x, strings.Repeat("\t", g.depth), strings.Repeat("\t", g.depth), x, strings.Repeat("\t", g.depth))
	case k == 16:
		n := g.name()
		g.block(fmt.Sprintf("switch %s := %s; %s %% 3 {", n, g.expr("int", 2), n), func() {
			g.line("case 0:\n%s\t%s++", strings.Repeat("\t", g.depth), i)
			g.line("case 1, -1:\n%s\t%s -= %s", strings.Repeat("\t", g.depth), i, n)
			g.line("default:")
			body()
		}, "}")
	case k == 17:
		a, p, n := g.name(), g.name(), g.name()
		g.line("var %s [3][2]int", a)
		g.line("%s := &%s", p, a)
		g.block(fmt.Sprintf("for %s := range %s {", n, p), func() {
			g.line("%s[%s][%s&1] = %s", p, n, n, g.expr("int", 2))
			g.line("%s[%s][0] %s= %s", a, n, []string{"+", "*", "^"}[g.IntN(3)], g.expr("int", 1))
		}, "}")
		g.line("%s += %s[0][0] - %s[2][%s&1]", i, p, a, i)
		q := g.name()
		g.line("%s := %s", q, a)
		g.line("%s[1] = %s[0]", q, a)
		g.line("fmt.Println(%s, *%s, %s == %s)", q, p, q, a)
	case k == 18:
		n, r := g.name(), g.name()
		g.block(fmt.Sprintf("for %s, %s := range %s {", n, r, g.expr("string", 2)), func() {
			g.line("%s += %s * int(%s)", i, n, r)
			body()
		}, "}")
	case k == 19:
		s, n := g.name(), g.name()
		g.line("%s := []pair{%s, %s}", s, g.expr("pair", 1), g.expr("pair", 1))
		g.block(fmt.Sprintf("for %s := range %s {", n, s), func() {
			g.line("%s[%s].a %s= %s", s, n, []string{"+", "-", "|"}[g.IntN(3)], g.expr("int", 1))
			g.line("%s[%s].grow(%s)", s, n, i)
		}, "}")
		g.line("%s, %s[0] = %s[1].sum(%s), %s[1]", i, s, s, i, s)
		g.line("fmt.Println(%s)", s)
	case k == 20:
		c, n := g.name(), g.name()
		g.line("%s := make(chan int, 3)", c)
		g.line("%s <- %s", c, g.expr("int", 1))
		g.line("%s <- %s", c, g.expr("int", 1))
		g.line("%s += <-%s - 1", i, c)
		g.line("close(%s)", c)
		g.block(fmt.Sprintf("for %s := range %s {", n, c), func() {
			g.line("%s ^= %s", i, n)
			body()
		}, "}")
		g.line("_, %s = <-%s, 0", i, c)
		ok := g.name()
		g.line("_, %s := <-%s", ok, c)
		g.line("fmt.Println(%s)", ok)
	default:
		g.block("func() {", func() {
			g.line("defer func() { %s++ }()", i)
			body()
		}, "}()")
	}
}
