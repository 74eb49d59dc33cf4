// Package sample builds a document that holds every kind of node, and text that would
// be markup in one output or another, for the tests of the writers.
package sample

import (
	"penwright/protocol/diag"
	"penwright/render/doc"
)

// Hostile is text that a writer must show as it stands.
const Hostile = `<script>alert("x")</script> & 'pen' | *not emph* [no](link) ` + "`tick`" + ` {{.Secret}} \ # ~ ^ $`

func text(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

func cell(s string) doc.Cell { return doc.Cell{Text: text(s)} }

func paragraph(parts ...doc.Inline) doc.Paragraph { return doc.Paragraph{Text: parts} }

// Document returns a new sample, not yet numbered.
func Document() *doc.Document {
	at := func(line int) diag.Pos { return diag.Pos{File: "report.md", Line: line, Col: 1} }
	return &doc.Document{
		Lang:        "en",
		Title:       "Dried yeast for growing barrows",
		ShortTitle:  "Dried yeast",
		Code:        "HM-26-04",
		Status:      "sealed",
		Author:      "A. Wren, Hollowmere research farm",
		Date:        "2026-05-18",
		Fingerprint: "0123456789ab",
		Paper:       "A4",
		Blocks: []doc.Block{
			doc.Aside{
				Kind:  "answer",
				Title: text("Daily gain"),
				Blocks: []doc.Block{paragraph(
					doc.Text{Text: "Gain rose by 14 g a day for each per cent of yeast (95 % limits 6 to 22, "},
					doc.Emph{Text: text("P")}, doc.Text{Text: " = 0.002)."})},
			},
			doc.Contents{},
			doc.Heading{Level: 1, Text: text("Design"), Pos: at(3)},
			doc.Paragraph{Pos: at(5), Text: []doc.Inline{
				doc.Text{Text: "Twenty pens in "}, doc.Strong{Text: text("five")},
				doc.Text{Text: " weight blocks; see "}, doc.Ref{ID: "means"}, doc.Text{Text: ", "},
				doc.Ref{ID: "gain-points"}, doc.Text{Text: " and "}, doc.Ref{ID: "residuals-of-gain"},
				doc.Text{Text: ". Gain is in kg d"}, doc.Sup{Text: text("−1")},
				doc.Text{Text: ", feed in kg of dry matter (x"}, doc.Sub{Text: text("i")}, doc.Text{Text: ")."},
				doc.FootnoteRef{N: 1},
			}},
			doc.Paragraph{Text: []doc.Inline{
				doc.Text{Text: "A text that is no markup: " + Hostile}, doc.Break{},
				doc.Text{Text: "a new line, "}, doc.CodeSpan{Text: "code `with` ticks & <b>"},
				doc.Text{Text: ", "}, doc.Link{Dest: "https://example.org/a?b=1&c=(2)", Text: text("a link")},
				doc.Text{Text: " and "}, doc.Link{Dest: "#means", Text: text("one inside")}, doc.Text{Text: "."},
			}},
			doc.List{Ordered: true, Start: 3, Tight: true, Items: [][]doc.Block{
				{paragraph(doc.Text{Text: "Weigh the barrows."})},
				{paragraph(doc.Text{Text: "Feed them."}), doc.List{Tight: true, Items: [][]doc.Block{
					{paragraph(doc.Text{Text: "morning"})},
					{paragraph(doc.Text{Text: "evening"})},
				}}},
			}},
			doc.List{Items: [][]doc.Block{
				{paragraph(doc.Text{Text: "An item of two paragraphs."}), paragraph(doc.Text{Text: "The second."})},
				{paragraph(doc.Text{Text: "+ an item that begins with a sign"})},
			}},
			doc.Quote{Blocks: []doc.Block{paragraph(doc.Text{Text: "1. A quotation that begins like a list."})}},
			doc.Code{Text: "penwright verify report.html\n```\n<&>\n"},
			doc.Rule{},
			doc.Heading{Level: 1, Text: text("Results"), Pos: at(30)},
			doc.Heading{Level: 3, Text: text("Residuals of gain"), Pos: at(32)},
			doc.Table{
				ID: "means", Caption: []doc.Inline{doc.Text{Text: "Means of daily gain (kg d"}, doc.Sup{Text: text("−1")}, doc.Text{Text: ") by diet"}},
				Columns: []doc.Column{{Key: true}, {Align: doc.Right}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Center}},
				Head: [][]doc.Cell{
					{cell(""), cell(""), {Text: text("Daily gain"), Span: 2, Align: doc.Center, Own: true}, cell("")},
					{cell("Diet"), cell("Pens"), cell("Mean"), cell("SE"), cell("Group")},
				},
				Rows: []doc.Row{
					{Group: true, Cells: []doc.Cell{cell("Without yeast")}},
					{Cells: []doc.Cell{cell("Control"), cell("5"), cell("0.842"), cell("0.011"), {Text: []doc.Inline{doc.Sup{Text: text("a")}}}}},
					{Group: true, Cells: []doc.Cell{cell("With yeast")}},
					{Cells: []doc.Cell{cell("1 %"), cell("5"), cell("0.858"), cell("0.011"), {Text: []doc.Inline{doc.Sup{Text: text("ab")}}}}},
					{Cells: []doc.Cell{cell("2 % <fine>"), cell("5"), cell("−10.9"), cell("< 0.02"), {Text: []doc.Inline{doc.Sup{Text: text("b")}}}}},
					{Cells: []doc.Cell{cell("3 | 4 %"), cell("4"), cell("12"), cell(""), cell("–")}},
					{Rule: true, Cells: []doc.Cell{cell("All"), cell("19"), cell("0.861"), cell("0.005"), cell("")}},
				},
				Notes: [][]doc.Inline{
					text("Means without a common letter differ at 5 % (Tukey-Kramer)."),
					text("One pen of 3 | 4 % was excluded."),
				},
				CSV: "means.csv", Pos: at(34),
			},
			doc.Figure{
				ID: "gain-points", Caption: text("Daily gain by diet; a line joins the pens of a block"),
				Alt:     "Daily gain rises from 0.84 kg without yeast to 0.88 kg with 3 % of it in all five blocks.",
				Picture: Picture(), File: "gain-points", Pos: at(40),
			},
			doc.Heading{Level: 2, Text: text("Data"), Pos: at(50)},
			doc.Table{
				Columns: []doc.Column{{Key: true}, {}, {Align: doc.Decimal}},
				Head:    [][]doc.Cell{{cell("Pen"), cell("Diet"), cell("Gain")}},
				Rows: []doc.Row{
					{Cells: []doc.Cell{cell("P10"), cell("Zein"), cell("0.9")}},
					{Cells: []doc.Cell{cell("P2"), cell(Hostile), cell("0.85")}},
					{Cells: []doc.Cell{cell("P1"), cell("飼料 Ŝ"), cell("10.125")}},
				},
				Sortable: true, Pos: at(52),
			},
			doc.Aside{Kind: "caution", Title: text("Before an animal is moved"), Blocks: []doc.Block{
				paragraph(doc.Text{Text: "Local codes, the ethics committee and the attending veterinarian decide."}),
			}},
			doc.Aside{Kind: "finding", Title: text("Finding"), Blocks: []doc.Block{
				paragraph(doc.Text{Text: "Pen P17 lies far from the others."}),
			}},
		},
		Notes: [][]doc.Block{
			{paragraph(doc.Text{Text: "Weighed before the morning feed, see "}, doc.Ref{ID: "data"}, doc.Text{Text: "."})},
		},
	}
}

// Picture returns a small drawing that uses every operation.
func Picture() *doc.Picture {
	ink := doc.Colour{A: 255, Role: doc.Ink}
	faint := doc.Colour{R: 200, G: 200, B: 200, A: 255, Role: doc.Faint}
	blue := doc.Colour{R: 0, G: 114, B: 178, A: 255}
	wash := doc.Colour{R: 230, G: 159, B: 0, A: 64}
	box := func(x, y, w, h float64) []doc.Segment {
		return []doc.Segment{
			{Kind: doc.MoveTo, X: x, Y: y}, {Kind: doc.LineTo, X: x + w, Y: y},
			{Kind: doc.LineTo, X: x + w, Y: y + h}, {Kind: doc.LineTo, X: x, Y: y + h}, {Kind: doc.Close},
		}
	}
	dot := func(x, y, r float64) []doc.Segment {
		const k = 0.5522847498 // of the radius: four cubic curves that draw a circle
		return []doc.Segment{
			{Kind: doc.MoveTo, X: x + r, Y: y},
			{Kind: doc.CurveTo, X: x, Y: y + r, X1: x + r, Y1: y + k*r, X2: x + k*r, Y2: y + r},
			{Kind: doc.CurveTo, X: x - r, Y: y, X1: x - k*r, Y1: y + r, X2: x - r, Y2: y + k*r},
			{Kind: doc.CurveTo, X: x, Y: y - r, X1: x - r, Y1: y - k*r, X2: x - k*r, Y2: y - r},
			{Kind: doc.CurveTo, X: x + r, Y: y, X1: x + k*r, Y1: y - r, X2: x + r, Y2: y - k*r},
			{Kind: doc.Close},
		}
	}
	ops := []doc.Op{
		doc.Fill{Path: box(0, 0, 320, 200), Colour: doc.Colour{R: 255, G: 255, B: 255, A: 255, Role: doc.Paper}},
		doc.Fill{Path: box(40, 60, 270, 40), Colour: wash},
		doc.Stroke{Path: []doc.Segment{{Kind: doc.MoveTo, X: 40, Y: 100}, {Kind: doc.LineTo, X: 310, Y: 100}}, Width: 0.5, Dashes: []float64{2, 2}, Colour: faint},
		doc.Stroke{Path: []doc.Segment{{Kind: doc.MoveTo, X: 40, Y: 10}, {Kind: doc.LineTo, X: 40, Y: 170}, {Kind: doc.LineTo, X: 310, Y: 170}}, Width: 0.75, Colour: ink},
		doc.Label{X: 150, Y: 192, Size: 9, Text: "Yeast (%) & more <", Colour: ink, Width: 80},
		doc.Label{X: 12, Y: 120, Size: 9, Angle: 90, Text: "Gain (kg)", Bold: true, Italic: true, Colour: ink, Width: 40},
	}
	for i, y := range []float64{140, 110, 95, 60} {
		ops = append(ops,
			doc.Mark{Name: "pen P" + string(rune('1'+i)) + " <" + "block A>"},
			doc.Fill{Path: dot(70+60*float64(i), y, 3), Colour: blue},
		)
	}
	ops = append(ops, doc.Mark{},
		doc.Stroke{Path: []doc.Segment{{Kind: doc.MoveTo, X: 70, Y: 140}, {Kind: doc.LineTo, X: 130, Y: 110}, {Kind: doc.LineTo, X: 190, Y: 95}, {Kind: doc.LineTo, X: 250, Y: 60}}, Width: 1, Colour: blue})
	return &doc.Picture{Width: 320, Height: 200, Ops: ops}
}
