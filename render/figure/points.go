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
// while they have room, else lying down with the names at the left, else with numbers
// and a key below.
type groups struct {
	*frame
	n     int
	lying bool
	pitch float64 // between neighbouring groups
	keyed bool    // the groups are numbered
	key   key
}

// room is what is kept free at the right while the groups stand upright and while they
// lie, and the least pitch with which they may stand.
type room struct {
	upright, lying, pitch float64
	signs                 []string // short names of groups that lie, with their key; nil: numbers
	key                   []entry
	tails                 []string // what is told of each group in a key, such as its letters
	more                  []entry  // of the key while the groups stand upright
}

const (
	mostEnds    = 20    // lines of blocks that bear their names
	leastPitch  = 9.0   // of lying groups: a line of names
	widestPitch = 105.0 // of upright groups
	mostPitch   = 16.0  // of lying groups with names of one line
)

// newGroups draws the frame. The range of values must be padded already.
func newGroups(s Size, names []string, by, response string, values span, r room) *groups {
	n := max(len(names), 1)
	w, h := s.resolve(240)
	asked := s.Width
	if !(s.Width > 0) {
		// A few groups do not need the whole column.
		s.Width = min(w, max(widestPitch*float64(n)+r.upright+50, w/2))
		w = s.Width
	}
	along := axis{title: titled(by, w-2), span: span{lo: -0.5, hi: float64(n) - 0.5}, bare: true}
	v := numbers(response, values, h-foot, false)
	pitch := across(w, r.upright, v) / float64(n)
	labels, whole := allFit(names, pitch-4, 3)
	if whole && pitch >= r.pitch {
		k, _ := s.above(newList(r.more), h)
		return upright(s, h, labels, along, v, r, k, false)
	}
	s.Width = asked
	w, _ = s.resolve(h)
	along.title, v = titled(by, w-2), numbers(response, values, h-foot, false)
	_, most := s.resolve(pageHeight)
	for lines := 1; lines <= 4; lines++ {
		labels, whole = allFit(names, w*0.42, lines)
		if !whole {
			continue
		}
		if lines == 1 {
			pitch = min(max((pageHeight-foot)/float64(n), leastPitch), mostPitch)
		} else {
			pitch = float64(deepest(labels))*textSize*leading + 3
		}
		if s.Height > 0 {
			pitch = min(pitch, (most-foot)/float64(n))
		}
		if least := max(leastPitch, float64(deepest(labels))*textSize*leading); pitch >= least && pitch*float64(n)+foot <= most+1e-9 {
			return lying(s, pitch, labels, along, response, values, r, nil)
		}
	}
	labels = make([][]string, len(names))
	signs, entries := r.signs, r.key
	if signs == nil {
		signs = make([]string, len(names))
		for i := range names {
			signs[i] = number(i)
		}
		entries = numbered(names, number)
	}
	wide := 0.0
	for i, sign := range signs {
		sign = fit(sign, w*0.42, textSize, false)
		labels[i] = []string{sign}
		wide = max(wide, width(sign, textSize, false))
	}
	// Lying, if there is room for the key as well and upright the groups would stand too
	// close.
	pitch = min(mostPitch, (most-foot)/float64(n))
	if least := across(w, r.upright, v) / float64(n); least < max(r.pitch, 12) && pitch >= leastPitch {
		pitch = max(leastPitch, min(pitch, (most-foot)*0.6/float64(n)))
		tall := pitch*float64(n) + foot
		k := newList(entries).key(w-2, pageHeight-tall)
		if r.signs != nil || k.tall+tall <= most {
			return lying(s, pitch, labels, along, response, values, r, &k)
		}
	}
	for i, t := range r.tails {
		if t = clean(t); t != "" && i < len(entries) {
			entries[i].name += " (" + t + ")"
		}
	}
	if s.Height <= 0 {
		h = 200
	}
	k, h := s.above(newList(append(entries, r.more...)), h)
	every := 1
	for _, k := range []int{2, 5, 10, 20, 50, 100} {
		if (wide+2)/float64(every) > across(w, r.upright, v)/float64(n) {
			every = k
		}
	}
	for i := range labels {
		// The numbers that are left are round ones, and the first.
		if every > 1 && (i+1)%every != 0 && i > 0 || every > 1 && i == 0 && every < 5 {
			labels[i] = nil
		}
	}
	return upright(s, h, labels, along, numbers(response, values, h-foot, false), r, k, true)
}

// upright draws groups side by side.
func upright(s Size, h float64, labels [][]string, along, v axis, r room, k key, keyed bool) *groups {
	w, _ := s.resolve(h)
	g := &groups{n: max(len(labels), 1), keyed: keyed, key: k}
	for i, l := range labels {
		if len(l) > 0 {
			along.ticks = append(along.ticks, plot.Tick{Value: float64(i), Label: strings.Join(l, "\n")})
		}
	}
	g.frame = newFrame(newCanvas(w, h+g.key.tall), along, v, insets{right: r.upright, bottom: g.key.tall})
	g.key.draw(g.canvas, 1, h)
	g.pitch = (g.x1 - g.x0) / float64(g.n)
	return g
}

// lying draws groups below one another, the first at the top.
func lying(s Size, pitch float64, labels [][]string, along axis, response string, values span, r room, k *key) *groups {
	n := max(len(labels), 1)
	w, h := s.resolve(pitch*float64(n) + foot)
	g := &groups{n: n, lying: true, keyed: k != nil}
	if k != nil {
		g.key = *k
	}
	along.span = span{lo: -float64(n) + 0.5, hi: 0.5}
	along.title = titled(strings.Join(along.title, " "), h-foot+20)
	for i, l := range labels {
		along.ticks = append(along.ticks, plot.Tick{Value: -float64(i), Label: strings.Join(l, "\n")})
	}
	v := numbers(response, values, across(w, r.lying, along), true)
	v.grid = true
	g.frame = newFrame(newCanvas(w, h+g.key.tall), v, along, insets{right: r.lying, bottom: g.key.tall})
	g.key.draw(g.canvas, 1, h)
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
	rank := map[string]int{}
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
			if _, ok := rank[q.Block]; !ok && q.Block != "" && !q.Excluded {
				rank[q.Block] = len(blocks)
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
	r := room{lying: 1}
	var signs []string // what stands at the end of the line of each block
	if joined && len(blocks) <= mostEnds {
		signs = make([]string, len(blocks))
		for i, b := range blocks {
			signs[i] = p.block(b)
			r.upright = max(r.upright, width(signs[i], noteSize, false)+10)
		}
		if r.upright > 90 {
			r.more, r.upright = numbered(signs, letter), 0
			signs = make([]string, len(blocks))
			for i := range signs {
				signs[i] = letter(i)
				r.upright = max(r.upright, width(signs[i], noteSize, false)+10)
			}
		}
	}
	g := newGroups(p.Size, names, p.By, p.Response, values.padded(0.05), r)
	if p.Residual {
		g.level(0, line{width: 0.6, colour: ink})
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
	if dense {
		p.density(g)
	} else {
		p.points(g, blocks, rank, joined, signs)
	}
	g.mark("")
	return g.pic, alt
}

// points draws them one by one. Those that would overlap step aside, the first along
// the values keeping the middle, so that the same values give the same picture.
func (p Points) points(g *groups, blocks []string, rank map[string]int, joined bool, signs []string) {
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
				if b, ok := rank[q.Block]; ok && !q.Excluded && drawable(q.Value) {
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
		if signs != nil {
			name(g, signs, paths)
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
	return name
}

// name writes the names of blocks at the far ends of their lines.
func name(g *groups, names []string, paths [][][2]float64) {
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
		g.text(g.x1+3, y+capHeight(noteSize)/2, left, style{size: noteSize, colour: ink}, names[which[i]])
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
	var units, means extremes
	var far ranked
	for _, g := range p.Groups {
		means.add(g.Mean, g.Label)
		for _, q := range g.Points {
			if !q.Excluded && drawable(q.Value) {
				units.add(q.Value, q.Unit)
				far.add(math.Abs(q.Value), q.Value, q.Unit)
			}
		}
	}
	if p.Residual {
		b.WriteString(farthest(far))
	} else {
		b.WriteString(units.sentence("Units"))
	}
	if blocks > 0 && total-lost <= maxPoints {
		fmt.Fprintf(&b, " Lines join the units of each of %s.", count(blocks, title(p.Blocks, "block")))
	}
	if !p.Residual {
		var list []string
		for _, g := range p.Groups {
			if drawable(g.Mean) && len(list) < listMost {
				list = append(list, clean(g.Label)+" "+rounded(g.Mean))
			}
		}
		if short(list) && len(p.Groups) <= listMost {
			fmt.Fprintf(&b, " Means: %s.", strings.Join(list, ", "))
		}
		b.WriteString(means.sentence("Of the means"))
	}
	if excluded > 0 {
		fmt.Fprintf(&b, " %s excluded from the analysis, drawn as %s", count(excluded, "value"), plural(excluded, "a cross", "crosses"))
		var units []string
		for _, g := range p.Groups {
			for _, q := range g.Points {
				if q.Excluded && q.Unit != "" && drawable(q.Value) {
					units = append(units, clean(q.Unit))
				}
			}
		}
		fmt.Fprintf(&b, ": %s.", some(units))
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
	names := make([]string, len(things))
	for i, t := range things {
		names[i] = clean(name(t))
	}
	if len(things) > listMost || !short(names) {
		return fmt.Sprintf(" (%d groups)", len(things))
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
