package render

import (
	"strings"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/render/doc"
	"penwright/render/table"
)

// chapterParagraphs are the paragraphs of a chapter by name.
func (b *builder) chapterParagraphs() map[string]func() []doc.Block {
	t, rs := b.trial, b.rs
	of := func(f func() []prose.Passage) func() []doc.Block {
		return func() []doc.Block { return passages(f()) }
	}
	return map[string]func() []doc.Block{
		"the animals":         of(func() []prose.Passage { return prose.ChapterAnimals(t) }),
		"the housing":         of(func() []prose.Passage { return prose.ChapterHousing(t) }),
		"the place":           of(func() []prose.Passage { return prose.ChapterPlace(t) }),
		"the ethics":          of(func() []prose.Passage { return prose.ChapterEthics(t) }),
		"the layout":          of(func() []prose.Passage { return prose.ChapterDesign(t) }),
		"the randomization":   of(func() []prose.Passage { return prose.ChapterRandomization(t) }),
		"the number of units": of(func() []prose.Passage { return prose.ChapterSize(t, rs) }),
		"the treatments":      of(func() []prose.Passage { return prose.ChapterTreatments(t) }),
		"the measurements":    of(func() []prose.Passage { return prose.ChapterMeasurements(t) }),
		"the departures":      of(func() []prose.Passage { return prose.ChapterDepartures(t) }),
		"the analysis":        of(func() []prose.Passage { return prose.ChapterAnalysis(t, rs, true) }),
		"analysis unplanned":  of(func() []prose.Passage { return prose.ChapterAnalysis(t, rs, false) }),
		"the units analysed":  of(func() []prose.Passage { return prose.ChapterUnits(t, rs) }),
		"other responses":     of(func() []prose.Passage { return prose.ChapterOthers(t, rs) }),
		"the checks":          of(func() []prose.Passage { return prose.ChapterChecks(rs, true) }),
		"checks unplanned":    of(func() []prose.Passage { return prose.ChapterChecks(rs, false) }),
		"added contrasts":     func() []doc.Block { return paragraphs(prose.AddedContrasts(t, rs)) },
		"contrasts unplanned": of(func() []prose.Passage { return prose.ChapterUnplanned(t, rs) }),
		"the statements":      of(func() []prose.Passage { return prose.ChapterStatements(t) }),
	}
}

// chapterTables are the tables of a chapter by name, each of several responses.
func (b *builder) chapterTables() map[string]func() []doc.Block {
	t, rs := b.trial, b.rs
	means := func(planned bool) func() []doc.Block {
		return func() []doc.Block {
			var out []doc.Block
			of := b.analysed(planned)
			for _, term := range meansTerms(of) {
				for _, made := range table.ChapterMeans(t, of, term, planned) {
					out = append(out, made)
				}
			}
			return out
		}
	}
	spread := func(planned bool) func() []doc.Block {
		return func() []doc.Block {
			var out []doc.Block
			for _, made := range table.ChapterSpread(t, b.analysed(planned), b.decimals, planned) {
				out = append(out, made)
			}
			return out
		}
	}
	contrasts := func(planned bool) func() []doc.Block {
		return func() []doc.Block {
			of := b.analysed(planned)
			if !planned { // contrasts of planned responses may be unplanned too
				of = nil
				for i := range rs.Responses {
					if rs.Responses[i].Model != nil {
						of = append(of, &rs.Responses[i])
					}
				}
			}
			// What a few sentences say already needs no table.
			if made := table.ChapterContrasts(t.Plan, of, planned); len(made.Rows) > 0 && (len(of) > 1 || len(made.Rows) > 4) {
				return []doc.Block{made}
			}
			return nil
		}
	}
	return map[string]func() []doc.Block{
		"means of responses":               means(true),
		"unplanned means of responses":     means(false),
		"spread of responses":              spread(true),
		"unplanned spread of responses":    spread(false),
		"contrasts of responses":           contrasts(true),
		"unplanned contrasts of responses": contrasts(false),
		"responses": func() []doc.Block {
			made := table.Planned(t.Protocol)
			if !prose.ManyResponses(t) || len(made.Rows) == 0 {
				return nil
			}
			made.ID = "responses"
			return []doc.Block{made}
		},
	}
}

// analysed are the responses with a model, planned beforehand or not.
func (b *builder) analysed(planned bool) []*result.Response {
	var out []*result.Response
	for i := range b.rs.Responses {
		if r := &b.rs.Responses[i]; r.Model != nil && prose.Planned(r) == planned {
			out = append(out, r)
		}
	}
	return out
}

// meansTerms are the terms that the responses have means of, in their order.
func meansTerms(rs []*result.Response) []string {
	var out []string
	for _, r := range rs {
		for _, m := range r.Means {
			if !contains(out, m.Term) {
				out = append(out, m.Term)
			}
		}
	}
	return out
}

// chapterFigures are the figures of what a primary response showed: of its interaction
// where one stands, else of each treatment.
func (b *builder) chapterFigures(name string) []doc.Block {
	r := b.pictures.response(name)
	if r == nil {
		return nil
	}
	var out []doc.Block
	for _, term := range prose.Shown(b.trial.Plan, r) {
		out = append(out, b.pictures.means(name, term)...)
	}
	return out
}

// passages sets sentences as paragraphs; the table or figure that one leans on is named
// in parentheses at its end.
func passages(of []prose.Passage) []doc.Block {
	var out []doc.Block
	var text []doc.Inline
	end := func() {
		if len(text) > 0 {
			out = append(out, doc.Paragraph{Text: text})
		}
		text = nil
	}
	named := map[string]bool{}
	for _, s := range of {
		if s.Text == "" {
			end()
			continue
		}
		if len(text) > 0 {
			text = append(text, doc.Text{Text: " "})
		}
		if s.See == "" || named[s.See] {
			text = append(text, inlines(s.Text)...)
			continue
		}
		named[s.See] = true
		head, open := s.Text[:len(s.Text)-1], " ("
		if strings.HasSuffix(head, ")") && strings.Contains(head[strings.LastIndex(head, "("):], "; P ") {
			head, open = head[:len(head)-1], "; "
		}
		text = append(text, inlines(head)...)
		text = append(text, doc.Text{Text: open}, doc.Ref{ID: s.See, Text: notShown, Optional: true}, doc.Text{Text: ")" + s.Text[len(s.Text)-1:]})
	}
	end()
	return out
}

// notShown stands in an optional reference of a passage until it is known whether the
// document has what it points at.
const notShown = "not shown"

// sourceList is the references of a chapter, a paragraph each.
func (b *builder) sourceList() []doc.Block {
	var out []doc.Block
	for _, s := range prose.ChapterReferences(b.trial, b.rs) {
		out = append(out, paragraph(s))
	}
	return out
}

// withoutMissing takes the references of passages out whose tables and figures the
// document does not have, with the parentheses around them.
func withoutMissing(blocks []doc.Block) []doc.Block {
	there := map[string]bool{}
	doc.Walk(blocks, func(node any) {
		switch x := node.(type) {
		case doc.Table:
			there[x.ID] = true
		case doc.Figure:
			there[x.ID] = true
		}
	})
	return doc.Mapper{Block: func(b doc.Block) doc.Block {
		p, ok := b.(doc.Paragraph)
		if !ok {
			return b
		}
		var out []doc.Inline
		for i := 0; i < len(p.Text); i++ {
			ref, ok := p.Text[i].(doc.Ref)
			if !ok || !ref.Optional || ref.Text != notShown || there[ref.ID] || len(out) == 0 || i+1 == len(p.Text) {
				out = append(out, p.Text[i])
				continue
			}
			before, _ := out[len(out)-1].(doc.Text)
			after, _ := p.Text[i+1].(doc.Text)
			switch {
			case strings.HasSuffix(before.Text, " (") && strings.HasPrefix(after.Text, ")"):
				before.Text, after.Text = strings.TrimSuffix(before.Text, " ("), strings.TrimPrefix(after.Text, ")")
			case strings.HasSuffix(before.Text, "; "):
				before.Text = strings.TrimSuffix(before.Text, "; ")
			default:
				out = append(out, p.Text[i])
				continue
			}
			out[len(out)-1] = before
			out = append(out, after)
			i++
		}
		p.Text = out
		return p
	}}.Blocks(blocks)
}
