package render

import (
	"fmt"
	"slices"
	"strings"
	"text/template"
	"unicode"
	"unicode/utf8"

	"penwright/analysis/prose"
	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/table"
)

// CodeClaim is the code of a claim that the results do not bear out.
//
// Example: {{claim "gain rose with yeast" (lt (p "adg" "yeast: linear") 0.05)}}
const CodeClaim = "claim-failed"

// functionsPage is the page on the functions, which stands beside the templates.
const functionsPage = "functions"

// author is what the author's words need and leave behind.
type author struct {
	limits  compose.Limits // the account that all of them are on
	own     string         // file of the trial that is the template; empty: a built-in one
	written map[string]compose.Text
	writing bool
	told    diag.List // of narratives
	waits   int       // values asked for that wait for data
	claims  []prose.Claim

	reader   *reader
	instead  map[string]string // identifier of a table → of the one that a template has instead
	dot      *view
	words    template.FuncMap
	kinds    map[string][]string // names of tables, figures, paragraphs and lists
	made     map[string]*made
	subjects map[string]*subject
	known    map[string]*knownNames
}

// made is what a function gave for its words.
type made struct {
	blocks  []doc.Block
	inlines []doc.Inline
	err     error
	waits   int // values among it that wait for data
	printed int
}

// maxRepeats is how often the same table, figure or text may be asked for.
const maxRepeats = 16

// remember makes the functions of tables, figures and texts give what they gave before
// for the same words, and refuse to go on doing so: a template that asks for all that
// there is costs no more than a report, however often it asks.
func (b *builder) remember(funcs template.FuncMap) {
	b.made = map[string]*made{}
	ask := func(name string, words []string, make func(m *made)) (*made, error) {
		key := strings.Join(append([]string{name}, words...), "\x00")
		m := b.made[key]
		if m == nil || len(words) > 0 && words[0] == "claims" {
			m = &made{}
			before := b.waits
			make(m)
			m.waits = b.waits - before
			if m.err == nil {
				b.made[key] = m
			}
		} else {
			b.waits += m.waits
		}
		if m.printed++; m.printed > maxRepeats && (len(m.blocks) > 0 || len(m.inlines) > 0) {
			return nil, &compose.Fault{Code: compose.CodeTooMuch, Message: fmt.Sprintf("%s is asked for more than %d times", strings.Join(append([]string{name}, words...), " "), maxRepeats)}
		}
		return m, m.err
	}
	for name, f := range funcs {
		switch f := f.(type) {
		case func(string, ...string) ([]doc.Block, error):
			funcs[name] = func(first string, more ...string) ([]doc.Block, error) {
				m, err := ask(name, append([]string{first}, more...), func(m *made) { m.blocks, m.err = f(first, more...) })
				if err != nil {
					return nil, err
				}
				return m.blocks, nil
			}
		case func(string) ([]doc.Block, error):
			funcs[name] = func(word string) ([]doc.Block, error) {
				m, err := ask(name, []string{word}, func(m *made) { m.blocks, m.err = f(word) })
				if err != nil {
					return nil, err
				}
				return m.blocks, nil
			}
		case func(string) ([]doc.Inline, error):
			funcs[name] = func(word string) ([]doc.Inline, error) {
				m, err := ask(name, []string{word}, func(m *made) { m.inlines, m.err = f(word) })
				if err != nil {
					return nil, err
				}
				return m.inlines, nil
			}
		case func() []doc.Block:
			funcs[name] = func() ([]doc.Block, error) {
				m, err := ask(name, nil, func(m *made) { m.blocks = f() })
				if err != nil {
					return nil, err
				}
				return m.blocks, nil
			}
		}
	}
}

// data is the dot of the template and of narratives.
func (b *builder) data() *view {
	if b.dot == nil {
		v := b.view()
		b.dot = &v
	}
	return b.dot
}

// compose composes the template of a report with the narratives that it places. A
// report with claims is composed again, so that it can tell of those that come after.
func (b *builder) compose(sources []compose.Source, main string) (compose.Text, diag.List) {
	b.written, b.instead = map[string]compose.Text{}, map[string]string{}
	b.limits.Spent = &compose.Spent{}
	text, list := compose.Compose(sources, main, b.data(), b.functions(), b.limits)
	if len(b.claims) > 0 && !list.HasErrors() {
		b.limits.Spent = &compose.Spent{}
		for _, m := range b.made {
			m.printed = 0
		}
		text, list = compose.Compose(sources, main, b.data(), b.functions(), b.limits)
	}
	if source, ok := b.source(b.own); ok {
		list = append(list, b.typedNumbers(source)...)
	}
	return text, append(b.told, list...)
}

// typedNumbers warns of numbers in a text of the author's that contradict the results.
func (b *builder) typedNumbers(source compose.Source) diag.List {
	if b.trial.Table == nil {
		return nil
	}
	if b.reader == nil {
		b.reader = b.newReader()
	}
	return b.reader.typed(source)
}

// settled leaves the first of tables and figures that are the same, and points at it from
// where it stood again. What the author refers to and this template does not show is
// looked for in the table that it has instead.
func (b *builder) settled(blocks []doc.Block) []doc.Block {
	seen := map[string]bool{}
	repeated := func(id string, caption []doc.Inline) (doc.Block, bool) {
		if id == "" || !seen[id] {
			seen[id] = true
			return nil, false
		}
		return doc.Paragraph{Text: append([]doc.Inline{doc.Text{Text: "See "}, doc.Ref{ID: id}, doc.Text{Text: ": "}}, append(caption[:len(caption):len(caption)], doc.Text{Text: "."})...)}, true
	}
	blocks = doc.Mapper{Block: func(b doc.Block) doc.Block {
		switch x := b.(type) {
		case doc.Table:
			if p, again := repeated(x.ID, x.Caption); again {
				return p
			}
		case doc.Figure:
			if p, again := repeated(x.ID, x.Caption); again {
				return p
			}
		}
		return b
	}}.Blocks(blocks)
	return doc.Mapper{Inline: func(in doc.Inline) doc.Inline {
		if x, ok := in.(doc.Ref); ok && !seen[x.ID] && seen[b.instead[x.ID]] {
			x.ID = b.instead[x.ID]
			return x
		}
		return in
	}}.Blocks(blocks)
}

// ref refers to a section, table or figure by its name, or to a table or figure by what
// the function of that name is given.
func (b *builder) ref(at diag.Pos, name string, of ...string) (doc.Inline, error) {
	if len(of) == 0 {
		return doc.Ref{ID: name, Pos: at, Optional: b.trial.Table == nil, Text: name}, nil
	}
	show, ok := b.functions()[name].(func(string, ...string) ([]doc.Block, error))
	if !ok {
		return nil, unknown("reference to a", name, []string{"table", "figure"})
	}
	blocks, err := show(of[0], of[1:]...)
	if err != nil {
		return nil, err
	}
	b.made[strings.Join(append([]string{name}, of...), "\x00")].printed-- // it is not shown here
	// A template that does not show it has the words of its caption instead.
	for _, x := range blocks {
		switch x := x.(type) {
		case doc.Table:
			if name == "table" && of[0] == "means" {
				b.instead[x.ID] = prose.TableID(of[2], true)
			}
			return doc.Ref{ID: x.ID, Pos: at, Optional: true, Text: captionText(x.Caption)}, nil
		case doc.Figure:
			return doc.Ref{ID: x.ID, Pos: at, Optional: true, Text: captionText(x.Caption)}, nil
		}
	}
	if b.trial.Table == nil {
		b.waits++
		return doc.Text{Text: prose.NotYet}, nil
	}
	return nil, &compose.Fault{Code: "no-value", Message: fmt.Sprintf("the %s %q has nothing to show, so that it cannot be referred to", name, strings.Join(of, " "))}
}

// captionText is the first sentence of a caption as it stands within another.
func captionText(caption []doc.Inline) string {
	text, _, _ := strings.Cut(strings.TrimSuffix(doc.Plain(caption), "."), ". ")
	r, size := utf8.DecodeRuneInString(text)
	return string(unicode.ToLower(r)) + text[size:]
}

// claim holds what the prose asserts against the results. It prints nothing.
func (b *builder) claim(at diag.Pos, text string, condition any) (string, error) {
	var holds compose.Truth
	switch x := condition.(type) {
	case compose.Truth:
		holds = x
	case bool:
		holds = compose.NewTruth(x, "")
	default:
		return "", &compose.Fault{Code: compose.CodeWrongValue, Message: fmt.Sprintf("the claim %q has no condition that is true or false", text),
			Hint: `compare with lt, le, gt, ge, eq or between, as in (lt (p "RESPONSE" "TERM") 0.05)`}
	}
	if strings.TrimSpace(text) == "" {
		return "", &compose.Fault{Code: compose.CodeWrongValue, Message: "the claim has no words", Hint: "say what the prose asserts"}
	}
	switch {
	case holds.Open():
		b.waits++
	case !holds.Holds():
		f := &compose.Fault{Code: CodeClaim, Message: fmt.Sprintf("the results do not bear out %q", text), Hint: "change what the prose asserts, or what it is held against"}
		if why := holds.Why(); why != "" {
			f.Message += ": " + why
		}
		return "", f
	}
	c := prose.Claim{Text: text, Where: fmt.Sprintf("%s, line %d", at.File, at.Line), Why: holds.Why(), Open: holds.Open()}
	if !slices.Contains(b.claims, c) {
		b.claims = append(b.claims, c)
	}
	return "", nil
}

// claimsTable lists the claims of the author's words.
func (b *builder) claimsTable() doc.Table { return table.Claims(b.claims) }

// inSection are the places whose narrative stands in a section that the report has
// anyway; the others are sections of their own.
var inSection = []string{"methods", "results"}

// write composes what the author wrote for a place. The text is a template of its own, in
// the same closed world and on the same account as that of the report.
func (b *builder) write(part protocol.NarrativePart) compose.Text {
	source, ok := b.source(part.File)
	if !ok {
		return compose.Text{} // said when the protocol was read
	}
	before := b.waits
	b.writing = true
	text, list := compose.Compose([]compose.Source{source}, part.File, b.data(), b.functions(), b.limits)
	b.writing = false
	b.told = append(b.told, list...)
	b.told = append(b.told, b.typedNumbers(source)...)
	if b.waits > before {
		text = compose.Text{Blocks: []doc.Block{doc.Paragraph{Text: inlines(prose.NarrativeWaits(part.Place)), Pos: diag.Pos{File: part.File, Line: 1, Col: 1}}}}
	}
	text.Blocks = placed(part, tidy(text.Blocks))
	return text
}

// source finds a file of the trial.
func (b *builder) source(name string) (compose.Source, bool) {
	for _, f := range b.trial.Files {
		if f.Path == name {
			return compose.Source{Name: f.Path, Text: string(f.Data)}, true
		}
	}
	return compose.Source{}, false
}

// placed gives a narrative its heading. One that begins with a heading of the first level
// brings its own; else, and within a section, its headings stand below that of its place.
func placed(part protocol.NarrativePart, blocks []doc.Block) []doc.Block {
	if len(blocks) == 0 {
		return nil
	}
	title := strings.ToUpper(part.Place[:1]) + part.Place[1:]
	first, titled := blocks[0].(doc.Heading)
	titled = titled && first.Level == 1
	within := slices.Contains(inSection, part.Place)
	switch {
	case titled && !within:
		return blocks
	case titled && strings.EqualFold(doc.Plain(first.Text), title):
		blocks = blocks[1:]
	}
	highest := 6
	for _, x := range blocks {
		if h, ok := x.(doc.Heading); ok {
			highest = min(highest, h.Level)
		}
	}
	if highest < 2 {
		blocks = doc.Shift(blocks, 2-highest)
	}
	if within {
		return blocks
	}
	heading := doc.Heading{Level: 1, Text: inlines(title), Pos: diag.Pos{File: part.File, Line: 1, Col: 1}}
	return append([]doc.Block{heading}, blocks...)
}

// narrative is what the author wrote for a place of the report; nothing where there is no
// such text.
func (b *builder) narrative(place string) (compose.Text, error) {
	if !slices.Contains(protocol.NarrativePlaces(), place) {
		return compose.Text{}, unknown("place", place, protocol.NarrativePlaces())
	}
	if b.writing {
		return compose.Text{}, &compose.Fault{Code: "narrative-within", Message: "a narrative cannot bring another", Hint: "the template of the report places them"}
	}
	text, ok := b.written[place]
	if !ok {
		for _, part := range b.trial.Protocol.Report.Narrative {
			if part.Place == place {
				text = b.write(part)
			}
		}
		b.written[place] = text
	}
	return text, nil
}
