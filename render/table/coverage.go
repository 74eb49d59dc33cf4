package table

import (
	"slices"
	"strings"
	"unicode"

	"penwright/analysis/prose"
	"penwright/protocol/welfare"
	"penwright/render/doc"
)

// Locate finds where in a numbered report the answers to a checklist stand, and marks what
// the protocol states and the report does not print. A text is looked for in the places
// that its item names and then in the whole report, letter by letter, so that a section of
// that name without the text answers nothing.
func Locate(c *prose.Checklist, blocks []doc.Block) {
	r := read(blocks)
	for i := range c.Items {
		x := &c.Items[i]
		for k := range x.Parts {
			r.place(&x.Parts[k], x.Places)
		}
	}
}

// spot is a section or a table of a report with its plain text.
type spot struct {
	id, label string // label as a reference says it: “Table 3”
	title     string // words of a heading
	text      string // letters and digits in lower case; of a section all that stands in it
	words     int    // of paragraphs
	section   bool
	level     int
}

// reading is the text of a report by its places, in reading order, each section before
// what stands in it.
type reading struct{ spots []spot }

// read takes the places of a numbered report. Long listings, of units, data and files,
// answer no item and are left out.
func read(blocks []doc.Block) *reading {
	r := &reading{}
	var open []int
	var buffers []*strings.Builder
	flush := func(level int) {
		for len(open) > 0 && r.spots[open[len(open)-1]].level >= level {
			last := len(open) - 1
			r.spots[open[last]].text = buffers[last].String()
			open, buffers = open[:last], buffers[:last]
		}
	}
	add := func(text string, words int) {
		for k, i := range open {
			buffers[k].WriteString(text)
			r.spots[i].words += words
		}
	}
	var walk func(blocks []doc.Block)
	walk = func(blocks []doc.Block) {
		for _, b := range blocks {
			switch b := b.(type) {
			case doc.Heading:
				flush(b.Level)
				open = append(open, len(r.spots))
				buffers = append(buffers, &strings.Builder{})
				r.spots = append(r.spots, spot{id: b.ID, label: "section " + b.Number, title: strings.ToLower(doc.Plain(b.Text)), section: true, level: b.Level})
			case doc.Paragraph:
				s := doc.Plain(b.Text)
				add(letters(s), len(strings.Fields(s)))
			case doc.List:
				for _, item := range b.Items {
					walk(item)
				}
			case doc.Quote:
				walk(b.Blocks)
			case doc.Aside:
				walk(b.Blocks)
			case doc.Table:
				x := spot{id: b.ID, label: "Table " + b.Number}
				if !strings.HasPrefix(b.ID, "residuals-") && b.ID != "allotment" && b.ID != "files" && !strings.HasPrefix(b.ID, "coverage") {
					var t strings.Builder
					doc.Walk([]doc.Block{b}, func(node any) {
						switch n := node.(type) {
						case doc.Text:
							t.WriteString(letters(n.Text))
						case doc.CodeSpan:
							t.WriteString(letters(n.Text))
						}
					})
					x.text = t.String()
					add(x.text, 0)
				}
				if x.id != "" {
					r.spots = append(r.spots, x)
				}
			case doc.Figure:
				add(letters(doc.Plain(b.Caption)), 0)
				if b.ID != "" {
					r.spots = append(r.spots, spot{id: b.ID, label: "Figure " + b.Number})
				}
			}
		}
	}
	walk(blocks)
	flush(0)
	return r
}

// letters are the letters and digits of a text in lower case: what is left of it whatever
// the marks, spaces and breaks.
func letters(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsLetter(r) || unicode.IsDigit(r) {
			return unicode.ToLower(r)
		}
		return -1
	}, s)
}

// compared is how many letters of a text are looked for.
const compared = 200

// place finds where a part that is answered stands.
func (r *reading) place(p *prose.Part, places []string) {
	if p.Sections != nil {
		r.author(p)
		return
	}
	if p.State != prose.Answered {
		return
	}
	found := len(p.Texts) == 0 && len(p.Tables) == 0
	for _, text := range p.Texts {
		if id, ok := r.holds(text, places); ok {
			found = true
			p.Where = unique(p.Where, id)
		} else {
			p.State = prose.Unprinted
		}
	}
	var lacks []string
	for _, t := range p.Tables {
		if id, ok := r.named(t.Names); ok {
			found = true
			p.Where = unique(p.Where, id)
		} else {
			lacks = append(lacks, t.Response)
		}
	}
	switch {
	case !found:
		p.State = prose.Unprinted
	case len(lacks) > 0 && lacks[0] != "":
		p.Lacks = append(p.Lacks, lacks...)
	}
	if len(p.Where) == 0 && p.State == prose.Answered {
		if id, ok := r.named(places); ok {
			p.Where = []string{id}
		} else if p.Says == "" {
			p.State = prose.Unprinted
		}
	}
	if p.State == prose.Unprinted {
		p.Where = nil
	}
}

func unique(list []string, s string) []string {
	if slices.Contains(list, s) {
		return list
	}
	return append(list, s)
}

// named finds the first of some names that a table, figure or section has; a name that
// ends in a hyphen stands for all that begin so.
func (r *reading) named(names []string) (string, bool) {
	for _, n := range names {
		for i := range r.spots {
			if id := r.spots[i].id; id == n || strings.HasSuffix(n, "-") && strings.HasPrefix(id, n) {
				return id, true
			}
		}
	}
	return "", false
}

// holds finds the place that a text stands in: one of those named, or else the smallest
// one anywhere.
func (r *reading) holds(text string, places []string) (string, bool) {
	want := letters(text)
	if cut := []rune(want); len(cut) > compared {
		want = string(cut[:compared])
	}
	if want == "" {
		return "", false
	}
	for _, n := range places {
		for i := range r.spots {
			if s := &r.spots[i]; s.id == n && strings.Contains(s.text, want) {
				return s.id, true
			}
		}
	}
	best := -1
	for i := range r.spots {
		if s := &r.spots[i]; strings.Contains(s.text, want) && (best < 0 || len(s.text) <= len(r.spots[best].text)) {
			best = i
		}
	}
	if best < 0 {
		return "", false
	}
	return r.spots[best].id, true
}

// sentence is the number of words that a section of the author’s must have.
const sentence = 8

// author looks for a section under one of some headings that holds a sentence and the words
// that are asked for.
func (r *reading) author(p *prose.Part) {
	for _, name := range p.Sections {
		for i := range r.spots {
			s := &r.spots[i]
			if !s.section || !strings.Contains(" "+s.title, " "+name) || s.words < sentence {
				continue
			}
			holds := true
			for _, set := range p.Stems {
				holds = holds && slices.ContainsFunc(set, func(stem string) bool { return strings.Contains(s.text, letters(stem)) })
			}
			if holds {
				p.State, p.Says, p.Where = prose.Answered, "", []string{s.id}
				return
			}
			p.State, p.Says, p.Where = prose.Missing, "the author’s text does not speak of it", []string{s.id}
		}
	}
	if p.Says == "" {
		p.State = prose.Missing
	}
}

// Coverage is a checklist whose places were found, item by item.
func Coverage(c *prose.Checklist, blocks []doc.Block) doc.Table {
	r := read(blocks)
	label := map[string]string{}
	for i := range r.spots {
		label[r.spots[i].id] = r.spots[i].label
	}
	t := CoverageHead(c)
	t.Rows = nil
	set := ""
	for i := range c.Items {
		x := &c.Items[i]
		if x.Set != set {
			set = x.Set
			t.Rows = append(t.Rows, doc.Row{Group: true, Cells: []doc.Cell{cell(set)}})
		}
		state := x.State()
		verdict := cell(upper(state.String()))
		if state == prose.Missing || state == prose.Partly || state == prose.Unprinted {
			verdict = doc.Cell{Text: []doc.Inline{doc.Strong{Text: verdict.Text}}}
		}
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{cell(x.Number), cell(upper(x.Asks)), verdict, {Text: answer(x, label)}}})
	}
	for _, s := range prose.GuidelineNotes(c) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// CoverageHead is the table of a checklist before its places are known.
func CoverageHead(c *prose.Checklist) doc.Table {
	id := "coverage"
	caption := "Items of " + c.Name
	switch c.Name {
	case "ARRIVE 2.0":
		caption = "Items of the ARRIVE 2.0 guideline"
	case "Field trials":
		caption = "What readers of field trials ask for"
	default:
		id += "-" + strings.ToLower(c.Name)
	}
	return doc.Table{ID: id, Caption: text(caption), Columns: []doc.Column{left(true), left(false), left(false), left(false)},
		Head: head(cell("Item"), cell("Asks for"), cell("Verdict"), cell("Where it is answered, or what would answer it")),
		Rows: []doc.Row{{Cells: []doc.Cell{cell(""), cell(""), cell(""), cell("")}}}}
}

// answer lists what is there and where, and what is not with the keys that would answer it.
func answer(x *prose.Item, label map[string]string) []doc.Inline {
	var out []doc.Inline
	say := func(s string) { out = append(out, doc.Text{Text: s}) }
	several := len(x.Parts) > 1
	for i := range x.Parts {
		p := &x.Parts[i]
		if p.Optional && p.State != prose.Answered {
			continue
		}
		if len(out) > 0 {
			out = append(out, doc.Break{})
		}
		if several {
			say(upper(p.What) + ": ")
		}
		switch first := !several; p.State {
		case prose.Answered:
			say(start(p.Says, first))
			where(p, label, &out, first)
			if len(p.Lacks) > 0 {
				say("; missing: " + few(p.Lacks))
				keys(p.Keys, &out)
			}
		case prose.Unprinted:
			say(start("stated in the protocol, but not in this report", first))
		case prose.Waiting, prose.Inapplicable:
			say(start(p.Says, first))
		default:
			s := "missing"
			if len(p.Lacks) > 0 {
				s += " of " + few(p.Lacks)
			}
			if p.Says != "" {
				s += ": " + p.Says
			}
			say(start(s, first))
			keys(p.Keys, &out)
		}
		say(".")
	}
	return out
}

// start raises the first letter of what begins a cell.
func start(s string, first bool) string {
	if first {
		return upper(s)
	}
	return s
}

func few(list []string) string {
	if len(list) > 6 {
		return strings.Join(list[:5], ", ") + " and others"
	}
	return strings.Join(list, ", ")
}

// where refers to the places of a part.
func where(p *prose.Part, label map[string]string, out *[]doc.Inline, first bool) {
	if len(p.Where) == 0 {
		return
	}
	shown := p.Where
	if len(shown) > 6 {
		shown = shown[:6]
	}
	if p.Says != "" {
		*out = append(*out, doc.Text{Text: " ("})
	}
	for k, id := range shown {
		if k > 0 {
			*out = append(*out, doc.Text{Text: ", "})
		}
		name := label[id]
		if p.Says == "" && first && k == 0 {
			name = upper(name)
		}
		*out = append(*out, doc.Ref{ID: id, Text: name})
	}
	if len(p.Where) > len(shown) {
		*out = append(*out, doc.Text{Text: " and others"})
	}
	if p.Says != "" {
		*out = append(*out, doc.Text{Text: ")"})
	}
}

// keys names what would answer: keys of the protocol, or a command.
func keys(list []welfare.Key, out *[]doc.Inline) {
	for k, x := range list {
		switch {
		case k == 0:
			*out = append(*out, doc.Text{Text: " ("})
		case k == len(list)-1:
			*out = append(*out, doc.Text{Text: " or "})
		default:
			*out = append(*out, doc.Text{Text: ", "})
		}
		name := x.Name
		if x.Command {
			name = "penwright " + name
		}
		*out = append(*out, doc.CodeSpan{Text: name})
	}
	if len(list) > 0 {
		*out = append(*out, doc.Text{Text: ")"})
	}
}
