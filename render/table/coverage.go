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
// that its item names and then in the whole report, word by word, so that a section of
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
	text      string // words in lower case, a space between; of a section all that stands in it
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
				add(tokens(s), len(strings.Fields(s)))
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
							t.WriteString(tokens(n.Text))
						case doc.CodeSpan:
							t.WriteString(tokens(n.Text))
						}
					})
					x.text = t.String()
					add(x.text, 0)
				}
				if x.id != "" {
					r.spots = append(r.spots, x)
				}
			case doc.Figure:
				add(tokens(doc.Plain(b.Caption)), 0)
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

// tokens are the words of a text in lower case, each between spaces: what is left of it
// whatever the marks and breaks.
func tokens(s string) string {
	w := words(s)
	if len(w) == 0 {
		return " "
	}
	return " " + strings.Join(w, " ") + " "
}

func words(s string) []string {
	return strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
}

// A text is taken for found where a run of so many of its words stands; of its runs so
// many are tried, since marks of its own may break one.
const (
	runOfWords = 10
	runsTried  = 6
)

// runs are the runs of words by which a text is looked for.
func runs(text string) []string {
	w := words(text)
	var out []string
	for len(w) > 0 && len(out) < runsTried {
		n := min(runOfWords, len(w))
		if len(out) > 0 && n < runOfWords {
			break
		}
		out = append(out, " "+strings.Join(w[:n], " ")+" ")
		w = w[n:]
	}
	return out
}

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
		if id, ok := r.sought(&t); ok {
			found = true
			p.Where = unique(p.Where, id)
		} else {
			lacks = append(lacks, "for "+t.Response)
		}
	}
	switch {
	case !found:
		p.State = prose.Unprinted
	case len(lacks) > 0 && lacks[0] != "for ":
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

// sought finds a table or section.
func (r *reading) sought(t *prose.Sought) (string, bool) {
	if id, ok := r.named(t.Names); ok {
		return id, true
	}
	for _, a := range t.Also {
		for i := range r.spots {
			s := &r.spots[i]
			if s.id != a.Name && !(strings.HasSuffix(a.Name, "-") && strings.HasPrefix(s.id, a.Name)) {
				continue
			}
			if slices.ContainsFunc(a.Stems, func(stem string) bool { return strings.Contains(s.text, stemmed(stem)) }) {
				return s.id, true
			}
		}
	}
	return "", false
}

// holds finds the place that a text stands in: one of those named, or else the smallest
// one anywhere.
func (r *reading) holds(text string, places []string) (string, bool) {
	all := runs(text)
	if _, after, ok := strings.Cut(text, ": "); ok && len(words(after)) > 1 {
		all = append(all, runs(after)...) // “none: internal trial”
	}
	for _, run := range all {
		for _, n := range places {
			for i := range r.spots {
				if s := &r.spots[i]; s.id == n && strings.Contains(s.text, run) {
					return s.id, true
				}
			}
		}
		best := -1
		for i := range r.spots {
			if s := &r.spots[i]; strings.Contains(s.text, run) && (best < 0 || len(s.text) <= len(r.spots[best].text)) {
				best = i
			}
		}
		if best >= 0 {
			return r.spots[best].id, true
		}
	}
	return "", false
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
			if strings.Contains(s.text, stemmed(prose.NarrativeWaiting)) {
				p.State, p.Says = prose.Waiting, "there are no data yet"
				return
			}
			holds := true
			for _, set := range p.Stems {
				holds = holds && slices.ContainsFunc(set, func(stem string) bool { return strings.Contains(s.text, stemmed(stem)) })
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

// stemmed is a stem as it begins words.
func stemmed(stem string) string { return strings.TrimSuffix(tokens(stem), " ") }

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
	caption := "Items of the " + c.Name + " guideline"
	switch c.Name {
	case "Field trials":
		caption = "What readers of field trials ask for"
	case "REFLECT":
		id, caption = "coverage-reflect", "Items of the REFLECT statement"
	}
	return doc.Table{ID: id, Caption: text(caption), Columns: []doc.Column{left(true), left(false), left(false), left(false)},
		Head: head(cell("Item"), cell("Asks for"), cell("Verdict"), cell("Where it is answered, or what would answer it")),
		Rows: []doc.Row{{Cells: []doc.Cell{cell(""), cell(""), cell(""), cell("")}}}}
}

// answer lists what is there and where, and what is not with the keys that would answer it.
func answer(x *prose.Item, label map[string]string) []doc.Inline {
	c := &cellWriter{label: label, several: len(x.Parts) > 1}
	for i := 0; i < len(x.Parts); i++ {
		p := &x.Parts[i]
		if p.State != prose.Answered {
			continue
		}
		// Parts that stand at the same place and say no more share a line.
		what := p.What
		for bare(p) && i+1 < len(x.Parts) && bare(&x.Parts[i+1]) && slices.Equal(p.Where, x.Parts[i+1].Where) {
			i++
			what += ", " + x.Parts[i].What
		}
		c.begin(what)
		c.say(p.Says)
		c.where(p)
		c.stop()
	}
	told := func(s prose.State, lead string) {
		var what []string
		says := ""
		for i := range x.Parts {
			if p := &x.Parts[i]; p.State == s && !p.Optional {
				if what = append(what, p.What); s != prose.Unprinted {
					says = p.Says
				}
			}
		}
		if len(what) > 0 {
			c.begin("")
			switch {
			case !c.several && says != "":
				c.say(says)
			case says != "":
				c.say(lead + ": " + strings.Join(what, ", ") + " (" + says + ")")
			case c.several:
				c.say(lead + ": " + strings.Join(what, ", "))
			default:
				c.say(lead)
			}
			c.stop()
		}
	}
	told(prose.Inapplicable, "Not applicable")
	told(prose.Waiting, "Waits")
	told(prose.Unprinted, "Known, but not in this report")
	first := true
	for i := range x.Parts {
		p := &x.Parts[i]
		lacks := p.State == prose.Missing || p.State == prose.Answered && len(p.Lacks) > 0
		if !lacks || p.Optional && p.State != prose.Answered {
			continue
		}
		switch {
		case first && p.Optional:
			c.begin("")
			c.say("Not stated: ")
		case first:
			c.begin("")
			c.say("Missing: ")
		default:
			c.say("; ")
		}
		first = false
		if c.several {
			c.say(p.What)
		}
		if len(p.Lacks) > 0 {
			switch {
			case c.several && !strings.HasPrefix(p.Lacks[0], "for "):
				c.say(", namely ")
			case c.several:
				c.say(" ")
			}
			c.say(few(p.Lacks))
		}
		c.keys(p.Keys, len(p.Lacks) > 0 || c.several)
		if p.State == prose.Missing && p.Says != "" {
			c.say(" – " + p.Says)
		}
	}
	if !first {
		c.stop()
	}
	return c.out
}

// bare tells whether a part is answered by its place alone.
func bare(p *prose.Part) bool {
	return p.State == prose.Answered && p.Says == "" && len(p.Lacks) == 0 && len(p.Where) > 0
}

// cellWriter writes the sentences of a cell.
type cellWriter struct {
	out     []doc.Inline
	label   map[string]string
	several bool // sentences name their part
	fresh   bool // a sentence begins
}

// begin opens a line on a part.
func (c *cellWriter) begin(what string) {
	if len(c.out) > 0 {
		c.out = append(c.out, doc.Break{})
	}
	if c.fresh = true; c.several && what != "" {
		c.say(what + ": ")
	}
}

func (c *cellWriter) say(s string) {
	if s == "" {
		return
	}
	if c.fresh {
		s, c.fresh = upper(s), false
	}
	c.out = append(c.out, doc.Text{Text: s})
}

func (c *cellWriter) stop() { c.say(".") }

// where refers to the places of a part.
func (c *cellWriter) where(p *prose.Part) {
	shown := p.Where
	if len(shown) > 6 {
		shown = shown[:6]
	}
	for k, id := range shown {
		switch {
		case k > 0:
			c.say(", ")
		case p.Says != "":
			c.say(" (")
		}
		name := c.label[id]
		if c.fresh {
			name, c.fresh = upper(name), false
		}
		c.out = append(c.out, doc.Ref{ID: id, Text: name})
	}
	if len(p.Where) > len(shown) {
		c.say(" and others")
	}
	if p.Says != "" && len(shown) > 0 {
		c.say(")")
	}
}

// few lists what lacks, the word for once.
func few(list []string) string {
	if len(list) > 6 {
		list = append(slices.Clone(list[:5]), "others")
	}
	list = slices.Clone(list)
	for i := 1; i < len(list); i++ {
		list[i] = strings.TrimPrefix(list[i], "for ")
	}
	return prose.And(list)
}

// keys names what would answer: keys of the protocol, or a command.
func (c *cellWriter) keys(list []welfare.Key, bracket bool) {
	for k, x := range list {
		switch {
		case k == 0 && bracket:
			c.say(" (")
		case k == 0:
		case k == len(list)-1:
			c.say(" or ")
		default:
			c.say(", ")
		}
		name := x.Name
		if x.Command {
			name = "penwright " + name
		}
		c.out = append(c.out, doc.CodeSpan{Text: name})
	}
	if len(list) > 0 && bracket {
		c.say(")")
	}
}
