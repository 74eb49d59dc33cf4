package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"unicode"

	"gonum.org/v1/plot"

	"penwright/render/doc"
)

// Points shows each unit by its treatment, the units of a block joined by thin lines:
// the data themselves, or residuals.
type Points struct {
	Size
	Response string // title of the axis of values, with its unit
	By       string // title of the groups
	Groups   []Group
	Blocks   string // what the blocks are called, such as "block"
	// Residual draws a line at nought, and the picture in words calls the values
	// residuals.
	Residual bool
}

// Group is the units of one treatment. Mean is drawn as a bar unless it is NaN.
type Group struct {
	Label  string
	Mean   float64
	Points []Point
}

// Point is one unit. Block joins it to units of the same block in other groups; empty:
// to none. What is Excluded was measured and not analysed: an open cross. A value that
// is not finite is not drawn.
type Point struct {
	Unit, Block string
	Value       float64
	Excluded    bool
}

// byValue is the order of values from low to high, equal ones in the order given.
func byValue(values []float64) []int {
	order := make([]int, len(values))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch {
		case values[a] < values[b]:
			return -1
		case values[a] > values[b]:
			return 1
		}
		return 0
	})
	return order
}

// groups is a frame of which one axis has named groups: upright with the names below
// while they have room, else lying down with the names at the left.
type groups struct {
	*frame
	n     int
	lying bool
	pitch float64 // between neighbouring groups
}

// room is what is kept free at the right while the groups stand upright and while they
// lie, and the least pitch with which they may stand.
type room struct{ upright, lying, pitch float64 }

// newGroups draws the frame. The range of values must be padded already.
func newGroups(s Size, names []string, by, response string, values span, r room) *groups {
	n := max(len(names), 1)
	w, h := s.resolve(240)
	along := axis{title: clean(by), span: span{lo: -0.5, hi: float64(n) - 0.5}, bare: true}
	v := numbers(response, values, h-45, false)
	pitch := across(w, r.upright, v) / float64(n)
	upright := pitch >= r.pitch
	for i, name := range names {
		lines, whole := wrap(name, pitch-4, textSize, 3)
		upright = upright && whole
		along.ticks = append(along.ticks, plot.Tick{Value: float64(i), Label: strings.Join(lines, "\n")})
	}
	if upright {
		f := newFrame(newCanvas(w, h), along, v, insets{right: r.upright})
		return &groups{frame: f, n: n, pitch: (f.x1 - f.x0) / float64(n)}
	}
	// Lying, the first group stands at the top. Where the pitch is below a line, only
	// every so many is named.
	g := &groups{n: n, lying: true}
	const foot = 45
	_, h = s.resolve(min(min(max((pageHeight-foot)/float64(n), 9.6), 16)*float64(n)+foot, pageHeight))
	pitch = (h - foot) / float64(n)
	every := int(math.Ceil(textSize * leading / pitch))
	along.span = span{lo: -float64(n) + 0.5, hi: 0.5}
	along.ticks = along.ticks[:0]
	for i := 0; i < len(names); i += every {
		along.ticks = append(along.ticks, plot.Tick{Value: -float64(i), Label: fit(names[i], w*0.34, textSize, false)})
	}
	v = numbers(response, values, across(w, r.lying, along), true)
	v.grid = true
	g.frame = newFrame(newCanvas(w, h), v, along, insets{right: r.lying})
	g.pitch = (g.y1 - g.y0) / float64(n)
	return g
}

// at is the place of a value of group i, shifted by off points along the axis of groups.
func (g *groups) at(i int, v, off float64) (x, y float64) {
	if g.lying {
		return g.x(v), g.y(-float64(i)) + off
	}
	return g.x(float64(i)) + off, g.y(v)
}

// level draws a line at one value across all groups.
func (g *groups) level(v float64, l line) {
	if g.lying {
		g.stroke(l, segment(g.x(v), g.y0, g.x(v), g.y1)...)
		return
	}
	g.stroke(l, segment(g.x0, g.y(v), g.x1, g.y(v))...)
}

// Draw gives the picture, and the same in words.
func (p Points) Draw() (*doc.Picture, string) {
	values := empty()
	if p.Residual {
		values.add(0)
	}
	total, drawn, excluded, lost := 0, 0, 0, 0
	data := empty()
	var names []string
	var blocks []string // in order of first appearance
	number := map[string]int{}
	for _, g := range p.Groups {
		names = append(names, g.Label)
		values.add(g.Mean)
		for _, q := range g.Points {
			total++
			switch {
			case !drawable(q.Value):
				lost++
				continue
			case q.Excluded:
				excluded++
			default:
				drawn++
				data.add(q.Value)
			}
			values.add(q.Value)
			if _, ok := number[q.Block]; !ok && q.Block != "" && !q.Excluded {
				number[q.Block] = len(blocks)
				blocks = append(blocks, q.Block)
			}
		}
	}
	alt := p.words(len(blocks), total, drawn, excluded, lost, data)
	if values.empty() || drawn+excluded == 0 {
		return note(p.Size, "No values to draw."), alt
	}
	dense := total-lost > maxPoints
	joined := !dense && len(blocks) > 0 && len(blocks) <= 200 && len(p.Groups) > 1
	named := joined && len(blocks) <= 14
	end := 0.0
	if named {
		for _, b := range blocks {
			end = max(end, width(p.block(b), noteSize, false)+10)
		}
	}
	g := newGroups(p.Size, names, p.By, p.Response, values.padded(0.05), room{upright: end, lying: 1})
	if p.Residual {
		g.level(0, line{width: 0.6, colour: ink})
	}
	if dense {
		p.density(g)
	} else {
		p.points(g, blocks, number, joined, named)
	}
	for i, group := range p.Groups {
		if !drawable(group.Mean) {
			continue
		}
		g.mark("mean of " + group.Label)
		half := min(g.pitch*0.34, 15)
		x0, y0 := g.at(i, group.Mean, -half)
		x1, y1 := g.at(i, group.Mean, half)
		g.stroke(line{width: 3, colour: paper}, segment(x0, y0, x1, y1)...)
		g.stroke(line{width: 1.6, colour: ink}, segment(x0, y0, x1, y1)...)
	}
	g.mark("")
	return g.pic, alt
}

// points draws them one by one. Those that would overlap step aside, the first along
// the values keeping the middle, so that the same values give the same picture.
func (p Points) points(g *groups, blocks []string, number map[string]int, joined, named bool) {
	r := 2.3
	if g.pitch < 12 {
		r = max(g.pitch*0.18, 1.3)
	}
	step := 2*r + 0.5
	half := max(g.pitch/2-r-1.5, 0)
	type place struct{ x, y float64 }
	places := make([][]place, len(p.Groups))
	for i, group := range p.Groups {
		values := make([]float64, len(group.Points))
		for k, q := range group.Points {
			values[k] = q.Value
			if !drawable(q.Value) {
				values[k] = limit
			}
		}
		places[i] = make([]place, len(values))
		// The last point put into each lane; lanes alternate sides of the middle.
		lanes := int(half/step)*2 + 1
		last := make([]float64, lanes)
		for l := range last {
			last[l] = math.Inf(-1)
		}
		for _, k := range byValue(values) {
			if !drawable(group.Points[k].Value) {
				continue
			}
			x, y := g.at(i, values[k], 0)
			along := -y
			if g.lying {
				along = x
			}
			best := 0
			for l := range last {
				if along-last[l] >= step {
					best = l
					break
				}
				if last[l] < last[best] {
					best = l
				}
			}
			last[best] = along
			off := float64((best+1)/2) * step
			if best%2 == 0 {
				off = -off
			}
			x, y = g.at(i, values[k], off)
			places[i][k] = place{x: x, y: y}
		}
	}
	if joined {
		paths := make([][][2]float64, len(blocks))
		for i, group := range p.Groups {
			sum := make([]place, len(blocks))
			n := make([]float64, len(blocks))
			for k, q := range group.Points {
				if b, ok := number[q.Block]; ok && !q.Excluded && drawable(q.Value) {
					sum[b].x += places[i][k].x
					sum[b].y += places[i][k].y
					n[b]++
				}
			}
			for b := range blocks {
				if n[b] > 0 {
					paths[b] = append(paths[b], [2]float64{sum[b].x / n[b], sum[b].y / n[b]})
				}
			}
		}
		for b, path := range paths {
			if len(path) > 1 {
				g.mark(p.block(blocks[b]))
				g.stroke(line{width: 0.6, colour: tint(grey, 0.75)}, polyline(false, path...)...)
			}
		}
		if named {
			p.name(g, blocks, paths)
		}
	}
	for i, group := range p.Groups {
		for k, q := range group.Points {
			if !drawable(q.Value) {
				continue
			}
			g.mark(q.Unit)
			at := places[i][k]
			if q.Excluded {
				g.cross(at.x, at.y, r)
				continue
			}
			g.marker(disc, at.x, at.y, r, palette[0])
		}
	}
}

// block names a block, saying what it is where its own name is a bare number.
func (p Points) block(name string) string {
	name = clean(name)
	if what := clean(p.Blocks); what != "" && !strings.ContainsFunc(name, unicode.IsLetter) {
		name = capital(what) + " " + name
	}
	return fit(name, 70, noteSize, false)
}

// name writes the names of blocks at the far ends of their lines.
func (p Points) name(g *groups, blocks []string, paths [][][2]float64) {
	if g.lying {
		return // the far end is at the bottom, where names would run into one another
	}
	var at []float64
	var which []int
	for b, path := range paths {
		if len(path) > 1 {
			at = append(at, path[len(path)-1][1])
			which = append(which, b)
		}
	}
	g.mark("")
	ys := spread(at, noteSize*leading, g.y0+2, g.y1-2)
	for i, y := range ys {
		path := paths[which[i]]
		x := path[len(path)-1][0]
		g.leader(x+4, at[i], g.x1+1, y)
		g.text(g.x1+3, y+capHeight(noteSize)/2, left, style{size: noteSize, colour: ink}, p.block(blocks[which[i]]))
	}
}

// leader leads from a mark to its name.
func (f *frame) leader(x0, y0, x1, y1 float64) {
	f.stroke(line{width: 0.4, colour: tint(grey, 0.75)}, segment(x0, y0, x1, y1)...)
}

// density draws each group as a shape around its middle, as wide as many of its points
// lie in each range of values.
func (p Points) density(g *groups) {
	s := g.v.span
	if g.lying {
		s = g.h.span
	}
	const bins = 60
	for i, group := range p.Groups {
		var n [bins]int
		most := 0
		for _, q := range group.Points {
			if !drawable(q.Value) || q.Excluded {
				continue
			}
			b := min(max(int((q.Value-s.lo)/(s.hi-s.lo)*bins), 0), bins-1)
			n[b]++
			most = max(most, n[b])
		}
		if most == 0 {
			continue
		}
		var near, far [][2]float64 // the two sides, in steps
		for b, k := range n {
			half := g.pitch * 0.4 * float64(k) / float64(most)
			for _, v := range []float64{float64(b), float64(b + 1)} {
				x, y := g.at(i, s.lo+(s.hi-s.lo)*v/bins, -half)
				near = append(near, [2]float64{x, y})
				x, y = g.at(i, s.lo+(s.hi-s.lo)*v/bins, half)
				far = append(far, [2]float64{x, y})
			}
		}
		slices.Reverse(far)
		g.mark(group.Label)
		g.fill(tint(palette[0], 0.75), polyline(true, append(near, far...)...)...)
	}
}

func (p Points) words(blocks, total, drawn, excluded, lost int, data span) string {
	var b strings.Builder
	what := "value"
	if p.Residual {
		what = "residual"
	}
	fmt.Fprintf(&b, "%s: %s by %s", title(p.Response, "Values"), count(drawn, what), title(p.By, "group"))
	b.WriteString(listed(p.Groups, func(g Group) string { return g.Label }))
	if !data.empty() {
		fmt.Fprintf(&b, ", from %s to %s", rounded(data.lo), rounded(data.hi))
	}
	b.WriteString(".")
	if blocks > 0 && total-lost <= maxPoints {
		fmt.Fprintf(&b, " Lines join the units of each of %s.", count(blocks, title(p.Blocks, "block")))
	}
	if !p.Residual {
		var means []string
		for _, g := range p.Groups {
			if drawable(g.Mean) && len(means) < listMost {
				means = append(means, clean(g.Label)+" "+rounded(g.Mean))
			}
		}
		if len(means) > 0 && len(p.Groups) <= listMost {
			fmt.Fprintf(&b, " Means: %s.", strings.Join(means, ", "))
		}
	}
	if excluded > 0 {
		fmt.Fprintf(&b, " %s excluded from the analysis, drawn as %s", count(excluded, "value"), plural(excluded, "a cross", "crosses"))
		var units []string
		for _, g := range p.Groups {
			for _, q := range g.Points {
				if q.Excluded && drawable(q.Value) {
					units = append(units, clean(q.Unit))
				}
			}
		}
		if len(units) <= listMost {
			fmt.Fprintf(&b, ": %s", strings.Join(units, ", "))
		}
		b.WriteString(".")
	}
	if total-lost > maxPoints {
		b.WriteString(" The points are too many to draw: the width of each shape shows how many lie at each height.")
	}
	if lost > 0 {
		fmt.Fprintf(&b, " %s without a value.", count(lost, "unit"))
	}
	return b.String()
}

// listMost is how many things the picture in words names one by one.
const listMost = 12

// listed names few things and counts many.
func listed[T any](things []T, name func(T) string) string {
	if len(things) == 0 {
		return ""
	}
	if len(things) > listMost {
		return fmt.Sprintf(" (%d groups)", len(things))
	}
	names := make([]string, len(things))
	for i, t := range things {
		names[i] = clean(name(t))
	}
	return " (" + strings.Join(names, ", ") + ")"
}

func title(s, otherwise string) string {
	if s = clean(s); s != "" {
		return s
	}
	return otherwise
}

func count(n int, noun string) string {
	return fmt.Sprintf("%d %s", n, plural(n, noun, noun+"s"))
}

func plural(n int, one, many string) string {
	if n == 1 {
		return one
	}
	return many
}
