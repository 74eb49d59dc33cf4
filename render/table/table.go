// Package table makes the tables of a report from results, plan and protocol: finished
// text in columns, one number of decimals down a column.
package table

import (
	"penwright/analysis/num"
	"penwright/render/doc"
)

func text(s string) []doc.Inline {
	if s == "" {
		return nil
	}
	return []doc.Inline{doc.Text{Text: s}}
}

func cell(s string) doc.Cell { return doc.Cell{Text: text(s)} }

func emph(s string) doc.Cell {
	return doc.Cell{Text: []doc.Inline{doc.Emph{Text: text(s)}}}
}

func head(cells ...doc.Cell) [][]doc.Cell { return [][]doc.Cell{cells} }

func left(key bool) doc.Column { return doc.Column{Align: doc.Left, Key: key} }

func decimal() doc.Column { return doc.Column{Align: doc.Decimal} }

// fixed prints a column's number with the decimals of the column.
func fixed(x interface{ Known() bool }, v float64, d int) string {
	if !x.Known() {
		return ""
	}
	return num.Fixed(v, d)
}
