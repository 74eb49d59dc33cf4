package figure

import (
	"fmt"
	"slices"
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
	for _, c := range p.Curves {
		for _, q := range c.Points {
			if drawable(q.N) && q.Power >= 0 && q.Power <= 1 {
				xs.add(q.N)
			}
		}
	}
	alt := p.words(xs)
	if xs.empty() {
		return note(p.Size, "No power to draw."), alt
	}
	if p.Chosen > 0 {
		xs.add(p.Chosen)
	}
	w, high := p.resolve(min(max(250, float64(len(p.Curves))*textSize*leading+60), pageHeight))
	t, h := tagged(p.Size, p.Curves, func(c PowerCurve) string { return c.Label }, high)
	end := t.wide + 22
	k, _ := p.above(newList(t.key), h)
	c := newCanvas(w, h+k.tall)
	y := numbers("Power (%)", span{lo: 0, hi: 100}, h-foot, false)
	x := numbers(title(p.X, "Replicates"), xs.padded(0.03), across(w, end, y), true)
	f := newFrame(c, x, y, insets{right: end, bottom: k.tall})
	k.draw(c, 1, h)
	wished := p.Target > 0 && p.Target < 1
	planned := drawable(p.Chosen) && p.Chosen > 0
	if wished {
		f.stroke(line{width: 0.8, dashes: dash(4), colour: ink}, segment(f.x0, f.y(100*p.Target), f.x1, f.y(100*p.Target))...)
	}
	if planned {
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
	f.ends(which, from, t)
	f.mark("")
	// The two lines say what they are where no curve runs.
	var crowd []box
	for _, curve := range p.Curves {
		var last *PowerPoint
		for i, q := range curve.Points {
			if !drawable(q.N) || !(q.Power >= 0 && q.Power <= 1) {
				continue
			}
			if last != nil {
				crowd = append(crowd, along(f.x(last.N), f.y(100*last.Power), f.x(q.N), f.y(100*q.Power))...)
			}
			last = &curve.Points[i]
			crowd = append(crowd, box{x0: f.x(q.N) - 2.5, y0: f.y(100*q.Power) - 2.5, x1: f.x(q.N) + 2.5, y1: f.y(100*q.Power) + 2.5})
		}
	}
	if planned {
		x := f.x(p.Chosen)
		crowd = append(crowd, box{x0: x - 1, y0: f.y0, x1: x + 1, y1: f.y1})
		s := "planned: " + rounded(p.Chosen)
		tall := f.y1 - f.y0
		crowd = f.free(crowd, s, [][2]float64{
			{x + 4, f.y1 - tall*0.06}, {x - 4 - width(s, noteSize, false), f.y1 - tall*0.06}, {x + 4, f.y1 - tall*0.3},
			{x - 4 - width(s, noteSize, false), f.y1 - tall*0.3}, {x - 4 - width(s, noteSize, false), f.y0 + tall*0.12},
		})
	}
	if wished {
		y := f.y(100 * p.Target)
		s := "wished: " + rounded(100*p.Target) + "\u202f%"
		w := width(s, noteSize, false)
		f.free(crowd, s, [][2]float64{
			{f.x0 + 4, y - 3}, {f.x1 - w - 2, y - 3}, {f.x1 - w - 2, y + 3 + capHeight(noteSize)}, {f.x0 + 4, y + 3 + capHeight(noteSize)},
			{(f.x0 + f.x1 - w) / 2, y + 3 + capHeight(noteSize)}, {(f.x0 + f.x1 - w) / 2, y - 3},
		})
	}
	return f.pic, alt
}

// free writes a text at the first of the places where it covers nothing, and adds it to
// what must not be covered.
func (f *frame) free(crowd []box, s string, places [][2]float64) []box {
	for _, at := range places {
		b := lineBox(at[0], at[1], left, s, noteSize)
		if b.x0 >= f.x0 && b.x1 <= f.x1+1 && b.y0 >= f.y0-2 && b.y1 <= f.y1+2 && !slices.ContainsFunc(crowd, b.meets) {
			f.text(at[0], at[1], left, style{size: noteSize, colour: ink}, s)
			return append(crowd, b)
		}
	}
	return crowd
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
		fmt.Fprintf(&b, " A line marks the wished power of %s %%.", rounded(100*p.Target))
		for k, c := range p.Curves {
			if k == listMost {
				break
			}
			if n, ok := c.reaches(p.Target); ok {
				fmt.Fprintf(&b, " %s reaches it from %s on.", title(c.Label, "The curve"), rounded(n))
			} else {
				fmt.Fprintf(&b, " %s does not reach it.", title(c.Label, "The curve"))
			}
		}
	}
	return b.String()
}
