package tex

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/grid"
)

// Widths are in ems of the size of a table. The text of a host is counted on to be as
// wide and high as that of article with 12 points on Letter, the narrowest for its type;
// what fits there fits with 10 and 11 points and on A4.
const (
	wider     = 1.13 // Latin and Computer Modern, measured by Liberation Serif
	tallest   = 20   // lines of a row; a higher one is cut
	longNotes = 1500 // bytes of notes that still stand with their table
)

// way is a manner to set a table.
type way struct {
	size   string
	sep    string  // tabcolsep
	gap    float64 // two of them
	width  float64
	lines  int  // of the body on a page
	shrunk bool // to the width of the host's text, if that is less
	turned bool
}

var ways = []way{
	{size: `\small`, sep: "4pt", gap: 0.9, width: 35, lines: 30},
	{size: `\footnotesize`, sep: "3.5pt", gap: 0.9, width: 38.5, lines: 34},
	{size: `\footnotesize`, sep: "3.5pt", gap: 0.9, width: 46, lines: 34, shrunk: true},
	{size: `\footnotesize`, sep: "4pt", gap: 1, width: 52, lines: 20, turned: true},
}

// table writes a table as one float or, where it is too high or too wide for a page, as
// several.
func (w *writer) table(t doc.Table) {
	g := grid.New(t, grid.Type{Face: face.Get(face.Serif, false, false), Size: wider, Hyphens: true})
	if len(g.Columns) == 0 {
		if text := w.within(t.Caption); text != "" {
			w.line("\n" + text)
			w.due()
		}
		return
	}
	how, fits := choose(g)
	parts := []*grid.Grid{g}
	if !fits {
		parts = g.Divide(how.width, how.gap)
	}
	float := t.Number != "" && !w.held
	if !float {
		how.turned = false
	}
	caption := w.within(t.Caption)
	size := 0
	for _, note := range t.Notes {
		size += len(doc.Plain(note))
	}
	long := size > longNotes
	first := true
	pieces := 0
	for i, part := range parts {
		widths, _ := part.Fit(how.width, how.gap)
		chunks := w.chunks(part, widths, how)
		pieces += len(chunks)
		for j, rows := range chunks {
			last := i == len(parts)-1 && j == len(chunks)-1
			w.open(float, how)
			switch {
			case first && float:
				w.line(`\caption` + w.short(t.Caption) + `{` + caption + `}` + w.label(t.ID) + `\medskip`)
			case first && caption != "":
				w.line(caption + `\par\smallskip`)
			case !first && float && t.ID != "":
				w.line(`Table~\ref{` + w.prefix + t.ID + `}, continued\par\medskip`)
			case !first:
				w.line(`continued\par\smallskip`)
			}
			first = false
			w.line(`\sbox0{%`)
			w.tabular(part, rows, widths, how)
			w.line(`}\usebox{0}`)
			if last && !long {
				var notes []string
				for _, note := range t.Notes {
					if text := w.within(note); text != "" {
						notes = append(notes, text)
					}
				}
				if len(notes) > 0 {
					w.line("\\par\\smallskip\\begin{minipage}{\\ifdim\\wd0<0.7\\linewidth 0.7\\linewidth\\else\\wd0\\fi}\\footnotesize\\raggedright\n" + strings.Join(notes, "\\par\n") + `\end{minipage}`)
				}
			}
			w.close(float, how)
			w.due()
			if last && long {
				for _, note := range t.Notes {
					if text := w.within(note); text != "" {
						w.line("\n\\noindent{\\footnotesize " + text + `\par}`)
					}
				}
				w.due()
			}
			if float && (pieces > 2 || i > 1) {
				w.flush() // pieces of pages of their own
			} else if float {
				w.floated()
			}
		}
	}
}

// choose finds the way for a table. Smaller type is better than cells of several lines,
// and these than a turned page. Without a way that fits it is the last.
func choose(g *grid.Grid) (how way, fits bool) {
	for _, x := range ways {
		if !x.turned && g.Natural(x.width, x.gap) {
			return x, true
		}
	}
	how = ways[len(ways)-1]
	least := 0
	for _, x := range ways {
		widths, ok := g.Fit(x.width, x.gap)
		if !ok || x.turned && fits {
			continue
		}
		lines := 0
		for _, row := range g.Rows {
			lines += grid.Lines(row.Cells, widths, x.gap)
		}
		if !fits || lines < least {
			how, fits, least = x, true, lines
		}
	}
	return how, fits
}

func (w *writer) open(float bool, how way) {
	switch {
	case !float:
		w.line("\n\\begin{center}" + how.size + `\setlength{\tabcolsep}{` + how.sep + `}`)
	case how.turned:
		w.line("\n\\begin{table}[p]\n\\centering\\rotatebox{90}{\\begin{minipage}{0.98\\textheight}\\centering" + how.size + `\setlength{\tabcolsep}{` + how.sep + `}`)
	default:
		w.line("\n\\begin{table}[!htbp]\n\\centering" + how.size + `\setlength{\tabcolsep}{` + how.sep + `}`)
	}
}

func (w *writer) close(float bool, how way) {
	switch {
	case !float:
		w.line(`\end{center}`)
	case how.turned:
		w.line("\\end{minipage}}\n\\end{table}")
	default:
		w.line(`\end{table}`)
	}
}

// chunks deals rows to pages. A row that is higher than most of one is cut into several,
// and a row that heads others does not stand last.
func (w *writer) chunks(g *grid.Grid, widths []float64, how way) [][]grid.Row {
	var out [][]grid.Row
	room := 0
	for _, row := range g.Rows {
		for _, piece := range cut(row, widths, how.gap, min(tallest, how.lines-2)) {
			need := grid.Lines(piece.Cells, widths, how.gap)
			if room < need || piece.Group && room < need+2 {
				out = append(out, nil)
				room = how.lines
				for _, head := range g.Head {
					room -= grid.Lines(head, widths, how.gap) - 1
				}
			}
			out[len(out)-1] = append(out[len(out)-1], piece)
			room -= need
		}
	}
	if out == nil {
		out = [][]grid.Row{nil}
	}
	return out
}

// cut makes of a row with more lines than most several.
func cut(row grid.Row, widths []float64, gap float64, most int) []grid.Row {
	lines := grid.Lines(row.Cells, widths, gap)
	if lines <= most {
		return []grid.Row{row}
	}
	out := []grid.Row{row}
	rest := slices.Clone(row.Cells)
	for len(out) < 1000 {
		now := slices.Clone(rest)
		more := false
		for i := range rest {
			c := &rest[i]
			n := grid.Lines([]grid.Cell{*c}, widths, gap)
			if n <= most {
				c.Text, c.Natural, c.Narrow, c.Tail = nil, 0, 0, ""
				continue
			}
			size := len([]rune(doc.Plain(c.Text)))
			head, tail := split(c.Text, max(size*most/n, 1))
			if doc.Plain(tail) == "" {
				c.Text, c.Natural, c.Narrow, c.Tail = nil, 0, 0, ""
				continue
			}
			share := float64(len([]rune(doc.Plain(head)))) / float64(max(size, 1))
			now[i].Text, now[i].Natural = head, c.Natural*share
			c.Text, c.Natural = tail, c.Natural*(1-share)
			more = true
		}
		out[len(out)-1].Cells = now
		if !more {
			break
		}
		next := row
		next.Rule, next.Cells = false, rest
		out = append(out, next)
		rest = slices.Clone(rest)
	}
	return out
}

// split cuts text at the space before rune n, or at it.
func split(text []doc.Inline, n int) (head, tail []doc.Inline) {
	for i, in := range text {
		size := len([]rune(doc.Plain([]doc.Inline{in})))
		if size <= n {
			n -= size
			continue
		}
		head = append(head, text[:i]...)
		rest := text[i+1:]
		switch x := in.(type) {
		case doc.Text:
			runes := []rune(x.Text)
			at := n
			for at > 0 && runes[at] != ' ' && n-at < longWord {
				at--
			}
			if at == 0 || runes[at] != ' ' {
				at = n
			}
			head = append(head, doc.Text{Text: string(runes[:at])})
			tail = append(tail, doc.Text{Text: strings.TrimLeft(string(runes[at:]), " ")})
		case doc.Emph:
			a, b := split(x.Text, n)
			head, tail = append(head, doc.Emph{Text: a}), append(tail, doc.Emph{Text: b})
		case doc.Strong:
			a, b := split(x.Text, n)
			head, tail = append(head, doc.Strong{Text: a}), append(tail, doc.Strong{Text: b})
		default:
			if i == 0 {
				head = append(head, in)
			} else {
				tail = append(tail, in)
			}
		}
		return head, append(tail, rest...)
	}
	return text, nil
}

func fraction(width float64, how way) string {
	if how.shrunk {
		return strconv.FormatFloat(math.Round(width*100)/100, 'f', -1, 64) + "em"
	}
	return strconv.FormatFloat(float64(int(width/how.width*990))/1000, 'f', -1, 64) + `\linewidth`
}

var letters = map[doc.Align]string{doc.Left: "l", doc.Center: "c", doc.Right: "r", doc.Decimal: "r"}
var ragged = map[doc.Align]string{doc.Left: `\raggedright`, doc.Center: `\centering`, doc.Right: `\raggedleft`, doc.Decimal: `\raggedleft`}

func (w *writer) tabular(g *grid.Grid, rows []grid.Row, widths []float64, how way) {
	spec := "@{}"
	wrapped := make([]bool, len(g.Columns))
	for i, c := range g.Columns {
		wrapped[i] = widths[i] < c.Natural-1e-9
		if wrapped[i] {
			spec += `p{` + fraction(widths[i], how) + `}`
		} else {
			spec += letters[c.Align]
		}
	}
	if how.shrunk {
		w.line(`\resizebox{\ifdim\width>\linewidth\linewidth\else\width\fi}{!}{%`)
	}
	w.line(`\begin{tabular}{` + spec + "@{}}\n\\toprule")
	for _, row := range g.Head {
		var out, rules []string
		for _, c := range row {
			out = append(out, w.cell(g, c, widths, wrapped, how, true))
			if c.Span > 1 && doc.Plain(c.Text) != "" {
				rules = append(rules, fmt.Sprintf(`\cmidrule(lr){%d-%d}`, c.Col+1, c.Col+c.Span))
			}
		}
		w.line(strings.Join(out, " & ") + ` \tabularnewline` + strings.Join(rules, ""))
	}
	if len(g.Head) > 0 {
		w.line(`\midrule`)
	}
	for i, row := range rows {
		switch {
		case row.Rule && i > 0:
			w.line(`\midrule`)
		case row.Group && i > 0:
			w.line(`\addlinespace`)
		case i > 0 && grid.Lines(rows[i-1].Cells, widths, how.gap) > 1:
			w.line(`\addlinespace[2pt]`)
		}
		var out []string
		for _, c := range row.Cells {
			if row.Group && len(c.Text) > 0 {
				c.Text = []doc.Inline{doc.Emph{Text: c.Text}}
			}
			out = append(out, w.cell(g, c, widths, wrapped, how, false))
		}
		w.line(strings.Join(out, " & ") + ` \tabularnewline`)
	}
	w.line("\\bottomrule\n\\end{tabular}%")
	if how.shrunk {
		w.line("}%")
	}
}

// cell writes a cell. Its alignment is that of the column where nothing else is said.
func (w *writer) cell(g *grid.Grid, c grid.Cell, widths []float64, wrapped []bool, how way, head bool) string {
	width := grid.Width(c, widths, how.gap)
	if c.Narrow > width+1e-9 {
		w.long = 8
		defer func() { w.long = longWord }()
	}
	text := w.within(c.Text)
	if pad := g.Pad(c); pad != "" && !head && text != "" {
		text += `\phantom{` + w.text(pad) + `}`
	}
	wrap := c.Natural > width+1e-9
	if c.Span == 1 && wrapped[c.Col] && !head {
		if text == "" {
			return ""
		}
		return ragged[c.Align] + `\hspace{0pt}` + text
	}
	if c.Span == 1 && c.Align == g.Columns[c.Col].Align && !wrap && !wrapped[c.Col] {
		return text
	}
	if text == "" && c.Span == 1 {
		return ""
	}
	align := c.Align
	if head && c.Span > 1 && align == doc.Decimal {
		align = doc.Center
	}
	spec := letters[align]
	if wrap || c.Span == 1 && wrapped[c.Col] {
		text = `\parbox[b]{` + fraction(width, how) + `}{` + ragged[align] + `\hspace{0pt}` + text + `}`
		if !head {
			text = strings.Replace(text, `\parbox[b]`, `\parbox[t]`, 1)
		}
	}
	if c.Col == 0 {
		spec = "@{}" + spec
	}
	if c.Col+c.Span == len(g.Columns) {
		spec += "@{}"
	}
	return `\multicolumn{` + strconv.Itoa(c.Span) + `}{` + spec + `}{` + text + `}`
}
