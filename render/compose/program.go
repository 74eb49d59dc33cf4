package compose

import (
	"fmt"
	"reflect"
	"slices"
	"sort"
	"strconv"
	"strings"
	"text/template"
	"text/template/parse"

	"penwright/protocol/diag"
)

// The names that the rewritten trees call. Authors cannot: a name they write must be
// one of the functions known.
const (
	stepName  = "step_"
	textName  = "text_"
	tokenName = "token_"
	callName  = "call_"
	fieldName = "field_"
	enterName = "enter_"
	leaveName = "leave_"
	beginName = "begin_"
	joinName  = "join_"
)

// site is a place in a template at which something is to be done while it runs.
type site struct {
	file   *file
	offset int
	name   string // of the function called
	text   string // to be written
	weight int    // in steps
}

func (s site) pos() diag.Pos { return s.file.pos(s.offset) }

// program is a set of templates in the making.
type program struct {
	list  diag.List
	files map[string]*file       // by source name
	trees map[string]*parse.Tree // by template name
	order []string               // the keys of trees, as first defined
	funcs map[string]reflect.Value
	names []string // the keys of funcs and of what text/template keeps, sorted
	sites []site
	file  *file // the one that is being rewritten
}

// shortCircuit are the functions left to text/template, because they do not evaluate
// all their values.
var shortCircuit = []string{"and", "or"}

// Functions names the functions that every template has, sorted.
func Functions() []string {
	names := append([]string(nil), shortCircuit...)
	for name := range ownFuncs {
		names = append(names, name)
	}
	sort.Strings(names)
	return names
}

// removed says what to do instead of what text/template has and a template here has not.
var removed = map[string]string{
	"printf":   "use print, or a function that rounds by the house rules",
	"println":  "use print",
	"html":     "values are never taken for markup: print them as they are",
	"js":       "values are never taken for markup: print them as they are",
	"urlquery": "values are never taken for markup: print them as they are",
	"call":     "data hold no functions",
	"slice":    "use index, or a function",
}

func newProgram(funcs template.FuncMap) *program {
	p := &program{files: map[string]*file{}, trees: map[string]*parse.Tree{}, funcs: map[string]reflect.Value{}}
	for name, f := range ownFuncs {
		p.funcs[name] = reflect.ValueOf(f)
	}
	for name, f := range funcs {
		v := reflect.ValueOf(f)
		if v.Kind() != reflect.Func || !goodResults(v.Type()) {
			panic("compose: not a template function: " + name)
		}
		if strings.HasSuffix(name, "_") || name == "and" || name == "or" {
			panic("compose: reserved function name: " + name)
		}
		p.funcs[name] = v
	}
	for name := range p.funcs {
		p.names = append(p.names, name)
	}
	p.names = append(p.names, shortCircuit...)
	sort.Strings(p.names)
	return p
}

func goodResults(t reflect.Type) bool {
	return t.NumOut() == 1 || t.NumOut() == 2 && t.Out(1) == reflect.TypeFor[error]()
}

func (p *program) fault(f *file, offset int, code, message, hint string) {
	p.list.Add(diag.Diagnostic{Pos: f.pos(offset), Severity: diag.Error, Code: code, Message: message, Hint: hint})
}

// parse adds the templates of a source.
func (p *program) parse(s Source) {
	f, list := newFile(s)
	if f == nil {
		p.list = append(p.list, list...)
		return
	}
	if _, ok := p.files[s.Name]; ok {
		p.fault(f, 0, CodeSyntax, fmt.Sprintf("two template sources are called %q", s.Name), "")
		return
	}
	p.files[s.Name] = f
	if n := strings.Count(f.text, "{{"); n > maxActions {
		p.fault(f, 0, CodeTooMuch, fmt.Sprintf("%d actions, more than %d", n, maxActions), "")
		return
	}
	if at, n := countWords(f.text); n > maxWords {
		p.fault(f, at, CodeTooMuch, fmt.Sprintf("more than %d words within actions", maxWords), "")
		return
	}
	tree := parse.New(s.Name)
	tree.Mode = parse.SkipFuncCheck
	set := map[string]*parse.Tree{}
	if _, err := tree.Parse(f.text, "", "", set, nil); err != nil {
		p.list.Add(syntaxError(f, s.Name, err))
		return
	}
	names := make([]string, 0, len(set))
	for name := range set {
		names = append(names, name)
	}
	sort.Strings(names)
	for _, name := range names {
		t := set[name]
		old, ok := p.trees[name]
		if !ok {
			p.order = append(p.order, name)
		}
		if !ok || !parse.IsEmptyTree(t.Root) || parse.IsEmptyTree(old.Root) {
			p.trees[name] = t
		}
	}
}

// countWords counts what stands within actions, one more at most than there may be, and says
// where the last of them is. Each becomes a node of the tree, many times its size.
func countWords(text string) (at, n int) {
	for {
		open := strings.Index(text[at:], "{{")
		if open < 0 {
			return at, n
		}
		at += open + 2
		end := strings.Index(text[at:], "}}")
		if end < 0 {
			end = len(text) - at
		}
		inside := false
		for i, c := range []byte(text[at : at+end]) {
			letter := c == '_' || c >= '0' && c <= '9' || c >= 'A' && c <= 'Z' || c >= 'a' && c <= 'z' || c >= 0x80
			if !letter && c != ' ' && c != '\n' && c != '\t' || letter && !inside {
				if n++; n > maxWords {
					return at + i, n
				}
			}
			inside = letter
		}
		at += end
	}
}

// syntaxError makes a diagnostic of an error of the parser, which knows only the line.
func syntaxError(f *file, source string, err error) diag.Diagnostic {
	line, message := location(err.Error(), source)
	message, _, _ = strings.Cut(message, "\n")
	d := diag.Diagnostic{
		Pos:      diag.Pos{File: f.name, Line: line},
		Severity: diag.Error, Code: CodeSyntax, Message: message,
	}
	if line >= 1 && line <= len(f.lines) {
		text := f.text[f.lines[line-1]:]
		text, _, _ = strings.Cut(text, "\n")
		d.Pos = f.pos(f.lines[line-1] + max(strings.Index(text, "{{"), 0))
	}
	if strings.Contains(message, "unexpected EOF") {
		d.Message = "the text ends inside an action"
		d.Hint = "write {{end}} where the block ends"
		if word, offset := lastOpen(f.text); word != "" {
			d.Pos = f.pos(offset)
			d.Message = "this {{" + word + "}} has no end"
		}
	}
	return d
}

// location takes the line and the message out of "template: name:line: message".
func location(message, name string) (int, string) {
	rest, ok := strings.CutPrefix(message, "template: "+name+":")
	if !ok {
		return 0, strings.TrimPrefix(message, "template: ")
	}
	digits, text, ok := strings.Cut(rest, ": ")
	if !ok {
		return 0, rest
	}
	number, _, _ := strings.Cut(digits, ":")
	line, err := strconv.Atoi(number)
	if err != nil {
		return 0, rest
	}
	return line, text
}

// lastOpen finds the innermost block of actions that has no end.
func lastOpen(text string) (word string, offset int) {
	type open struct {
		word   string
		offset int
	}
	var stack []open
	for at := 0; ; {
		i := strings.Index(text[at:], "{{")
		if i < 0 {
			break
		}
		at += i
		fields := strings.Fields(strings.TrimPrefix(text[at+2:min(len(text), at+100)], "-"))
		if len(fields) > 0 {
			switch first, _, _ := strings.Cut(fields[0], "}"); first {
			case "if", "range", "with", "define", "block":
				stack = append(stack, open{word: first, offset: at})
			case "end":
				if len(stack) > 0 {
					stack = stack[:len(stack)-1]
				}
			}
		}
		at += 2
	}
	if len(stack) == 0 {
		return "", 0
	}
	last := stack[len(stack)-1]
	return last.word, last.offset
}

// rewrite checks the trees and puts the calls of the runner into them.
func (p *program) rewrite(main string) {
	if _, ok := p.trees[main]; !ok && !p.list.HasErrors() {
		p.list.Add(diag.Diagnostic{
			Pos: diag.Pos{File: main}, Severity: diag.Error, Code: CodeUnknownTemplate,
			Message: fmt.Sprintf("there is no template %q", main), Hint: didYouMean(main, p.order),
		})
	}
	for _, name := range p.order {
		tree := p.trees[name]
		p.file = p.files[tree.ParseName]
		p.block(tree.Root)
	}
}

func didYouMean(word string, names []string) string {
	if near := diag.Nearest(word, names); near != "" {
		return fmt.Sprintf("did you mean %q?", near)
	}
	return ""
}

func (p *program) newSite(s site) parse.Node {
	s.file = p.file
	p.sites = append(p.sites, s)
	n := len(p.sites) - 1
	return &parse.NumberNode{NodeType: parse.NodeNumber, Pos: parse.Pos(s.offset), IsInt: true, Int64: int64(n), Text: strconv.Itoa(n)}
}

func identifier(name string, pos parse.Pos) parse.Node {
	return parse.NewIdentifier(name).SetPos(pos)
}

func command(pos parse.Pos, args ...parse.Node) *parse.CommandNode {
	return &parse.CommandNode{NodeType: parse.NodeCommand, Pos: pos, Args: args}
}

func pipe(pos parse.Pos, cmds ...*parse.CommandNode) *parse.PipeNode {
	return &parse.PipeNode{NodeType: parse.NodePipe, Pos: pos, Cmds: cmds}
}

// action makes an action that calls a function of the runner with a site.
func (p *program) action(name string, s site) parse.Node {
	pos := parse.Pos(s.offset)
	return &parse.ActionNode{
		NodeType: parse.NodeAction, Pos: pos,
		Pipe: pipe(pos, command(pos, identifier(name, pos), p.newSite(s))),
	}
}

// block rewrites a list of nodes: the first thing it does when run is to count itself.
func (p *program) block(l *parse.ListNode) {
	if l == nil {
		return
	}
	out := []parse.Node{p.action(stepName, site{offset: int(l.Pos), weight: 1 + len(l.Nodes)})}
	for _, n := range l.Nodes {
		offset := int(n.Position())
		switch n := n.(type) {
		case *parse.TextNode:
			out = append(out, p.action(textName, site{offset: offset, text: string(n.Text)}))
		case *parse.ActionNode:
			p.pipe(n.Pipe)
			if len(n.Pipe.Decl) == 0 {
				n.Pipe.Cmds = append(n.Pipe.Cmds, command(n.Pos, identifier(tokenName, n.Pos), p.newSite(site{offset: offset})))
			}
			out = append(out, n)
		case *parse.IfNode:
			p.branch(&n.BranchNode)
			out = append(out, n)
		case *parse.WithNode:
			p.branch(&n.BranchNode)
			out = append(out, n)
		case *parse.RangeNode:
			p.branch(&n.BranchNode)
			out = append(out, n)
		case *parse.TemplateNode:
			if _, ok := p.trees[n.Name]; !ok {
				p.fault(p.file, offset, CodeUnknownTemplate, fmt.Sprintf("there is no template %q", n.Name), didYouMean(n.Name, p.order))
			}
			if n.Pipe != nil {
				p.pipe(n.Pipe)
			}
			out = append(out, p.action(enterName, site{offset: offset}), n, p.action(leaveName, site{offset: offset}))
		case *parse.BreakNode, *parse.ContinueNode, *parse.CommentNode:
			out = append(out, n)
		default:
			panic("compose: unknown template node")
		}
	}
	l.Nodes = out
}

func (p *program) branch(b *parse.BranchNode) {
	p.pipe(b.Pipe)
	p.block(b.List)
	p.block(b.ElseList)
}

func (p *program) pipe(n *parse.PipeNode) {
	for i, c := range n.Cmds {
		p.command(c, i > 0)
	}
}

// command rewrites a command; receives tells whether a value is piped into it.
func (p *program) command(c *parse.CommandNode, receives bool) {
	args := c.Args
	for i := 1; i < len(args); i++ {
		args[i] = p.argument(args[i])
	}
	first := args[0]
	if id, ok := first.(*parse.IdentifierNode); ok {
		if p.known(id) {
			call := p.newSite(site{offset: int(id.Pos), name: id.Ident})
			c.Args = append([]parse.Node{identifier(callName, id.Pos), call}, args[1:]...)
		} else if slices.Contains(shortCircuit, id.Ident) && !receives && len(args) > 1 {
			// What was compared on the way is gathered around it.
			at := p.newSite(site{offset: int(id.Pos), name: id.Ident})
			c.Args = []parse.Node{identifier(joinName, id.Pos), at,
				pipe(id.Pos, command(id.Pos, identifier(beginName, id.Pos), at)), pipe(id.Pos, command(id.Pos, args...))}
		}
		return
	}
	if len(args) > 1 || receives {
		p.fault(p.file, int(first.Position()), CodeWrongValue, fmt.Sprintf("%s is not a function and takes no value", first), "")
	}
	if access, ok := p.access(first); ok {
		c.Args = access
		return
	}
	if inner, ok := first.(*parse.PipeNode); ok {
		p.pipe(inner)
	}
}

// known tells whether a function is to be called by the runner, and reports one that
// does not exist.
func (p *program) known(id *parse.IdentifierNode) bool {
	if _, ok := p.funcs[id.Ident]; ok {
		return true
	}
	for _, name := range shortCircuit {
		if id.Ident == name {
			return false
		}
	}
	hint := removed[id.Ident]
	if hint == "" {
		hint = didYouMean(id.Ident, p.names)
	}
	p.fault(p.file, int(id.Pos), CodeUnknownFunction, fmt.Sprintf("there is no function %q", id.Ident), hint)
	return false
}

// argument rewrites a node that stands as a value of a command.
func (p *program) argument(n parse.Node) parse.Node {
	if access, ok := p.access(n); ok {
		return pipe(n.Position(), command(n.Position(), access...))
	}
	switch n := n.(type) {
	case *parse.IdentifierNode:
		if p.known(n) {
			call := p.newSite(site{offset: int(n.Pos), name: n.Ident})
			return pipe(n.Pos, command(n.Pos, identifier(callName, n.Pos), call))
		}
	case *parse.PipeNode:
		p.pipe(n)
	}
	return n
}

// access makes the words of a command out of a node that reads fields.
func (p *program) access(n parse.Node) ([]parse.Node, bool) {
	var base parse.Node
	var names []string
	pos := n.Position()
	switch n := n.(type) {
	case *parse.FieldNode:
		base, names = &parse.DotNode{NodeType: parse.NodeDot, Pos: pos}, n.Ident
	case *parse.VariableNode:
		if len(n.Ident) == 1 {
			return nil, false
		}
		base = &parse.VariableNode{NodeType: parse.NodeVariable, Pos: pos, Ident: n.Ident[:1]}
		names = n.Ident[1:]
	case *parse.ChainNode:
		base, names = p.argument(n.Node), n.Field
	default:
		return nil, false
	}
	words := []parse.Node{identifier(fieldName, pos), p.newSite(site{offset: int(pos)}), base}
	for _, name := range names {
		words = append(words, &parse.StringNode{NodeType: parse.NodeString, Pos: pos, Quoted: strconv.Quote(name), Text: name})
	}
	return words, true
}
