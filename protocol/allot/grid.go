package allot

import (
	"fmt"
	"slices"

	"penwright/protocol/layout"
)

// grid cuts the instances of a unit that crosses two others into fields: rectangles of
// rows and columns that belong together. Rows belong together when they lie in the same
// parent, are of the same class and received the same; so do columns.
type grid struct {
	plan  *layout.Plan
	unit  int
	sides [2]int      // the crossed units: rows, columns
	class [2][]int32  // classes that rows and columns carry; nil: none
	parts [2]side     // groups of rows and of columns, where they do not hang on the draw
	drawn bool        // rows or columns received treatments of their own
	fixed []rectangle // of every draw, where nothing is drawn
}

// side tells how the rows, or the columns, are grouped.
type side struct {
	group []int32 // of each row
	place []int32 // of each row in its group
	size  []int   // of each group
}

// rectangle is one field.
type rectangle struct {
	row, column   int // groups of rows and columns
	rows, columns int
	cells         []int32 // instance at row × columns + column
}

// grid prepares the fields of a unit with the given crossed units for rows and columns.
// why is said where there are none; both are empty where a class is not known.
func (r *refusal) grid(u, rows, columns int, fixed [][]int32) (g *grid, why string) {
	g = &grid{plan: r.plan, unit: u, sides: [2]int{rows, columns}}
	for k, v := range g.sides {
		class, ok := r.classes(v, fixed)
		if !ok {
			return nil, ""
		}
		g.class[k] = class
		if of := r.plan.Allocation(v); of != nil {
			g.drawn = true
			if !of.Complete || of.Separate || of.Checks != nil {
				return nil, fmt.Sprintf("%s receives treatments of its own that do not stand equally often everywhere", r.plan.Units[v].Name)
			}
		}
	}
	return g, ""
}

// fields gives the rectangles for what rows and columns received, in the order in which
// they are met; nil where not every row of one meets every column.
func (g *grid) fields(levels [][]int32) []rectangle {
	if g.fixed != nil {
		return g.fixed
	}
	plan := g.plan
	for k, v := range g.sides {
		g.parts[k] = grouped(plan, v, g.class[k], levels)
	}
	rows, columns := &g.parts[0], &g.parts[1]
	rowOf, columnOf := plan.Coarse(g.unit, g.sides[0]), plan.Coarse(g.unit, g.sides[1])
	number := map[[2]int32]int{}
	var out []rectangle
	for i := range plan.Units[g.unit].N {
		r, c := rowOf[i], columnOf[i]
		of := [2]int32{rows.group[r], columns.group[c]}
		f, ok := number[of]
		if !ok {
			f = len(out)
			number[of] = f
			n := rectangle{row: int(of[0]), column: int(of[1]), rows: rows.size[of[0]], columns: columns.size[of[1]]}
			if n.rows*n.columns > plan.Units[g.unit].N {
				return nil
			}
			n.cells = make([]int32, n.rows*n.columns)
			for c := range n.cells {
				n.cells[c] = -1
			}
			out = append(out, n)
		}
		out[f].cells[int(rows.place[r])*out[f].columns+int(columns.place[c])] = int32(i)
	}
	for _, f := range out {
		if slices.Contains(f.cells, -1) {
			return nil
		}
	}
	if !g.drawn {
		g.fixed = out
	}
	return out
}

// grouped sorts the instances of unit v into groups of the same parent, class and
// treatment, numbered by first appearance.
func grouped(plan *layout.Plan, v int, class []int32, levels [][]int32) side {
	unit := &plan.Units[v]
	number := map[[3]int32]int32{}
	s := side{group: make([]int32, unit.N), place: make([]int32, unit.N)}
	for i := range s.group {
		var of [3]int32
		if unit.Within >= 0 {
			of[0] = plan.Coarse(v, unit.Within)[i]
		}
		if class != nil {
			of[1] = class[i]
		}
		for _, f := range unit.Receives {
			of[2] = of[2]*int32(len(plan.Factors[f].Levels)) + levels[f][i]
		}
		g, ok := number[of]
		if !ok {
			g = int32(len(number))
			number[of] = g
			s.size = append(s.size, 0)
		}
		s.group[i], s.place[i] = g, int32(s.size[g])
		s.size[g]++
	}
	return s
}
