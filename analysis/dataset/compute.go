package dataset

import (
	"fmt"
	"math"
	"strings"

	"github.com/expr-lang/expr/ast"
	"github.com/expr-lang/expr/file"
	"github.com/expr-lang/expr/parser"
)

// expression is the arithmetic of a computed response, on numbers alone: + − * / ^,
// log, sqrt, abs, min, max.
type expression struct {
	names []string // variables, by first appearance
	eval  func(v []float64) float64
}

// longest is the greatest length of an expression in bytes.
const longest = 4096

// badExpression tells where in the text something cannot be computed; At counts bytes
// from 0.
type badExpression struct {
	At      int
	Message string
	Hint    string
}

// parseExpression reads the text of compute.
func parseExpression(text string) (*expression, *badExpression) {
	if len(text) > longest {
		return nil, &badExpression{Message: fmt.Sprintf("the expression is longer than %d characters", longest)}
	}
	tree, err := parser.Parse(text)
	if err != nil {
		bad := &badExpression{Message: "the expression cannot be read: " + err.Error(), Hint: allowed}
		if at, ok := err.(*file.Error); ok {
			bad.At, bad.Message = bytesOf(text, at.From), "the expression cannot be read: "+at.Message
		}
		return nil, bad
	}
	e := &expression{}
	b := &exprBuilder{text: text, e: e}
	e.eval = b.node(tree.Node, 0)
	if b.bad != nil {
		return nil, b.bad
	}
	return e, nil
}

const allowed = "allowed are numbers, columns, + - * / ^, brackets, log, sqrt, abs, min, max"

// bytesOf turns a count of characters into one of bytes.
func bytesOf(text string, characters int) int {
	for i := range text {
		if characters == 0 {
			return i
		}
		characters--
	}
	return len(text)
}

type exprBuilder struct {
	text string
	e    *expression
	bad  *badExpression
}

func (b *exprBuilder) fail(n ast.Node, format string, args ...any) func([]float64) float64 {
	if b.bad == nil {
		b.bad = &badExpression{Message: fmt.Sprintf(format, args...), Hint: allowed}
		if n != nil {
			b.bad.At = bytesOf(b.text, n.Location().From)
		}
	}
	return nil
}

func (b *exprBuilder) node(n ast.Node, depth int) func([]float64) float64 {
	if depth > 200 {
		return b.fail(n, "brackets are nested too deeply")
	}
	switch n := n.(type) {
	case *ast.IntegerNode:
		v := float64(n.Value)
		return func([]float64) float64 { return v }
	case *ast.FloatNode:
		v := n.Value
		return func([]float64) float64 { return v }
	case *ast.IdentifierNode:
		at := -1
		for i, name := range b.e.names {
			if name == n.Value {
				at = i
			}
		}
		if at < 0 {
			at = len(b.e.names)
			b.e.names = append(b.e.names, n.Value)
		}
		return func(v []float64) float64 { return v[at] }
	case *ast.UnaryNode:
		x := b.node(n.Node, depth+1)
		switch n.Operator {
		case "-":
			return func(v []float64) float64 { return -x(v) }
		case "+":
			return x
		}
		return b.fail(n, "%q is not arithmetic", n.Operator)
	case *ast.BinaryNode:
		x, y := b.node(n.Left, depth+1), b.node(n.Right, depth+1)
		switch n.Operator {
		case "+":
			return func(v []float64) float64 { return x(v) + y(v) }
		case "-":
			return func(v []float64) float64 { return x(v) - y(v) }
		case "*":
			return func(v []float64) float64 { return x(v) * y(v) }
		case "/":
			return func(v []float64) float64 { return x(v) / y(v) }
		case "^", "**":
			return func(v []float64) float64 { return math.Pow(x(v), y(v)) }
		}
		return b.fail(n, "%q is not arithmetic", n.Operator)
	case *ast.BuiltinNode:
		return b.call(n, n.Name, n.Arguments, depth)
	case *ast.CallNode:
		if name, ok := n.Callee.(*ast.IdentifierNode); ok {
			return b.call(n, name.Value, n.Arguments, depth)
		}
		return b.fail(n, "only functions can be called")
	case nil:
		return b.fail(nil, "the expression is empty")
	}
	return b.fail(n, "%q is not arithmetic", strings.TrimSpace(n.String()))
}

func (b *exprBuilder) call(n ast.Node, name string, arguments []ast.Node, depth int) func([]float64) float64 {
	var args []func([]float64) float64
	for _, a := range arguments {
		args = append(args, b.node(a, depth+1))
	}
	if b.bad != nil {
		return nil
	}
	one := func(f func(float64) float64) func([]float64) float64 {
		if len(args) != 1 {
			return b.fail(n, "%s takes one number, not %d", name, len(args))
		}
		x := args[0]
		return func(v []float64) float64 { return f(x(v)) }
	}
	many := func(f func(x, y float64) float64) func([]float64) float64 {
		if len(args) == 0 {
			return b.fail(n, "%s takes one number or more", name)
		}
		return func(v []float64) float64 {
			r := args[0](v)
			for _, x := range args[1:] {
				r = f(r, x(v))
			}
			return r
		}
	}
	switch name {
	case "log":
		return one(math.Log)
	case "sqrt":
		return one(math.Sqrt)
	case "abs":
		return one(math.Abs)
	case "min":
		return many(math.Min)
	case "max":
		return many(math.Max)
	}
	return b.fail(n, "there is no function %q", name)
}

// The numbers of animals of a unit that compute may use.
var animalNames = [...]string{"animal_days", "animals_start", "animals_end", "mass_lost"}
