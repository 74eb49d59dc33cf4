package figure

import (
	"fmt"
	"strings"

	"penwright/render/doc"
)

// Power shows how the power of a test grows with the number of replicates.
type Power struct {
	Size
	X      string // title of the axis of replicates
	Curves []PowerCurve
	Target float64 // the power that is asked for, as a share; 0: none
	Chosen float64 // the number of replicates planned; 0: none
}

// PowerCurve is the power for one difference.
type PowerCurve struct {
	Label  string
	Points []PowerPoint
}

// PowerPoint is the power, as a share, with N replicates.
type PowerPoint struct{ N, Power float64 }

// Draw gives the picture, and the same in words.
func (p Power) Draw() (*doc.Picture, string) {
	xs := empty()
	names := 0.0
	for _, c := range p.Curves {
		for _, q := range c.Points {
			if drawable(q.N) && q.Power >= 0 && q.Power <= 1 {
				xs.add(q.N)
			}
		}
		names = max(names, width(clean(c.Label), textSize, false))
	}
	alt := p.words(xs)
	if xs.empty() {
		return note(p.Size, "No power to draw."), alt
	}
	if p.Chosen > 0 {
		xs.add(p.Chosen)
	}
	w, h := p.resolve(250)
	end := min(names, w*0.3) + 22
	c := newCanvas(w, h)
	y := numbers("Power, %", span{lo: 0, hi: 100}, h-45, false)
	x := numbers(title(p.X, "Replicates"), xs.padded(0.03), across(w, end, y), true)
	f := newFrame(c, x, y, insets{right: end})
	if p.Target > 0 && p.Target < 1 {
		f.stroke(line{width: 0.8, dashes: dash(4), colour: ink}, segment(f.x0, f.y(100*p.Target), f.x1, f.y(100*p.Target))...)
	}
	if drawable(p.Chosen) && p.Chosen > 0 {
		f.stroke(line{width: 0.8, dashes: dash(4), colour: ink}, segment(f.x(p.Chosen), f.y0, f.x(p.Chosen), f.y1)...)
	}
	var which []int
	var from [][2]float64
	for k, curve := range p.Curves {
		var px, py []float64
		for _, q := range curve.Points {
			if drawable(q.N) && q.Power >= 0 && q.Power <= 1 {
				px, py = append(px, q.N), append(py, 100*q.Power)
			}
		}
		if len(px) == 0 {
			continue
		}
		shape, colour := symbol(k)
		f.mark(curve.Label)
		f.curve(px, py, line{width: 1.2, dashes: dash(k), colour: colour})
		if len(px) <= 40 {
			for i := range px {
				f.marker(shape, f.x(px[i]), f.y(py[i]), 2.1, colour)
			}
		}
		last := len(px) - 1
		from, which = append(from, [2]float64{f.x(px[last]), f.y(py[last])}), append(which, k)
	}
	f.ends(which, from, func(k int) string { return p.Curves[k].Label })
	f.mark("")
	return f.pic, alt
}

func (p Power) words(xs span) string {
	var b strings.Builder
	b.WriteString("Power against " + strings.ToLower(title(p.X, "replicates")))
	if !xs.empty() {
		fmt.Fprintf(&b, " from %s to %s", rounded(xs.lo), rounded(xs.hi))
	}
	b.WriteString(".")
	for k, c := range p.Curves {
		if k == listMost {
			break
		}
		for _, q := range c.Points {
			if q.N == p.Chosen || p.Chosen == 0 && q.N == xs.hi {
				fmt.Fprintf(&b, " %s: %s %% with %s.", clean(c.Label), rounded(100*q.Power), rounded(q.N))
			}
		}
	}
	if p.Target > 0 && p.Target < 1 {
		fmt.Fprintf(&b, " A line marks %s %%.", rounded(100*p.Target))
	}
	return b.String()
}
