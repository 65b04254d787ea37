package models

import (
	"errors"
	"fmt"
	"reflect"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"
)

func TestParseErrors(t *testing.T) {
	brackets := func(n int) string { return strings.Repeat("(", n) + "R" + strings.Repeat(")", n) }
	resistors := func(n int) string {
		var names []string
		for i := range n {
			names = append(names, fmt.Sprintf("R%d", i))
		}
		return strings.Join(names, " + ")
	}
	for _, c := range []struct {
		expression      string
		column          int
		found, expected string
		hint            string // a part of it
	}{
		{"", 1, "the end", "an element or `(`", "write an expression"},
		{"   ", 4, "the end", "an element or `(`", "write an expression"},
		{"R +", 4, "the end", "an element or `(`", "stand between two elements"},
		{"R+L+", 5, "the end", "an element or `(`", "stand between two elements"},
		{"+ R", 1, `"+"`, "an element or `(`", "stand between two elements"},
		{"R + + L", 5, `"+"`, "an element or `(`", "stand between two elements"},
		{"R || ", 6, "the end", "an element or `(`", "stand between two elements"},
		{"|| R", 1, `"||"`, "an element or `(`", "stand between two elements"},
		{"R | C", 3, `"|"`, "`+`, `||` or the end", "parallel is written `||`"},
		{"(R | C)", 4, `"|"`, "`+`, `||` or `)`", "parallel is written `||`"},
		{"R ||| C", 5, `"|"`, "an element or `(`", "parallel is written `||`"},
		{"R ∥ C", 3, `"∥"`, "`+`, `||` or the end", "parallel is written `||`"},
		{"(R ‖ C)", 4, `"‖"`, "`+`, `||` or `)`", "parallel is written `||`"},
		{"R // C", 3, `"/"`, "`+`, `||` or the end", "parallel is written `||`"},
		{"R - C", 3, `"-"`, "`+`, `||` or the end", "series is written `+`"},
		{"R − C", 3, `"−"`, "`+`, `||` or the end", "series is written `+`"},
		{"R = 5", 3, `"="`, "`+`, `||` or the end", "NAME=VALUE"},
		{"R R", 3, `"R"`, "`+`, `||` or the end", "put `+` for series or `||` for parallel"},
		{"(R L)", 4, `"L"`, "`+`, `||` or `)`", "put `+` for series or `||` for parallel"},
		{"(R) (L)", 5, `"("`, "`+`, `||` or the end", "put `+` for series or `||` for parallel"},
		{"(R + L", 7, "the end", "`+`, `||` or `)`", "a `(` is not closed"},
		{"R + L)", 6, `")"`, "`+`, `||` or the end", "one `)` too many"},
		{"()", 2, `")"`, "an element or `(`", "between two elements"},
		{"R + R", 5, `"R"`, "a name not used before", "R1 and R2"},
		{"loss(C, C)", 9, `"C"`, "a name not used before", "R1 and R2"},
		{"esr + C", 1, `"esr"`, "an element's name", `did you mean "ESR"?`},
		{"C + esl2", 5, `"esl2"`, "an element's name", `did you mean "ESL2"?`},
		{"r1 + C", 1, `"r1"`, "an element's name", `did you mean "R1"?`},
		{"X + C", 1, `"X"`, "an element's name", "begins with R, L or C"},
		{"ESRx + C", 1, `"ESRx"`, "an element's name", "is ESR, ESL or DCR"},
		{"_R", 1, `"_R"`, "an element or `(`", "begins with R, L or C"},
		{"Ω", 1, `"Ω"`, "an element or `(`", "begins with R, L or C"},
		{"R1 + µ", 6, `"µ"`, "an element or `(`", "begins with R, L or C"},
		{"∥∥ R", 1, `"∥"`, "an element or `(`", "begins with R, L or C"},
		{"R\xff", 2, `"\xff"`, "`+`, `||` or the end", "put `+`"},
		{"5 + R", 1, `"5"`, "an element or `(`", "names only; give values with --set"},
		{"R + 4.7uF", 5, `"4.7uF"`, "an element or `(`", "names only; give values with --set"},
		{"foo(C)", 1, `"foo"`, "an element's name", "loss(C, tand), cpe(Q, n), skin(K), rcline(R, C)"},
		{"lossy(C)", 1, `"lossy"`, "an element's name", "loss(C, tand), cpe(Q, n), skin(K), rcline(R, C)"},
		{"R(1)", 2, `"("`, "`+`, `||` or the end", "names only; give values with --set"},
		{"R (L + C)", 3, `"("`, "`+`, `||` or the end", "put `+` or `||` before a bracket"},
		{"Loss(C, tand)", 5, `"("`, "`+`, `||` or the end", "did you mean loss(C, tand)?"},
		{"Skin(K)", 1, `"Skin"`, "an element's name", "did you mean skin(K)?"},
		{"loss", 5, "the end", "`(`", "write loss(C, tand)"},
		{"loss + R", 6, `"+"`, "`(`", "write loss(C, tand)"},
		{"loss()", 6, `")"`, "a parameter's name", "write loss(C, tand)"},
		{"loss(C)", 7, `")"`, "`,`", "write loss(C, tand)"},
		{"loss(C, 0.01)", 9, `"0.01"`, "a parameter's name", "give values with --set"},
		{"loss(C, -1)", 9, `"-"`, "a parameter's name", "give values with --set"},
		{"loss(C, tand, x)", 13, `","`, "`)`", "write loss(C, tand)"},
		{"cpe(Q, n", 9, "the end", "`)`", "write cpe(Q, n)"},
		{"skin(K, L)", 7, `","`, "`)`", "write skin(K)"},
		{"rcline(R + C)", 10, `"+"`, "`,`", "write rcline(R, C)"},
		{brackets(65), 65, `"("`, "at most 64 nested brackets", "leave out brackets"},
		{brackets(100000), 65, `"("`, "at most 64 nested brackets", "leave out brackets"},
		{resistors(65), len([]rune(resistors(64))) + 4, `"R64"`, "at most 64 parameters", "leave out elements"},
	} {
		circuit, err := Parse(c.expression)
		name := c.expression[:min(len(c.expression), 30)]
		var syntax *SyntaxError
		if !errors.As(err, &syntax) {
			t.Errorf("%q: parsed as %v with error %v, want a *SyntaxError", name, circuit, err)
			continue
		}
		if circuit != nil {
			t.Errorf("%q: a circuit beside the error", name)
		}
		if syntax.Column != c.column || syntax.Found != c.found || syntax.Expected != c.expected {
			t.Errorf("%q: column %d, found %s, expected %s; want column %d, found %s, expected %s",
				name, syntax.Column, syntax.Found, syntax.Expected, c.column, c.found, c.expected)
		}
		if syntax.Expression != c.expression {
			t.Errorf("%q: the error has the expression %q", name, syntax.Expression)
		}
		if !strings.Contains(syntax.Hint, c.hint) {
			t.Errorf("%q: hint %q, want %q in it", name, syntax.Hint, c.hint)
		}
	}
}

func TestSyntaxErrorText(t *testing.T) {
	_, err := Parse("ESR + ESL ∥ C")
	want := "circuit \"ESR + ESL ∥ C\": column 11: expected `+`, `||` or the end, found \"∥\"; parallel is written `||`"
	if err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
	if _, err := Parse("R\n+\n|"); strings.ContainsAny(err.Error(), "\n\r") {
		t.Errorf("an error of more than one line: %q", err)
	}
}

// The largest expressions that are allowed.
func TestParseLimits(t *testing.T) {
	deep := strings.Repeat("(", maxDepth) + "R" + strings.Repeat(")", maxDepth)
	if c, err := Parse(deep); err != nil || c.String() != "R" {
		t.Errorf("%d brackets: %v, %v", maxDepth, c, err)
	}
	// The deepest tree: each level adds one element.
	expression := "R0"
	for i := 1; i < maxParameters; i++ {
		expression = fmt.Sprintf("R%d %s (%s)", i, []string{"+", "||"}[i%2], expression)
	}
	c, err := Parse(expression)
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Parameters()) != maxParameters {
		t.Errorf("%d parameters, want %d", len(c.Parameters()), maxParameters)
	}
	requireRoundTrip(t, c)
}

func TestParseTree(t *testing.T) {
	leaf := func(e Element, parameters ...int) *Node {
		return &Node{Kind: Leaf, Element: e, Parameters: parameters}
	}
	series := func(children ...*Node) *Node { return &Node{Kind: Series, Children: children} }
	parallel := func(children ...*Node) *Node { return &Node{Kind: Parallel, Children: children} }
	for _, c := range []struct {
		expression, text string
		want             *Node
	}{
		{"R", "R", leaf(Resistor, 0)},
		{"((C))", "C", leaf(Capacitor, 0)},
		{"ESR+ESL12+DCR3", "ESR + ESL12 + DCR3", series(leaf(Resistor, 0), leaf(Inductor, 1), leaf(Resistor, 2))},
		{"R1_x + Lead + CESR", "R1_x + Lead + CESR", series(leaf(Resistor, 0), leaf(Inductor, 1), leaf(Capacitor, 2))},
		{"R + C || L", "R + (C || L)", series(leaf(Resistor, 0), parallel(leaf(Capacitor, 1), leaf(Inductor, 2)))},
		{"C || L + R", "(C || L) + R", series(parallel(leaf(Capacitor, 0), leaf(Inductor, 1)), leaf(Resistor, 2))},
		{"(R + C) || L", "(R + C) || L", parallel(series(leaf(Resistor, 0), leaf(Capacitor, 1)), leaf(Inductor, 2))},
		{"R + (L + (C))", "R + L + C", series(leaf(Resistor, 0), leaf(Inductor, 1), leaf(Capacitor, 2))},
		{"(R || L) || C", "R || L || C", parallel(leaf(Resistor, 0), leaf(Inductor, 1), leaf(Capacitor, 2))},
		{"\tESR\n+ loss ( C ,tand )\u00a0", "ESR + loss(C, tand)", series(leaf(Resistor, 0), leaf(LossCapacitor, 1, 2))},
		{"cpe(a, b)||skin(loss)", "cpe(a, b) || skin(loss)", parallel(leaf(ConstantPhase, 0, 1), leaf(Skin, 2))},
		{"rcline(R, C)", "rcline(R, C)", leaf(RCLine, 0, 1)},
	} {
		got, err := Parse(c.expression)
		if err != nil {
			t.Errorf("%q: %v", c.expression, err)
			continue
		}
		if diff := cmp.Diff(c.want, got.Root()); diff != "" {
			t.Errorf("%q: tree (-want +got):\n%s", c.expression, diff)
		}
		if got.String() != c.text {
			t.Errorf("%q: String gives %q, want %q", c.expression, got, c.text)
		}
	}
}

func TestParameters(t *testing.T) {
	c := mustParse("ESR + L + loss(C, tand) + cpe(q, n) + skin(K) + rcline(r, c) + C2")
	want := []Parameter{
		{"ESR", "Ω", LogScale, "resistance"},
		{"L", "H", LogScale, "inductance"},
		{"C", "F", LogScale, "series capacitance at 1 kHz"},
		{"tand", "1", LogScale, "loss tangent"},
		{"q", "F·s^(n−1)", LogScale, "constant-phase coefficient"},
		{"n", "1", LogitScale, "exponent"},
		{"K", "Ω·s^½", LogScale, "skin-effect coefficient"},
		{"r", "Ω", LogScale, "total line resistance"},
		{"c", "F", LogScale, "total line capacitance"},
		{"C2", "F", LogScale, "capacitance"},
	}
	if diff := cmp.Diff(want, c.Parameters()); diff != "" {
		t.Errorf("parameters (-want +got):\n%s", diff)
	}
	for i, p := range want {
		if k, ok := c.Index(p.Name); !ok || k != i {
			t.Errorf("Index(%q) = %d, %v, want %d", p.Name, k, ok, i)
		}
	}
	if _, ok := c.Index("c2"); ok {
		t.Error("Index finds a name that is not there")
	}
}

// requireRoundTrip fails unless the circuit's text means the same tree, and is
// its own text.
func requireRoundTrip(t interface {
	Helper()
	Fatalf(string, ...any)
}, c *Circuit) {
	t.Helper()
	again, err := Parse(c.String())
	if err != nil {
		t.Fatalf("String gives what Parse refuses: %v", err)
	}
	// Note: cmp takes a time that is exponential in the depth of a tree.
	if !reflect.DeepEqual(c.Root(), again.Root()) || !reflect.DeepEqual(c.Parameters(), again.Parameters()) {
		t.Fatalf("%q has another tree or other parameters after a round trip", c)
	}
	if again.String() != c.String() {
		t.Fatalf("%q becomes %q", c, again)
	}
}

// requireNormal fails if a node has fewer than two children or one of its kind.
func requireNormal(t interface {
	Helper()
	Fatalf(string, ...any)
}, n *Node) {
	t.Helper()
	if (n.Kind == Leaf) != (len(n.Children) == 0) || len(n.Children) == 1 {
		t.Fatalf("a node of kind %d has %d children", n.Kind, len(n.Children))
	}
	for _, child := range n.Children {
		if child.Kind == n.Kind {
			t.Fatalf("a node of kind %d has a child of its kind", n.Kind)
		}
		requireNormal(t, child)
	}
}

func drawCircuit(t *rapid.T) *Circuit {
	pick := func(n int) int { return rapid.IntRange(0, n-1).Draw(t, "pick") }
	c, err := Parse(randomExpression(pick, rapid.IntRange(1, 12).Draw(t, "elements")))
	if err != nil {
		t.Fatalf("%v", err)
	}
	return c
}

func TestStringRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := drawCircuit(t)
		requireNormal(t, c.Root())
		requireRoundTrip(t, c)
	})
}

func TestWithout(t *testing.T) {
	for _, c := range []struct{ expression, parameter, want string }{
		{"ESR + ESL + C", "ESR", "ESL + C"},
		{"ESR + ESL + C", "C", "ESR + ESL"},
		{"R || L || C", "R", "L || C"},
		{"ESR + ESL + (C || Rp)", "Rp", "ESR + ESL + C"},
		{"ESR + ESL + (C || Rp)", "C", "ESR + ESL + Rp"},
		{"ESR + loss(C, tand)", "C", "ESR"},
		{"ESR + loss(C, tand)", "tand", "ESR"},
		{"ESR + cpe(Q, n) + rcline(R, C)", "R", "ESR + cpe(Q, n)"},
		{"R1 || (L + (C || R2))", "L", "R1 || C || R2"},
		{"R1 + (L || (C + R2))", "L", "R1 + C + R2"},
		{"(DCR + L + (R1 || L1)) || Cp", "R1", "(DCR + L + L1) || Cp"},
		{"DCR + (L1 || R1 || C1) + (L2 || R2 || C2)", "C2", "DCR + (L1 || R1 || C1) + (L2 || R2)"},
		{"(R + L) || C", "C", "R + L"},
		{"(R + L) || C", "R", "L || C"},
		{"R", "R", ""},
		{"loss(C, tand)", "tand", ""},
	} {
		circuit := mustParse(c.expression)
		k, ok := circuit.Index(c.parameter)
		if !ok {
			t.Fatalf("%q has no %s", c.expression, c.parameter)
		}
		got, from := circuit.Without(k)
		if c.want == "" {
			if got != nil || from != nil {
				t.Errorf("%q without %s: %v, %v, want nil", c.expression, c.parameter, got, from)
			}
			continue
		}
		if got == nil {
			t.Errorf("%q without %s: nil, want %q", c.expression, c.parameter, c.want)
			continue
		}
		want := mustParse(c.want)
		if diff := cmp.Diff(want.Root(), got.Root()); diff != "" {
			t.Errorf("%q without %s: tree (-want +got):\n%s", c.expression, c.parameter, diff)
		}
		if diff := cmp.Diff(want.Parameters(), got.Parameters()); diff != "" {
			t.Errorf("%q without %s: parameters (-want +got):\n%s", c.expression, c.parameter, diff)
		}
		for i, k := range from {
			name := got.Parameters()[i].Name
			if circuit.Parameters()[k].Name != name {
				t.Errorf("%q without %s: %s comes from %s", c.expression, c.parameter, name, circuit.Parameters()[k].Name)
			}
			if j, ok := got.Index(name); !ok || j != i {
				t.Errorf("%q without %s: Index(%q) = %d, %v, want %d", c.expression, c.parameter, name, j, ok, i)
			}
		}
		if len(from) != len(got.Parameters()) {
			t.Errorf("%q without %s: %d indices for %d parameters", c.expression, c.parameter, len(from), len(got.Parameters()))
		}
		if circuit.String() != c.expression {
			t.Errorf("%q without %s: changed to %q", c.expression, c.parameter, circuit)
		}
	}
}

// Taking an element away leaves what remains as if it had been written so.
func TestWithoutKeepsTheRest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := drawCircuit(t)
		k := rapid.IntRange(0, len(c.Parameters())-1).Draw(t, "parameter")
		before := c.String()
		rest, from := c.Without(k)
		if c.String() != before {
			t.Fatalf("%q became %q", before, c)
		}
		if rest == nil {
			if c.Root().Kind != Leaf {
				t.Fatalf("%q without %s: nothing", c, c.Parameters()[k].Name)
			}
			return
		}
		requireNormal(t, rest.Root())
		requireRoundTrip(t, rest)
		last := -1
		for i, j := range from {
			if j <= last || j == k || rest.Parameters()[i] != c.Parameters()[j] {
				t.Fatalf("%q without %s gives %q with indices %v", c, c.Parameters()[k].Name, rest, from)
			}
			last = j
		}
	})
}

func FuzzParse(f *testing.F) {
	for _, m := range Library() {
		f.Add(m.Circuit.String())
	}
	for _, s := range append(elementExpressions, "", "R +", "R ∥ C", "R(1)", "loss(C, 0.01)", "((R + L) || C", "R1 || (L1 + (C1 || R2)) + skin ( K )", "\xff", "R+L+\u00a0") {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, expression string) {
		c, err := Parse(expression)
		if err == nil {
			requireNormal(t, c.Root())
			requireRoundTrip(t, c)
			return
		}
		var syntax *SyntaxError
		if !errors.As(err, &syntax) {
			t.Fatalf("%q: %T, want a *SyntaxError", expression, err)
		}
		if syntax.Column < 1 || syntax.Column > utf8.RuneCountInString(expression)+1 {
			t.Fatalf("%q: column %d", expression, syntax.Column)
		}
		if syntax.Found == "" || syntax.Expected == "" || syntax.Hint == "" || strings.ContainsAny(err.Error(), "\n\r") {
			t.Fatalf("%q: %v", expression, err)
		}
	})
}
