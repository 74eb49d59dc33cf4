package figure

import (
	"fmt"
	"math"
	"strings"
)

// ranked keeps what ranks highest, the first of equals.
type ranked struct {
	rank, value float64
	name        string
	some        bool
}

func (r *ranked) add(rank, value float64, name string) {
	if !drawable(rank) || r.some && rank <= r.rank {
		return
	}
	*r = ranked{rank: rank, value: value, name: clean(name), some: true}
}

// String gives the name with its value, or where there is no name the value.
func (r ranked) String() string {
	if r.name == "" {
		return rounded(r.value)
	}
	return fmt.Sprintf("%s (%s)", r.name, rounded(r.value))
}

// extremes are the highest and the lowest of named values.
type extremes struct{ high, low ranked }

func (e *extremes) add(v float64, name string) {
	e.high.add(v, v, name)
	e.low.add(-v, v, name)
}

// sentence says which of things is highest and which lowest, where they differ.
func (e extremes) sentence(what string) string {
	if !e.high.some || e.high.value == e.low.value {
		return ""
	}
	return fmt.Sprintf(" %s: %s highest, %s lowest.", what, e.high, e.low)
}

// farthest says which value lies farthest from nought.
func farthest(r ranked) string {
	if !r.some || r.value == 0 || r.name == "" {
		return ""
	}
	return fmt.Sprintf(" Farthest from nought: %s.", r)
}

// some lists at most listMost names, and counts what is left of them.
func some(names []string) string {
	if len(names) > listMost {
		return fmt.Sprintf("%s; and %d others", strings.Join(names[:listMost], "; "), len(names)-listMost)
	}
	return strings.Join(names, "; ")
}

// crossing says whether lines over common places keep their order.
func crossing(lines []Line, levels int) string {
	full := 0
	for _, l := range lines {
		whole := len(l.Values) >= levels
		for i := range min(levels, len(l.Values)) {
			whole = whole && drawable(l.Values[i])
		}
		if whole {
			full++
		}
	}
	if full < 2 || full < len(lines) || levels < 2 {
		return ""
	}
	pairs, turned := 0, 0
	for i := range lines {
		for j := range i {
			pairs++
			up, down := false, false
			for k := range levels {
				d := lines[i].Values[k] - lines[j].Values[k]
				up, down = up || d > 0, down || d < 0
			}
			if up && down {
				turned++
			}
		}
	}
	switch {
	case turned == 0:
		return " The lines keep their order throughout."
	case pairs == 1:
		return " The lines cross."
	}
	return fmt.Sprintf(" Of %d pairs of lines, %d %s.", pairs, turned, plural(turned, "crosses", "cross"))
}

// reaches is the smallest number at which a curve reaches a power and stays there.
func (c PowerCurve) reaches(target float64) (n float64, ok bool) {
	n = math.NaN()
	for i := len(c.Points) - 1; i >= 0; i-- {
		q := c.Points[i]
		if !(q.Power >= target) {
			break
		}
		n, ok = q.N, true
	}
	return n, ok
}

// longest is how many bytes the one-by-one part of a picture in words may have.
const longest = 1500

// short says whether a list is short enough to be told one by one.
func short(each []string) bool {
	n := 0
	for _, s := range each {
		n += len(s) + 2
	}
	return len(each) > 0 && len(each) <= 2*listMost && n <= longest
}
