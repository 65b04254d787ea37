package models

import (
	"fmt"
	"strings"
	"unicode/utf8"
)

// Limits of an expression, so that no text can exhaust memory or stack.
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
// of that rule. A name may appear once. The error is a [*SyntaxError].
func Parse(expression string) (*Circuit, error) {
	p := &parser{text: expression, seen: map[string]bool{}}
	p.next()
	root := p.series(0)
	if p.err == nil && p.token != "" {
		what := "`+`, `||` or the end"
		hint := ""
		switch {
		case p.token == ")":
			hint = "there is one `)` too many, or a `(` is missing"
		case isLetter(p.token[0]) || p.token == "(":
			hint = "put `+` for series or `||` for parallel between two elements"
		case p.token == "|":
			hint = "parallel is written `||`"
		}
		p.fail(what, hint)
	}
	if p.err != nil {
		return nil, p.err
	}
	return newCircuit(root, p.parameters), nil
}

type parser struct {
	text       string
	start, end int    // of the token, in bytes
	token      string // a name, an operator, or one unknown character; "" at the end
	parameters []Parameter
	seen       map[string]bool
	err        *SyntaxError
}

func isLetter(b byte) bool { return b|0x20 >= 'a' && b|0x20 <= 'z' }
func isDigit(b byte) bool  { return b >= '0' && b <= '9' }

func (p *parser) next() {
	i := p.end
	for i < len(p.text) && (p.text[i] == ' ' || p.text[i] == '\t') {
		i++
	}
	p.start = i
	switch {
	case i == len(p.text):
	case isLetter(p.text[i]) || isDigit(p.text[i]) || p.text[i] == '_':
		for i < len(p.text) && (isLetter(p.text[i]) || isDigit(p.text[i]) || p.text[i] == '_') {
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

const namesHint = "a name begins with R, L or C, or is ESR, ESL or DCR; functions are loss(C, tand), cpe(Q, n), skin(K) and rcline(R, C)"

func (p *parser) part(depth int) *Node {
	if depth > maxDepth {
		p.fail(fmt.Sprintf("at most %d nested brackets", maxDepth), "")
		return nil
	}
	if p.token == "(" {
		p.next()
		n := p.series(depth + 1)
		if p.err == nil && p.token != ")" {
			p.fail("`+`, `||` or `)`", "a `(` is not closed")
		}
		p.next()
		return n
	}
	if p.token == "" || !isLetter(p.token[0]) {
		hint := namesHint
		switch {
		case p.token == "|" || p.token == "||":
			hint = "parallel is written `A || B`, with an element on both sides"
		case p.token != "" && isDigit(p.token[0]):
			hint = "an expression has names only; give values with --set, --start or --fix NAME=VALUE"
		}
		p.fail("an element or `(`", hint)
		return nil
	}
	if element, ok := functionElement(p.token); ok {
		return p.function(element)
	}
	element, ok := leafElement(p.token)
	if !ok {
		hint := namesHint
		if _, ok := leafElement(strings.ToUpper(p.token)); ok {
			hint = fmt.Sprintf("did you mean %q? names are case-sensitive", upperLead(p.token))
		} else if e, ok := functionElement(strings.ToLower(p.token)); ok {
			hint = fmt.Sprintf("did you mean %q?", laws[e].name)
		}
		p.fail("an element's name", hint)
		return nil
	}
	n := &Node{Kind: Leaf, Element: element}
	p.parameter(n, laws[element].parameters[0])
	if p.err == nil && p.token == "(" {
		p.fail("`+`, `||` or the end", "functions are loss(C, tand), cpe(Q, n), skin(K) and rcline(R, C)")
	}
	return n
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
	form := law.name + "(" + strings.TrimSuffix(strings.Repeat("name, ", len(law.parameters)), ", ") + ")"
	p.next()
	if p.token != "(" {
		p.fail("`(`", "write "+form)
		return nil
	}
	for i, parameter := range law.parameters {
		p.next()
		p.parameter(n, parameter)
		if p.err != nil {
			return nil
		}
		want := ","
		if i == len(law.parameters)-1 {
			want = ")"
		}
		if p.token != want {
			p.fail("`"+want+"`", "write "+form)
			return nil
		}
	}
	p.next()
	return n
}

// parameter takes the present token as the name of a leaf's next parameter.
func (p *parser) parameter(n *Node, law parameterLaw) {
	switch {
	case p.token == "" || !isLetter(p.token[0]):
		hint := ""
		if p.token != "" && (isDigit(p.token[0]) || p.token == "-" || p.token == ".") {
			hint = "arguments are names, not numbers; give values with --set, --start or --fix NAME=VALUE"
		}
		p.fail("a parameter's name", hint)
		return
	case p.seen[p.token]:
		p.fail("a name not used before", "a name may appear once; number the elements, such as R1 and R2")
		return
	case len(p.parameters) == maxParameters:
		p.fail(fmt.Sprintf("at most %d parameters", maxParameters), "")
		return
	}
	p.seen[p.token] = true
	n.Parameters = append(n.Parameters, len(p.parameters))
	p.parameters = append(p.parameters, Parameter{
		Name: p.token, Unit: law.unit, Scale: law.scale, Quantity: law.quantity,
	})
	p.next()
}
