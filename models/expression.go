package models

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Limits of an expression, so that no text can exhaust memory or stack. A
// tree of maxParameters is less deep than maxDepth, so that what
// [Circuit.String] writes can always be read again.
const (
	maxParameters = 64
	maxDepth      = 64
)

// SyntaxError says where and why an expression is not a circuit.
type SyntaxError struct {
	Expression string
	Column     int // of the fault, in characters, from 1
	Found      string
	Expected   string
	Hint       string // what to try; may be empty
}

// Error gives one line: column, expected, found, what to try.
func (e *SyntaxError) Error() string {
	s := fmt.Sprintf("circuit %q: column %d: expected %s, found %s", e.Expression, e.Column, e.Expected, e.Found)
	if e.Hint != "" {
		s += "; " + e.Hint
	}
	return s
}

// Parse reads a circuit expression:
//
//	circuit  = branch { "+" branch } .
//	branch   = part { "||" part } .
//	part     = name | function "(" name { "," name } ")" | "(" circuit ")" .
//	function = "loss" | "cpe" | "skin" | "rcline" .
//	name     = letter { letter | digit | "_" } .
//
// The letter that begins a name says the element (R, L, C), as do the names
// ESR, ESL and DCR with or without digits; arguments of functions are free
// of that rule. A name may appear once. White space separates and is
// otherwise ignored. The error is a [*SyntaxError].
func Parse(expression string) (*Circuit, error) {
	p := &parser{text: expression, seen: map[string]bool{}}
	p.next()
	root := p.series(0)
	if p.token != "" {
		p.failOperator("`+`, `||` or the end", "there is one `)` too many, or a `(` is missing")
	}
	if p.err != nil {
		return nil, p.err
	}
	return newCircuit(root, p.parameters), nil
}

type parser struct {
	text       string
	start, end int    // of the token, in bytes
	token      string // a name, a number, an operator, or one unknown character; "" at the end
	parameters []Parameter
	seen       map[string]bool
	err        *SyntaxError
}

func isLetter(b byte) bool { return b|0x20 >= 'a' && b|0x20 <= 'z' }
func isDigit(b byte) bool  { return b >= '0' && b <= '9' }

func (p *parser) next() {
	p.start = len(p.text) - len(p.peek())
	i := p.start
	switch {
	case i == len(p.text):
	case isLetter(p.text[i]) || isDigit(p.text[i]) || p.text[i] == '_':
		// A number is one token too, so that an error shows all of it.
		number := isDigit(p.text[i])
		for i < len(p.text) && (isLetter(p.text[i]) || isDigit(p.text[i]) || p.text[i] == '_' || number && p.text[i] == '.') {
			i++
		}
	case strings.HasPrefix(p.text[i:], "||"):
		i += 2
	default:
		_, n := utf8.DecodeRuneInString(p.text[i:])
		i += n
	}
	p.end = i
	p.token = p.text[p.start:i]
}

func (p *parser) fail(expected, hint string) {
	if p.err != nil {
		return
	}
	found := "the end"
	if p.token != "" {
		found = fmt.Sprintf("%q", p.token)
	}
	p.err = &SyntaxError{
		Expression: p.text,
		Column:     utf8.RuneCountInString(p.text[:p.start]) + 1,
		Found:      found, Expected: expected, Hint: hint,
	}
}

// failOperator reports that something else stands where an operator or the
// end of a group should be.
func (p *parser) failOperator(expected, unbalanced string) {
	hint := unbalanced
	switch p.token {
	case "", ")":
	case "|", "/", "∥", "‖":
		hint = parallelHint
	case "-", "–", "−":
		hint = "series is written `+`"
	case "=":
		hint = valuesHint
	default:
		hint = "put `+` for series or `||` for parallel between two elements"
	}
	p.fail(expected, hint)
}

func (p *parser) series(depth int) *Node {
	return p.chain(Series, "+", depth, p.parallel)
}

func (p *parser) parallel(depth int) *Node {
	return p.chain(Parallel, "||", depth, p.part)
}

// chain reads operands joined by one operator into one node; an operand that
// is itself such a chain in brackets is merged, since it is the same circuit.
func (p *parser) chain(kind NodeKind, operator string, depth int, operand func(int) *Node) *Node {
	n := &Node{Kind: kind}
	for {
		child := operand(depth)
		if p.err != nil {
			return nil
		}
		if child.Kind == kind {
			n.Children = append(n.Children, child.Children...)
		} else {
			n.Children = append(n.Children, child)
		}
		if p.token != operator {
			break
		}
		p.next()
	}
	if len(n.Children) == 1 {
		return n.Children[0]
	}
	return n
}

const (
	namesHint    = "a name begins with R, L or C, or is ESR, ESL or DCR"
	parallelHint = "parallel is written `||`"
	valuesHint   = "an expression has names only; give values with --set, --start or --fix NAME=VALUE"
)

// functionsHint lists the functions as they are written.
func functionsHint() string {
	var forms []string
	for e, law := range laws {
		if law.name != "" {
			forms = append(forms, Element(e).form())
		}
	}
	return "the functions are " + strings.Join(forms, ", ")
}

func (p *parser) part(depth int) *Node {
	if p.token == "(" {
		if depth == maxDepth {
			p.fail(fmt.Sprintf("at most %d nested brackets", maxDepth), "leave out brackets that change nothing")
			return nil
		}
		p.next()
		n := p.series(depth + 1)
		if p.err == nil && p.token != ")" {
			p.failOperator("`+`, `||` or `)`", "a `(` is not closed")
		}
		p.next()
		return n
	}
	if p.token == "" || !isLetter(p.token[0]) {
		hint := "`+` and `||` stand between two elements"
		switch {
		case strings.TrimSpace(p.text) == "":
			hint = "write an expression, such as \"ESR + ESL + C\""
		case p.token != "" && isDigit(p.token[0]):
			hint = valuesHint
		case p.token == "|":
			hint = parallelHint
		case p.token != "" && p.token != ")" && p.token != "+" && p.token != "||":
			hint = namesHint
		}
		p.fail("an element or `(`", hint)
		return nil
	}
	if element, ok := functionElement(p.token); ok {
		return p.function(element)
	}
	element, ok := leafElement(p.token)
	if !ok {
		p.fail("an element's name", p.nameHint())
		return nil
	}
	n := &Node{Kind: Leaf, Element: element}
	name := p.token
	p.parameter(n, laws[element].parameters[0], "")
	if p.token == "(" {
		hint := "put `+` or `||` before a bracket; " + functionsHint()
		if element, ok := functionElement(strings.ToLower(name)); ok {
			hint = "did you mean " + element.form() + "?"
		} else if p.peek() != "" && isDigit(p.peek()[0]) {
			hint = valuesHint
		}
		p.fail("`+`, `||` or the end", hint)
	}
	return n
}

// peek returns the text after the present token.
func (p *parser) peek() string {
	return strings.TrimLeftFunc(p.text[p.end:], unicode.IsSpace)
}

// nameHint guesses what a name that is no element was meant to be.
func (p *parser) nameHint() string {
	if element, ok := functionElement(strings.ToLower(p.token)); ok {
		return "did you mean " + element.form() + "?"
	}
	if strings.HasPrefix(p.peek(), "(") {
		return functionsHint()
	}
	if upper := upperLead(p.token); upper != p.token {
		if _, ok := leafElement(upper); ok {
			return fmt.Sprintf("did you mean %q? names are case-sensitive", upper)
		}
	}
	return namesHint
}

// upperLead puts the part of a name that says the element into capitals.
func upperLead(name string) string {
	for _, trade := range []string{"ESR", "ESL", "DCR"} {
		if len(name) >= 3 && strings.EqualFold(name[:3], trade) && isDigits(name[3:]) {
			return trade + name[3:]
		}
	}
	return strings.ToUpper(name[:1]) + name[1:]
}

func (p *parser) function(element Element) *Node {
	law := laws[element]
	n := &Node{Kind: Leaf, Element: element}
	form := "write " + element.form()
	p.next()
	if p.token != "(" {
		p.fail("`(`", form)
		return nil
	}
	for i, parameter := range law.parameters {
		p.next()
		p.parameter(n, parameter, form)
		if p.err != nil {
			return nil
		}
		want := ","
		if i == len(law.parameters)-1 {
			want = ")"
		}
		if p.token != want {
			p.fail("`"+want+"`", form)
			return nil
		}
	}
	p.next()
	return n
}

// parameter takes the present token as the name of a leaf's next parameter.
func (p *parser) parameter(n *Node, law parameterLaw, form string) {
	switch {
	case p.token == "" || !isLetter(p.token[0]):
		hint := form
		if p.token != "" && (isDigit(p.token[0]) || p.token == "-" || p.token == ".") {
			hint = valuesHint
		}
		p.fail("a parameter's name", hint)
		return
	case p.seen[p.token]:
		p.fail("a name not used before", "a name may appear once; number the elements, such as R1 and R2")
		return
	case len(p.parameters) == maxParameters:
		p.fail(fmt.Sprintf("at most %d parameters", maxParameters), "no sweep determines so many; leave out elements or write simpler ones")
		return
	}
	p.seen[p.token] = true
	n.Parameters = append(n.Parameters, len(p.parameters))
	p.parameters = append(p.parameters, Parameter{
		Name: p.token, Unit: law.unit, Scale: law.scale, Quantity: law.quantity,
	})
	p.next()
}
