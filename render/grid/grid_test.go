package grid_test

import (
	"math"
	"strings"
	"testing"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/grid"
)

func cell(s string) doc.Cell { return doc.Cell{Text: []doc.Inline{doc.Text{Text: s}}} }

func set() grid.Type { return grid.Type{Face: face.Get(face.Serif, false, false), Size: 10} }

func sample() doc.Table {
	return doc.Table{
		Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}, {Align: doc.Decimal}, {}},
		Head:    [][]doc.Cell{{cell(""), {Text: cell("Daily gain").Text, Span: 2}, cell("")}, {cell("Diet"), cell("Mean"), cell("SE")}},
		Rows: []doc.Row{
			{Group: true, Cells: []doc.Cell{cell("Without yeast"), cell("lost")}},
			{Rule: true, Cells: []doc.Cell{cell("Control"), cell("0.842"), cell("12"), cell("a long remark on the control of the trial")}},
			{Cells: []doc.Cell{cell("Yeast"), cell("−10.9"), cell("")}},
		},
	}
}

func TestPlaces(t *testing.T) {
	g := grid.New(sample(), set())
	if len(g.Columns) != 4 || len(g.Rows[0].Cells) != 1 || g.Rows[0].Cells[0].Span != 4 {
		t.Fatalf("%+v", g)
	}
	for i, row := range append(g.Head, g.Rows[1].Cells, g.Rows[2].Cells) {
		at := 0
		for _, c := range row {
			if c.Col != at || c.Span < 1 {
				t.Errorf("row %d: a cell stands at %d, not %d", i, c.Col, at)
			}
			at += c.Span
		}
		if at != 4 {
			t.Errorf("row %d ends at %d", i, at)
		}
	}
	for _, x := range []struct {
		row, col int
		pad      string
	}{{1, 1, ""}, {2, 1, "42"}, {1, 2, ""}, {1, 3, ""}} {
		if got := g.Pad(g.Rows[x.row].Cells[x.col]); got != x.pad {
			t.Errorf("cell %d of row %d lacks %q, want %q", x.col, x.row, got, x.pad)
		}
	}
	// The widest number is as wide as its head and its tail, which stand in two rows.
	f := set()
	if got, want := g.Columns[1].Natural, f.Face.Width("−10", 10)+f.Face.Width(".842", 10); math.Abs(got-want) > 1e-9 {
		t.Errorf("the numbers take %.3f, want %.3f", got, want)
	}
}

func TestFit(t *testing.T) {
	g := grid.New(sample(), set())
	if !g.Natural(1000, 8) || g.Natural(100, 8) {
		t.Error("whether a table fits as it is")
	}
	for _, width := range []float64{1000, 300, 200, 160, 100, 10, 1} {
		widths, ok := g.Fit(width, 8)
		sum := 8 * float64(len(widths)-1)
		for i, w := range widths {
			if w < 0 || w > g.Columns[i].Natural+1e-9 {
				t.Errorf("in %g, column %d takes %g of %g", width, i, w, g.Columns[i].Natural)
			}
			sum += w
		}
		if sum > max(width, 8*3+1)+1e-6 {
			t.Errorf("in %g the table takes %g", width, sum)
		}
		if ok != (width >= 160) {
			t.Errorf("in %g: %v", width, ok)
		}
		if ok && widths[1] < g.Columns[1].Firm-1e-9 {
			t.Errorf("in %g a number is broken", width)
		}
	}
	widths, _ := g.Fit(160, 8)
	if n := grid.Lines(g.Rows[1].Cells, widths, 8); n < 3 || n > 6 {
		t.Errorf("a remark of 41 letters in %.0f points takes %d lines", widths[3], n)
	}
}

// A table cut by columns holds every column once, and those that name rows in each part.
func TestDivide(t *testing.T) {
	wide := doc.Table{Columns: []doc.Column{{Key: true}}, Head: [][]doc.Cell{{cell("")}, {cell("Diet")}}, Rows: []doc.Row{{Cells: []doc.Cell{cell("Control")}}}}
	for i := range 40 {
		wide.Columns = append(wide.Columns, doc.Column{Align: doc.Right})
		if i%4 == 0 {
			wide.Head[0] = append(wide.Head[0], doc.Cell{Text: cell("four").Text, Span: 4})
		}
		wide.Head[1] = append(wide.Head[1], cell(strings.Repeat("h", 1+i%5)))
		wide.Rows[0].Cells = append(wide.Rows[0].Cells, cell(strings.Repeat("8", 1+i%7)))
	}
	g := grid.New(wide, set())
	parts := g.Divide(300, 8)
	if len(parts) < 3 {
		t.Fatalf("%d parts", len(parts))
	}
	seen := 0
	for _, p := range parts {
		if _, ok := p.Fit(300, 8); !ok {
			t.Error("a part does not fit")
		}
		if got := doc.Plain(p.Rows[0].Cells[0].Text); got != "Control" {
			t.Errorf("a part begins with %q", got)
		}
		seen += len(p.Columns) - 1
		for _, row := range append(p.Head, p.Rows[0].Cells) {
			at := 0
			for _, c := range row {
				if c.Col != at {
					t.Errorf("a cell stands at %d, not %d", c.Col, at)
				}
				at += c.Span
			}
			if at != len(p.Columns) {
				t.Errorf("a row ends at %d of %d", at, len(p.Columns))
			}
		}
	}
	if seen != 40 {
		t.Errorf("%d columns", seen)
	}
}

func TestHostile(t *testing.T) {
	for _, table := range []doc.Table{
		{}, {Columns: make([]doc.Column, 3)}, {Rows: []doc.Row{{}, {Group: true}, {Cells: []doc.Cell{{Span: math.MaxInt}, {Span: -5}}}}},
		{Columns: make([]doc.Column, 100000)}, {Head: [][]doc.Cell{{{Span: 9}}, nil}, Columns: make([]doc.Column, 2)},
	} {
		g := grid.New(table, set())
		widths, _ := g.Fit(100, 8)
		for _, row := range g.Rows {
			grid.Lines(row.Cells, widths, 8)
		}
		g.Divide(100, 8)
	}
}
