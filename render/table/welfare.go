package table

import (
	"cmp"
	"slices"
	"strings"

	"penwright/analysis/prose"
	"penwright/protocol"
	"penwright/protocol/welfare"
	"penwright/render/doc"
)

// Cautions lists the findings on the welfare of animals, what is outside a limit first.
func Cautions(found []welfare.Finding) doc.Table {
	out := doc.Table{ID: "cautions", Caption: text("What the protocol states of its animals, looked at"), Sortable: true,
		Columns: []doc.Column{left(true), left(false), left(false), left(false)},
		Head:    head(cell("Looked at"), cell("Outcome"), cell("The protocol states"), cell("Finding"))}
	sorted := gravest(found)
	for i := range sorted {
		f := &sorted[i]
		out.Rows = append(out.Rows, doc.Row{Rule: i > 0 && sorted[i-1].Level != f.Level, Cells: []doc.Cell{
			cell(upper(f.About)), cell(upper(f.Level.String())), cell(f.Stated), cell(prose.FindingText(f))}})
	}
	out.Notes = [][]doc.Inline{text("Pass: nothing was found outside the limits that apply; that approves nothing. " + prose.Deference())}
	return out
}

// gravest sorts findings, warnings first.
func gravest(found []welfare.Finding) []welfare.Finding {
	sorted := slices.Clone(found)
	slices.SortStableFunc(sorted, func(a, b welfare.Finding) int { return cmp.Compare(b.Level, a.Level) })
	return sorted
}

// Limits lists the published limits of each finding, those that apply first. A limit that
// was shown before without being applied, and is kept, is not repeated for a finding of
// the same kind.
func Limits(found []welfare.Finding) doc.Table {
	out := doc.Table{ID: "limits", Caption: text("Published limits beside what the protocol states"), Wide: true,
		Columns: []doc.Column{left(true), left(false), left(false), left(false), left(false), left(false)},
		Head:    head(cell("Limit"), cell("Document"), cell("Jurisdiction"), cell("Read"), cell("The protocol"), cell("Kept"))}
	shown := map[string]bool{}
	for _, f := range gravest(found) {
		limits := slices.Clone(f.Limits)
		slices.SortStableFunc(limits, func(a, b welfare.Quoted) int { return cmp.Compare(rank(&a), rank(&b)) })
		var rows []doc.Row
		for k := range limits {
			q := &limits[k]
			key := f.Code + " " + q.Words() + " " + q.Where()
			if shown[key] && !q.Applied && (q.Met || q.Stated == "") {
				continue
			}
			shown[key] = true
			rows = append(rows, doc.Row{Cells: []doc.Cell{cell(upper(q.Words())), cell(welfare.SourceOf(q.Citation).Title + ", " + q.Clause), cell(q.Jurisdiction),
				cell(q.Reading.String()), cell(q.Stated), cell(prose.KeptText(q))}})
		}
		if len(rows) > 0 {
			out.Rows = append(append(out.Rows, doc.Row{Rule: len(out.Rows) > 0, Group: true, Cells: []doc.Cell{cell(upper(f.About))}}), rows...)
		}
	}
	out.Notes = [][]doc.Inline{text("C: read in the official text or a full copy of it. C2: read in a document that reproduces it. Shown: the limit is quoted and the finding does not rest on it.")}
	return out
}

// rank puts what is applied first, then what is shown with a comparison.
func rank(q *welfare.Quoted) int {
	switch {
	case q.Applied:
		return 0
	case q.Stated != "":
		return 1
	}
	return 2
}

// Rules lists the published statements without a number that the findings quote.
func Rules(found []welfare.Finding) doc.Table {
	var rows [][]string
	var seen []string
	for i := range found {
		for _, r := range found[i].Rules {
			if !slices.Contains(seen, r.ID) {
				seen = append(seen, r.ID)
				rows = append(rows, []string{upper(found[i].About), upper(r.Text) + ".", welfare.SourceOf(r.Citation).Title + ", " + r.Clause, r.Jurisdiction, r.Reading.String()})
			}
		}
	}
	return listing("rules", "Published rules that the findings touch", []string{"On", "In our words", "Document", "Jurisdiction", "Read"}, rows)
}

// LookUps lists what is known from memory alone: it was compared with nothing.
func LookUps(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, r := range welfare.LookUp(p) {
		rows = append(rows, []string{upper(r.Topic), upper(r.What), r.Document, r.Jurisdiction, upper(r.Reason), "M"})
	}
	return listing("look-ups", "Look this up in the official text", []string{"On", "What", "Document", "Jurisdiction", "Why it was not compared", "Read"}, rows)
}

// Documents lists where the limits and rules of the findings were read.
func Documents(found []welfare.Finding) doc.Table {
	var rows [][]string
	seen := map[string]int{} // document and reading → row
	add := func(c welfare.Citation) {
		key := c.Source + " " + c.Reading.String()
		if i, ok := seen[key]; ok {
			if !slices.Contains(strings.Split(rows[i][1], ", "), c.Jurisdiction) {
				rows[i][1] += ", " + c.Jurisdiction
			}
			return
		}
		seen[key] = len(rows)
		s := welfare.SourceOf(c)
		rows = append(rows, []string{s.Title, c.Jurisdiction, prose.ReadingText(c.Reading, s.Read), s.Address, c.Seen})
	}
	for i := range found {
		for _, q := range found[i].Limits {
			add(q.Citation)
		}
		for _, r := range found[i].Rules {
			add(r.Citation)
		}
	}
	return listing("documents", "Documents of the limits and rules", []string{"Document", "Jurisdiction", "Read", "Address", "Taken over on"}, rows)
}
