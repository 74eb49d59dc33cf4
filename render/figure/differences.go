package figure

import (
	"fmt"
	"math"
	"strings"

	"penwright/render/doc"
)

// Differences shows differences, or any other estimates that are judged against nought,
// with their limits: a row each, beside a line at nought.
type Differences struct {
	Size
	Response string // title of the axis of differences, with its unit
	By       string // title of the rows
	Interval string // what the bars are, in words: "simultaneous 95 % limits"
	Rows     []Difference
}

// Difference is that of A less B, where At says within what, with its limits, which are
// NaN where there are none. Without B it is what A names.
type Difference struct {
	At, A, B         string
	Value, Low, High float64
}

// String names a difference.
func (q Difference) String() string { return q.named(clean(q.A), clean(q.B)) }

func (q Difference) named(a, b string) string {
	if q.B != "" {
		a += " − " + b
	}
	if q.At != "" {
		a = clean(q.At) + ": " + a
	}
	return a
}

// signs are short names of the differences, with the key of what they are made of.
func (d Differences) signs() (short []string, key []entry) {
	at := map[string]string{}
	sign := func(name string) string {
		if name == "" {
			return ""
		}
		s, ok := at[name]
		if !ok {
			s = number(len(key))
			at[name] = s
			key = append(key, entry{sign: s, name: name})
		}
		return s
	}
	for _, q := range d.Rows {
		a := sign(q.A)
		short = append(short, q.named(a, sign(q.B)))
	}
	return short, key
}

// Draw gives the picture, and the same in words.
func (d Differences) Draw() (*doc.Picture, string) {
	alt := d.words()
	values := empty()
	var names []string
	for _, q := range d.Rows {
		names = append(names, q.String())
		if drawable(q.Value) {
			values.add(q.Value, q.Low, q.High)
		}
	}
	if values.empty() {
		return note(d.Size, "No differences to draw."), alt
	}
	values.add(0)
	r := room{lying: 1, pitch: math.Inf(1)}
	r.signs, r.key = d.signs()
	g := newGroups(d.Size, names, d.By, d.Response, values.padded(0.05), r)
	g.level(0, line{width: 0.8, colour: ink})
	for i, q := range d.Rows {
		if !drawable(q.Value) {
			continue
		}
		g.mark(q.String())
		g.interval(i, Mean{Value: q.Value, Low: q.Low, High: q.High}, 0)
		x, y := g.at(i, q.Value, 0)
		g.marker(disc, x, y, 2.6, palette[0])
	}
	g.mark("")
	return g.pic, alt
}

func (d Differences) words() string {
	var b strings.Builder
	var each []string
	var far, near ranked
	n, above, below := 0, 0, 0
	limits := false
	for _, q := range d.Rows {
		if !drawable(q.Value) {
			continue
		}
		n++
		far.add(math.Abs(q.Value), q.Value, q.String())
		near.add(-math.Abs(q.Value), q.Value, q.String())
		s := q.String() + " " + rounded(q.Value)
		if drawable(q.Low) && drawable(q.High) {
			limits = true
			s += " (" + rounded(q.Low) + " to " + rounded(q.High) + ")"
			switch {
			case q.Low > 0:
				above++
			case q.High < 0:
				below++
			}
		}
		each = append(each, s)
	}
	fmt.Fprintf(&b, "%s: %s", title(d.Response, "Differences"), count(n, "difference"))
	if d.Interval != "" && limits {
		fmt.Fprintf(&b, ", with %s", clean(d.Interval))
	}
	if short(each) {
		fmt.Fprintf(&b, ": %s", strings.Join(each, "; "))
	}
	b.WriteString(".")
	if n > 1 {
		fmt.Fprintf(&b, " The largest is %s, the smallest %s.", far, near)
	}
	if limits {
		fmt.Fprintf(&b, " The limits lie wholly above nought in %d and wholly below it in %d of them.", above, below)
	}
	if lost := len(d.Rows) - n; lost > 0 {
		fmt.Fprintf(&b, " %s without an estimate.", count(lost, "difference"))
	}
	return b.String()
}
