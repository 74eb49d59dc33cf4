package raster

import (
	"math"

	"penwright/render/doc"
)

type point struct{ x, y float64 }

// stroke draws along a path: each straight piece as a box, and between boxes the corner
// that is missing, rounded. Ends are cut off square. All are traced in one direction, so
// that where they lie on one another they are filled once; only points at the very edge
// get the sum of what covers them.
func (c *canvas) stroke(s doc.Stroke) {
	width := s.Width * c.k
	if !(s.Width > 0) || width > far || s.Colour.A == 0 {
		return
	}
	c.trace(s.Path)
	lines := c.flatten()
	c.path = c.path[:0]
	dashes := c.dashes(s.Dashes)
	for _, l := range lines {
		if dashes == nil {
			c.outline(l.points, l.closed, width/2)
			continue
		}
		if l.closed {
			l.points = append(l.points, l.points[0])
		}
		for _, d := range dashed(l.points, dashes) {
			c.outline(d, false, width/2)
		}
	}
	c.paint(s.Colour)
}

// dashes gives the lengths of dashes and gaps, in pairs; nil for a line without gaps.
func (c *canvas) dashes(in []float64) []float64 {
	var out []float64
	sum := 0.0
	for _, d := range in {
		if !(d >= 0) || d > far {
			return nil
		}
		out = append(out, d*c.k)
		sum += d * c.k
	}
	if !(sum > 0.1) { // less than what an eye can tell from a line
		return nil
	}
	if len(out)%2 == 1 {
		out = append(out, out...)
	}
	return out
}

// mostDashes bounds the dashes of a line.
const mostDashes = 20000

func dashed(line []point, dashes []float64) [][]point {
	var out [][]point
	i, left := 0, dashes[0]
	on := true
	now := []point{line[0]}
	for k := 1; k < len(line) && len(out) < mostDashes; k++ {
		a, b := line[k-1], line[k]
		length := math.Hypot(b.x-a.x, b.y-a.y)
		for done := 0.0; len(out) < mostDashes; {
			if rest := length - done; rest <= left {
				left -= rest
				if on {
					now = append(now, b)
				}
				break
			}
			done += left
			p := point{x: a.x + (b.x-a.x)*done/length, y: a.y + (b.y-a.y)*done/length}
			if on {
				out = append(out, append(now, p))
				now = nil
			} else {
				now = []point{p}
			}
			on = !on
			i = (i + 1) % len(dashes)
			left = dashes[i]
		}
	}
	if on && len(now) > 1 {
		out = append(out, now)
	}
	return out
}

type polyline struct {
	points []point
	closed bool
}

// flatten makes straight pieces of the path traced last.
func (c *canvas) flatten() []polyline {
	var out []polyline
	var now polyline
	end := func() {
		if len(now.points) > 1 {
			out = append(out, now)
		}
		now = polyline{}
	}
	add := func(p point) {
		if n := len(now.points); n == 0 || math.Hypot(p.x-now.points[n-1].x, p.y-now.points[n-1].y) > 1e-6 {
			now.points = append(now.points, p)
		}
	}
	for _, p := range c.path {
		switch p.kind {
		case doc.MoveTo:
			end()
			add(point{x: p.x, y: p.y})
		case doc.LineTo:
			add(point{x: p.x, y: p.y})
		case doc.CurveTo:
			a := now.points[len(now.points)-1]
			length := math.Hypot(p.x1-a.x, p.y1-a.y) + math.Hypot(p.x2-p.x1, p.y2-p.y1) + math.Hypot(p.x-p.x2, p.y-p.y2)
			n := int(min(max(math.Sqrt(length)*2, 4), 200))
			for i := 1; i <= n; i++ {
				t := float64(i) / float64(n)
				u := 1 - t
				add(point{
					x: u*u*u*a.x + 3*u*u*t*p.x1 + 3*u*t*t*p.x2 + t*t*t*p.x,
					y: u*u*u*a.y + 3*u*u*t*p.y1 + 3*u*t*t*p.y2 + t*t*t*p.y,
				})
			}
		case doc.Close:
			if n := len(now.points); n > 1 {
				first := now.points[0]
				if math.Hypot(first.x-now.points[n-1].x, first.y-now.points[n-1].y) <= 1e-6 {
					now.points = now.points[:n-1]
				}
				now.closed = len(now.points) > 2
				end()
				now.points = append(now.points, first) // a path may go on from there
			}
		}
	}
	end()
	return out
}

// outline adds the outline of a line of half a width to either side.
func (c *canvas) outline(line []point, closed bool, half float64) {
	n := len(line)
	pieces := n - 1
	if closed {
		pieces = n
	}
	for i := range pieces {
		a, b := line[i], line[(i+1)%n]
		ux, uy, ok := unit(a, b)
		if !ok {
			continue
		}
		ox, oy := -uy*half, ux*half
		c.polygon(point{x: a.x + ox, y: a.y + oy}, point{x: b.x + ox, y: b.y + oy}, point{x: b.x - ox, y: b.y - oy}, point{x: a.x - ox, y: a.y - oy})
		if i == pieces-1 && !closed {
			break
		}
		vx, vy, ok := unit(b, line[(i+2)%n])
		if !ok {
			continue
		}
		c.corner(b, point{x: ux, y: uy}, point{x: vx, y: vy}, half)
	}
}

func unit(a, b point) (x, y float64, ok bool) {
	d := math.Hypot(b.x-a.x, b.y-a.y)
	if !(d > 0) {
		return 0, 0, false
	}
	return (b.x - a.x) / d, (b.y - a.y) / d, true
}

// corner fills the gap on the outer side of a turn at p from direction u to v.
func (c *canvas) corner(p, u, v point, half float64) {
	turn := math.Atan2(u.x*v.y-u.y*v.x, u.x*v.x+u.y*v.y)
	if math.Abs(turn) < 1e-3 {
		return
	}
	side := -1.0 // the outer side lies to the left of a turn to the right
	if turn < 0 {
		side = 1
	}
	from := math.Atan2(u.x*side, -u.y*side)
	steps := max(int(math.Ceil(math.Abs(turn)*math.Sqrt(half+1))), 1)
	points := []point{p}
	for i := 0; i <= steps; i++ {
		angle := from + turn*float64(i)/float64(steps)
		points = append(points, point{x: p.x + half*math.Cos(angle), y: p.y + half*math.Sin(angle)})
	}
	if turn < 0 {
		for i, j := 0, len(points)-1; i < j; i, j = i+1, j-1 {
			points[i], points[j] = points[j], points[i]
		}
	}
	c.polygon(points...)
}

// polygon adds a polygon, turned so that all have one direction.
func (c *canvas) polygon(points ...point) {
	area := 0.0
	for i, a := range points {
		b := points[(i+1)%len(points)]
		area += a.x*b.y - b.x*a.y
	}
	for i := range points {
		p := points[i]
		if area < 0 {
			p = points[len(points)-1-i]
		}
		kind := doc.LineTo
		if i == 0 {
			kind = doc.MoveTo
		}
		c.path = append(c.path, piece{kind: kind, x: p.x, y: p.y})
	}
	c.path = append(c.path, piece{kind: doc.Close})
}
