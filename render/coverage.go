package render

import (
	"penwright/analysis/prose"
	"penwright/render/doc"
	"penwright/render/table"
)

// sumsUp is the kind of the box that holds the place of what sums up a checklist.
const sumsUp = "coverage"

// coverage gives the reporting guidelines that concern the trial, as summary and table
// each. Where an answer stands is known only when the whole report is composed and
// numbered, so that both are empty until then.
func (b *builder) coverage(plan bool) []doc.Block {
	lists := prose.Checklists(b.trial, b.rs, plan)
	var out []doc.Block
	for i := range lists {
		c := &lists[i]
		if len(lists) > 1 {
			out = append(out, doc.Heading{Level: 2, Text: inlines(c.Name)})
		}
		t := table.CoverageHead(c)
		out = append(out, doc.Aside{Kind: sumsUp, Title: inlines(t.ID)}, t)
		b.checklists = append(b.checklists, checklist{id: t.ID, list: c})
	}
	return out
}

// checklist is a guideline of a report with the identifier of its table.
type checklist struct {
	id   string
	list *prose.Checklist
}

// cover fills in the checklists of a numbered report.
func (b *builder) cover(d *doc.Document) {
	if len(b.checklists) == 0 {
		return
	}
	filled := map[string]doc.Table{}
	sums := map[string]doc.Block{}
	for _, x := range b.checklists {
		table.Locate(x.list, d.Blocks)
		filled[x.id] = table.Coverage(x.list, d.Blocks)
		sums[x.id] = paragraphs(prose.Coverage(x.list))[0]
	}
	d.Blocks = doc.Mapper{Block: func(node doc.Block) doc.Block {
		switch n := node.(type) {
		case doc.Aside:
			if s, ok := sums[doc.Plain(n.Title)]; ok && n.Kind == sumsUp {
				return s
			}
		case doc.Table:
			if t, ok := filled[n.ID]; ok {
				t.Number, t.Pos = n.Number, n.Pos
				return t
			}
		}
		return node
	}}.Blocks(d.Blocks)
}
