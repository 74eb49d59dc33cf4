// Package pagetest makes documents to try page layout and its writers on.
package pagetest

import (
	"fmt"
	"math"
	"strings"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

func words(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

func para(parts ...any) doc.Paragraph {
	var text []doc.Inline
	for _, p := range parts {
		switch p := p.(type) {
		case string:
			text = append(text, doc.Text{Text: p})
		case doc.Inline:
			text = append(text, p)
		}
	}
	return doc.Paragraph{Text: text, Pos: diag.Pos{File: "narrative.md", Line: 1, Col: 1}}
}

func em(s string) doc.Inline { return doc.Emph{Text: words(s)} }

func cell(s string) doc.Cell { return doc.Cell{Text: words(s)} }

func cells(list ...string) []doc.Cell {
	var out []doc.Cell
	for _, s := range list {
		out = append(out, cell(s))
	}
	return out
}

const prose = "The pens were filled in two afternoons from one farrowing batch, and each block holds pens of the same " +
	"weight class and the same side of the house. Feed was offered ad libitum from a single-space feeder; refusals were " +
	"weighed back on the same scale every Monday before eight o’clock. A pen is the unit that received a diet, so the mean " +
	"of its eight barrows is what the analysis sees, and the barrows within it add nothing to the degrees of freedom for error."

// Sample is a report in which everything that can stand in a document stands once.
func Sample() *doc.Document {
	return &doc.Document{
		Lang: "en", Title: "Dried yeast in diets for growing barrows: daily gain, intake and feed conversion",
		ShortTitle: "Dried yeast for growing barrows", Code: "HM-2024-07", Status: "complete",
		Author: "Hollowmere Research Farm", Date: "2024-11-18", Fingerprint: "3f9c1d2e7ab0", Paper: "A4",
		Blocks: sampleBlocks(),
		Notes: [][]doc.Block{
			{para("Weighed on a platform scale, 0.1 kg; the scale was checked with two certified weights of 20 kg before each weighing.")},
			{para("The blocks are weight classes; ", em("side of the house"), " was not used because the two sides did not differ in the years before.")},
			{para("A footnote called from a table.")},
		},
	}
}

func sampleBlocks() []doc.Block {
	b := []doc.Block{
		doc.Aside{Kind: "answer", Title: words("Answer"), Blocks: []doc.Block{
			para("Each further 1 % of dried yeast raised daily gain by 21 g (95 % limits 9 to 33 g; ", em("P"), " = 0.002) up to the highest level tried. "+
				"Intake did not differ between diets (", em("P"), " = 0.41)."),
		}},
		doc.Contents{},
		doc.Heading{Level: 1, ID: "design", Number: "1", Text: words("Design rationale")},
		para(prose, doc.FootnoteRef{N: 1}, " Yield is given as t ha⁻¹, density as kg m⁻³, and the model has ", em("y"), doc.Sub{Text: words("ij")},
			" = ", em("μ"), " + ", em("β"), doc.Sub{Text: words("j")}, " + ", em("τ"), doc.Sub{Text: words("i")}, " + ", em("ε"), doc.Sub{Text: words("ij")},
			" with α ≤ 0.05, −1.2 °C, ∑", em("x"), "² ≥ 0 and x ∈ {0, 1}."),
		doc.Heading{Level: 2, ID: "units", Number: "1.1", Text: words("Units and blocks")},
		para(prose),
		doc.List{Tight: true, Items: [][]doc.Block{
			{para("Barrows of 28.4 kg (SD 2.1) at the start;")},
			{para("five weight blocks of four pens each, eight barrows to a pen, housed on partly slatted floor with straw given twice a day;"),
				doc.List{Tight: true, Items: [][]doc.Block{{para("pens 1 to 10 on the north side")}, {para("pens 11 to 20 on the south side")}}}},
			{para("water from two nipples a pen.")},
		}},
		doc.List{Ordered: true, Start: 9, Items: [][]doc.Block{
			{para("Diets were mixed in one batch. ", prose)},
			{para("Bags were numbered by the mill, not by the farm.")},
		}},
		doc.Quote{Blocks: []doc.Block{para("The stockman did not know which feeder held which diet, and was asked at the end to guess. He was right for six pens of twenty.")}},
		doc.Table{ID: "tab-anova", Number: "1", Caption: words("Analysis of variance of daily gain, kg"),
			Columns: []doc.Column{{Key: true}, {Align: doc.Right}, {Align: doc.Decimal}, {Align: doc.Decimal}, {}, {Align: doc.Decimal}, {Align: doc.Decimal}},
			Head:    [][]doc.Cell{cells("Source", "df", "SS", "MS", "Tested over", "F", "P")},
			Rows: []doc.Row{
				{Cells: cells("Blocks", "4", "0.024610", "0.006153", "pens within blocks", "6.71", "0.004")},
				{Cells: cells("Yeast", "3", "0.013420", "0.004473", "pens within blocks", "4.88", "0.019")},
				{Cells: cells("  linear", "1", "0.012544", "0.012544", "pens within blocks", "13.68", "0.003")},
				{Cells: cells("Pens within blocks", "12", "0.011004", "0.000917")},
				{Cells: cells("Total", "19", "0.049034"), Rule: true},
			},
			Notes: [][]doc.Inline{{doc.Text{Text: "df: degrees of freedom; SS: sum of squares; MS: mean square. Letters: means with a letter in common do not differ at 5 % (Tukey)."}}},
		},
		para("Daily gain rose with yeast, as ", doc.Ref{ID: "tab-means", Text: "Table 2"}, " and ", doc.Ref{ID: "fig-gain", Text: "Figure 1"},
			" show; the house is described in ", doc.Link{Dest: "https://hollowmere.example/house-4", Text: words("the farm’s own pages")}, ". ", prose,
			doc.FootnoteRef{N: 2}),
		doc.Figure{ID: "fig-gain", Number: "1", Caption: words("Daily gain by level of dried yeast. Points are pens, joined within blocks; the curve is the fitted quadratic with its 95 % band."),
			Alt: "Gain rises with yeast from 0.78 to 0.86 kg", Picture: Curves(420, 230)},
		meansTable(),
		doc.Heading{Level: 1, ID: "conduct", Number: "2", Text: words("Conduct")},
		para(prose, " ", doc.Strong{Text: words("One pen was excluded.")}, " ", prose),
		doc.Aside{Kind: "caution", Title: words("Caution"), Blocks: []doc.Block{
			para("Humane endpoints and space allowances are those approved by the ethics committee and the attending veterinarian; local codes come first."),
			doc.List{Tight: true, Items: [][]doc.Block{{para("Loss of 10 % of body weight: call the veterinarian.")}, {para("Lameness score 3: remove from the pen the same day.")}}},
		}},
		doc.Code{Text: "penwright verify report.pdf\n\tprotocol.toml   9b0c4e5d1f4f9d0e3f0a6f0b7b7e5b1f3a1a5a8e7f7d2c1b0a9f8e7d6c5b4a39  2 311 bytes and a line that is far too long for the measure\n"},
		doc.Heading{Level: 2, ID: "events", Number: "2.1", Text: words("Events")},
		para(prose),
		doc.Heading{Level: 3, ID: "feeder", Number: "2.1.1", Text: words("A blocked feeder")},
		para(prose, " See ", doc.CodeSpan{Text: "data/gain_2024.csv"}, "."),
		doc.Heading{Level: 4, Text: words("What was done")},
		para(prose),
		doc.Rule{},
		para(prose, " ", prose),
		doc.Heading{Level: 1, ID: "appendix", Number: "3", Text: words("Appendix: data and residuals")},
		para("All rows that were analysed stand in ", doc.Ref{ID: "tab-data", Text: "Table 3"}, "."),
		dataTable(70),
		para(prose),
		wideTable(),
		para(prose, " ", prose),
		para(prose, " ", prose, " ", prose),
		doc.Figure{ID: "fig-q", Number: "2", Caption: words("Normal quantiles of the residuals"), Alt: "Residuals against quantiles", Picture: Curves(300, 260)},
		para("Tools: 漢 and 🐖 are not in any face; שלום stands from right to left. ", prose),
	}
	return b
}

func meansTable() doc.Table {
	sup := func(s, letter string) doc.Cell {
		return doc.Cell{Text: []doc.Inline{doc.Text{Text: s}, doc.Sup{Text: words(letter)}}}
	}
	return doc.Table{ID: "tab-means", Number: "2",
		Caption: words("Means by level of dried yeast, with the standard error of a difference (SED) and the probability of the linear trend"),
		Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Decimal}},
		Head: [][]doc.Cell{
			{{}, {Text: words("Dried yeast, % of diet"), Span: 4}, {}, {}},
			cells("Variable", "0", "1", "2", "4", "SED", "P (linear)"),
		},
		Rows: []doc.Row{
			{Group: true, Cells: cells("Growth")},
			{Cells: []doc.Cell{cell("Daily gain, kg"), sup("0.781", "a"), sup("0.803", "ab"), sup("0.832", "bc"), sup("0.856", "c"), cell("0.0192"), cell("0.002")}},
			{Cells: cells("Final weight, kg", "92.4", "93.9", "96.0", "97.8", "1.41", "0.003")},
			{Group: true, Cells: cells("Feed")},
			{Cells: []doc.Cell{{Text: []doc.Inline{doc.Text{Text: "Intake, kg d⁻¹"}, doc.FootnoteRef{N: 3}}}, cell("2.07"), cell("2.10"), cell("2.11"), cell("2.12"), cell("0.041"), cell("0.41")}},
			{Cells: cells("Gain to feed", "0.377", "0.382", "0.394", "0.404", "0.0078", "0.004")},
			{Cells: cells("Days on trial", "84", "84", "84", "84", "–", "< 0.001")},
		},
	}
}

func dataTable(n int) doc.Table {
	t := doc.Table{ID: "tab-data", Number: "3", Caption: words("Data, fitted values and residuals of daily gain"), Sortable: true,
		Columns: []doc.Column{{Key: true}, {}, {}, {Align: doc.Decimal}, {Align: doc.Decimal}, {Align: doc.Decimal}, {}},
		Head:    [][]doc.Cell{cells("Pen", "Block", "Yeast, %", "Gain, kg", "Fitted, kg", "Residual", "Remark")},
	}
	for i := range n {
		v := math.Sin(float64(i) * 1.7)
		remark := ""
		if i%17 == 5 {
			remark = "the feeder was found blocked on the morning of day 12 and freed before noon; intake of that day is missing"
		}
		res := strings.Replace(fmt.Sprintf("%.3f", v/20), "-", "\u2212", 1)
		t.Rows = append(t.Rows, doc.Row{Cells: cells(fmt.Sprintf("P%02d", i+1), fmt.Sprintf("B%d", i/14+1), []string{"0", "1", "2", "4"}[i%4],
			fmt.Sprintf("%.3f", 0.82+v/10), fmt.Sprintf("%.3f", 0.82+v/20), res, remark), Rule: i > 0 && i%14 == 0})
	}
	return t
}

func wideTable() doc.Table {
	t := doc.Table{ID: "tab-wide", Number: "4", Caption: words("Weights of all barrows, kg, by week"), Wide: true,
		Columns: []doc.Column{{Key: true}}, Head: [][]doc.Cell{{cell("Pen")}}}
	for k := range 20 {
		t.Columns = append(t.Columns, doc.Column{Align: doc.Decimal})
		t.Head[0] = append(t.Head[0], cell(fmt.Sprintf("Week %d", k)))
	}
	for i := range 24 {
		row := cells(fmt.Sprintf("P%02d", i+1))
		for k := range 20 {
			row = append(row, cell(fmt.Sprintf("%.1f", 28.4+float64(k)*5.3+float64(i%7))))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: row})
	}
	return t
}

// Curves draws axes, a band, a curve, points and labels on a picture of a size.
func Curves(width, height float64) *doc.Picture {
	pic := &doc.Picture{Width: width, Height: height}
	ink, faint := doc.Colour{A: 255, Role: doc.Ink}, doc.Colour{A: 255, Role: doc.Faint}
	blue := doc.Colour{R: 0, G: 0x72, B: 0xB2, A: 255}
	left, bottom, top, right := 46.0, height-34, 10.0, width-10
	seg := func(kind doc.SegmentKind, x, y float64) doc.Segment { return doc.Segment{Kind: kind, X: x, Y: y} }
	line := func(x0, y0, x1, y1, w float64, c doc.Colour, dashes ...float64) {
		pic.Ops = append(pic.Ops, doc.Stroke{Path: []doc.Segment{seg(doc.MoveTo, x0, y0), seg(doc.LineTo, x1, y1)}, Width: w, Colour: c, Dashes: dashes})
	}
	for i := range 5 {
		y := bottom - float64(i)*(bottom-top)/4
		line(left, y, right, y, 0.4, faint)
		pic.Ops = append(pic.Ops, doc.Label{X: left - 26, Y: y + 3, Size: 8, Text: fmt.Sprintf("0.%d", 74+4*i), Colour: ink})
	}
	band := blue
	band.A = 50
	w, h := right-left, bottom-top
	pic.Ops = append(pic.Ops, doc.Fill{Colour: band, Path: []doc.Segment{
		seg(doc.MoveTo, left, bottom-0.2*h),
		{Kind: doc.CurveTo, X1: left + 0.3*w, Y1: bottom - 0.5*h, X2: left + 0.6*w, Y2: bottom - 0.8*h, X: right, Y: bottom - 0.9*h},
		seg(doc.LineTo, right, bottom-0.7*h),
		{Kind: doc.CurveTo, X1: left + 0.6*w, Y1: bottom - 0.65*h, X2: left + 0.3*w, Y2: bottom - 0.35*h, X: left, Y: bottom - 0.05*h},
		{Kind: doc.Close},
	}})
	pic.Ops = append(pic.Ops, doc.Stroke{Width: 1.4, Colour: blue, Path: []doc.Segment{
		seg(doc.MoveTo, left, bottom-0.12*h),
		{Kind: doc.CurveTo, X1: left + 0.3*w, Y1: bottom - 0.42*h, X2: left + 0.6*w, Y2: bottom - 0.73*h, X: right, Y: bottom - 0.8*h},
	}})
	for i := range 20 {
		x := left + float64(i%4)*w/4 + w/16
		y := bottom - h*(0.15+0.18*float64(i%4)+0.03*math.Sin(float64(3*i)))
		const r, k = 2.2, 2.2 * 0.5523
		pic.Ops = append(pic.Ops, doc.Mark{Name: fmt.Sprintf("pen %d", i+1)}, doc.Fill{Colour: ink, Path: []doc.Segment{
			seg(doc.MoveTo, x+r, y),
			{Kind: doc.CurveTo, X1: x + r, Y1: y + k, X2: x + k, Y2: y + r, X: x, Y: y + r},
			{Kind: doc.CurveTo, X1: x - k, Y1: y + r, X2: x - r, Y2: y + k, X: x - r, Y: y},
			{Kind: doc.CurveTo, X1: x - r, Y1: y - k, X2: x - k, Y2: y - r, X: x, Y: y - r},
			{Kind: doc.CurveTo, X1: x + k, Y1: y - r, X2: x + r, Y2: y - k, X: x + r, Y: y},
			{Kind: doc.Close},
		}}, doc.Mark{})
	}
	line(left, bottom, right, bottom, 0.7, ink)
	line(left, bottom, left, top, 0.7, ink)
	line(left, bottom-0.5*h, right, bottom-0.5*h, 0.5, ink, 3, 2)
	pic.Ops = append(pic.Ops,
		doc.Label{X: left + w/2 - 50, Y: height - 8, Size: 8.5, Text: "Dried yeast, % of diet", Colour: ink},
		doc.Label{X: 12, Y: bottom - h/2 + 50, Size: 8.5, Angle: 90, Text: "Daily gain, kg d⁻¹", Colour: ink},
		doc.Label{X: right - 70, Y: top + 10, Size: 8, Text: "R² = 0.61, α ≤ β", Italic: true, Colour: blue})
	return pic
}
