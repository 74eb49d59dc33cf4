package table

import (
	"penwright/analysis/prose"
	"penwright/render/doc"
)

// Claims lists what the prose of a report asserts, with what it was held against.
func Claims(claims []prose.Claim) doc.Table {
	t := doc.Table{
		ID: "claims", Caption: text("Claims of the author’s words"), Sortable: true,
		Columns: []doc.Column{left(true), left(false), left(false)},
		Head:    head(cell("Claim"), cell("Results"), cell("Where")),
	}
	for _, c := range claims {
		why := c.Why
		if c.Open {
			why = "waits for the data"
		}
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{cell(c.Text), cell(why), cell(c.Where)}})
	}
	return t
}
