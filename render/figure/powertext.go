package figure

import (
	"math"
	"strconv"
	"strings"
)

// Text draws the curves with characters, for a terminal of the given width: power upwards,
// replicates to the right, one sign for each curve, and a row of dots at the wished power.
// It is empty where there is nothing to draw.
func (p Power) Text(columns int) string {
	const rows = 16 // a step of 5 % is not drawn, of 10 % is
	signs := []rune{'*', 'o', '+', 'x', '#'}
	var lo, hi float64
	some := false
	for _, c := range p.Curves {
		for _, q := range c.Points {
			if !drawable(q.N) || !(q.Power >= 0 && q.Power <= 1) {
				continue
			}
			if !some {
				lo, hi, some = q.N, q.N, true
			}
			lo, hi = math.Min(lo, q.N), math.Max(hi, q.N)
		}
	}
	if !some {
		return ""
	}
	wide := min(max(columns-10, 20), 72)
	at := func(n float64) int {
		if hi == lo {
			return wide / 2
		}
		return int(math.Round((n - lo) / (hi - lo) * float64(wide-1)))
	}
	up := func(power float64) int { return rows - int(math.Round(power*rows)) }
	grid := make([][]rune, rows+1)
	for y := range grid {
		grid[y] = []rune(strings.Repeat(" ", wide))
	}
	if p.Target > 0 && p.Target < 1 {
		for x := 0; x < wide; x += 2 {
			grid[up(p.Target)][x] = '.'
		}
	}
	if drawable(p.Chosen) && p.Chosen >= lo && p.Chosen <= hi {
		for y := range grid {
			grid[y][at(p.Chosen)] = ':'
		}
	}
	for k, c := range p.Curves {
		for _, q := range c.Points {
			if drawable(q.N) && q.Power >= 0 && q.Power <= 1 {
				grid[up(q.Power)][at(q.N)] = signs[k%len(signs)]
			}
		}
	}
	var b strings.Builder
	b.WriteString("power\n")
	for y, line := range grid {
		mark := "      "
		if y%4 == 0 {
			mark = strconv.FormatFloat(1-float64(y)/rows, 'f', 2, 64) + " -"
		}
		b.WriteString(mark + "|" + strings.TrimRight(string(line), " ") + "\n")
	}
	b.WriteString("      +" + strings.Repeat("-", wide) + "\n")
	// Numbers below, as many as stand apart.
	axis := []rune(strings.Repeat(" ", wide+12))
	free := 0
	for n := math.Ceil(lo); n <= hi; n++ {
		text := strconv.FormatFloat(n, 'f', -1, 64)
		x := max(7+at(n)-len(text)/2, 0)
		if x < free || x+len(text) > len(axis) {
			continue
		}
		copy(axis[x:], []rune(text))
		free = x + len(text) + 2
	}
	b.WriteString(strings.TrimRight(string(axis), " ") + "\n")
	title := title(p.X, "Replicates")
	b.WriteString(strings.Repeat(" ", max(7+wide/2-len([]rune(title))/2, 0)) + strings.ToLower(title) + "\n")
	var legend []string
	for k, c := range p.Curves {
		legend = append(legend, string(signs[k%len(signs)])+" "+clean(c.Label))
	}
	if p.Target > 0 && p.Target < 1 {
		legend = append(legend, "... wished power")
	}
	if p.Chosen > 0 {
		legend = append(legend, ": planned")
	}
	b.WriteString("      " + strings.Join(legend, "   ") + "\n")
	return b.String()
}
