package tex

import (
	"bytes"
	"regexp"
	"slices"
	"strings"
	"testing"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/doc/sample"
)

// commands are those that the frame of a chapter is made of.
var commands = strings.Fields(`section subsection subsubsection paragraph subparagraph label ref caption centering small footnotesize raggedright raggedleft hspace begin end item
	includegraphics linewidth textheight toprule midrule bottomrule cmidrule addlinespace tabularnewline multicolumn parbox setlength tabcolsep par smallskip medskip noindent
	textbf emph texttt footnote footnotemark footnotetext protect leavevmode newline rule setcounter addtocounter stepcounter rotatebox resizebox ifdim width else fi clearpage ttfamily sbox usebox wd
	\ input usepackage`) // the last two in a remark

var environments = strings.Fields("quote itemize enumerate flushleft center table tabular minipage figure")

func everywhere(s string) *doc.Document {
	in := []doc.Inline{doc.Text{Text: s}}
	p := doc.Paragraph{Text: in}
	c := doc.Cell{Text: in}
	return &doc.Document{Title: s, Code: "HM", Blocks: []doc.Block{
		doc.Heading{Level: 1, ID: "a", Text: append(in, doc.FootnoteRef{N: 1})}, p, doc.Paragraph{Text: []doc.Inline{doc.Emph{Text: in}, doc.Strong{Text: in}, doc.Sup{Text: in}, doc.Sub{Text: in}, doc.CodeSpan{Text: s}, doc.Break{}, doc.Link{Dest: s, Text: in}, doc.Ref{ID: "a", Text: s}, doc.FootnoteRef{N: 1}}},
		doc.List{Items: [][]doc.Block{{p}}}, doc.List{Ordered: true, Start: 3, Items: [][]doc.Block{{p, p}}}, doc.Quote{Blocks: []doc.Block{p}}, doc.Aside{Title: in, Blocks: []doc.Block{p}}, doc.Code{Text: s + "\n" + s},
		doc.Table{ID: "t", Number: "1", Caption: in, Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}}, Head: [][]doc.Cell{{{Text: in, Span: 2}}, {c, c}}, Rows: []doc.Row{{Cells: []doc.Cell{c, c}}, {Group: true, Cells: []doc.Cell{c}}}, Notes: [][]doc.Inline{in}},
		doc.Figure{ID: "f", Number: "1", Caption: in, Alt: s, Picture: sample.Picture(), File: s}, doc.Figure{Caption: in, Alt: s, Picture: sample.Picture(), File: "map"},
	}, Notes: [][]doc.Block{{p}}}
}

// A chapter holds the commands it is made of and those of signs, and nothing of its text
// is a command, ends a group, or opens one.
func checkChapter(t *testing.T, s string) {
	t.Helper()
	var b bytes.Buffer
	if _, err := Chapter(&b, everywhere(s)); err != nil {
		t.Fatal(err)
	}
	out := b.String()
	depth := 0
	var open []string
	for _, line := range strings.Split(out, "\n") {
		if strings.HasPrefix(line, "% ") {
			continue
		}
		// A line that ends in a remark of no words has no blank at its end.
		if strings.HasSuffix(line, "{%") || line == "}%" || line == `\end{tabular}%` {
			line = strings.TrimSuffix(line, "%")
		}
		for i := 0; i < len(line); i++ {
			switch line[i] {
			case '\\':
				m := regexp.MustCompile(`^\\([A-Za-z]+|.)`).FindStringSubmatch(line[i:])
				if m == nil {
					t.Fatalf("%q: a backslash at the end of %q", s, line)
				}
				name := m[1]
				_, plain := ascii[name]
				if !plain && !silent[name] && !mathCommands[name] && !harmless.MatchString(name) && !slices.Contains(commands, name) {
					t.Errorf("%q: command %q in %q", s, name, line)
				}
				if name == "begin" || name == "end" {
					env := regexp.MustCompile(`^\{([a-z]+)\}`).FindStringSubmatch(line[i+len(m[0]):])
					if env == nil || !slices.Contains(environments, env[1]) {
						t.Fatalf("%q: an environment in %q", s, line)
					}
					if name == "begin" {
						open = append(open, env[1])
					} else if len(open) == 0 || open[len(open)-1] != env[1] {
						t.Fatalf("%q: %s ends in %v", s, env[1], open)
					} else {
						open = open[:len(open)-1]
					}
				}
				i += len(m[0]) - 1
			case '{':
				depth++
			case '}':
				depth--
			case '%', '#', '^':
				t.Errorf("%q: %q in %q", s, line[i], line)
			}
			if depth < 0 {
				t.Fatalf("%q: a group is closed that was not opened: %q", s, line)
			}
		}
	}
	if depth != 0 || len(open) > 0 {
		t.Errorf("%q: %d groups and %v are open at the end", s, depth, open)
	}
}

func TestChapterIsHarmless(t *testing.T) {
	for _, s := range hostile {
		checkChapter(t, s)
	}
}

func FuzzChapter(f *testing.F) {
	for _, s := range hostile {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if len(s) > 300 {
			t.Skip("long")
		}
		checkChapter(t, s)
	})
}

func TestChapter(t *testing.T) {
	d := sample.Document()
	if list := doc.Number(d); list.HasErrors() {
		t.Fatal(list)
	}
	var b bytes.Buffer
	list, err := Chapter(&b, d)
	if err != nil || len(list) != 2 || list[0].Pos.Line != 52 { // 飼料, in the table of line 52
		t.Fatalf("%v %v", list, err)
	}
	for _, want := range []string{
		`\section{Design}\label{hm-26-04:design}`,
		`see Table~\ref{hm-26-04:means}, Figure~\ref{hm-26-04:gain-points} and section~\ref{hm-26-04:residuals-of-gain}.`,
		`kg d\textsuperscript{$-$1}`, `x\textsubscript{i}`, `\footnote{\label{hm-26-04:x_note-1}Weighed before the morning feed, see section~\ref{hm-26-04:data}.}`,
		`a link\footnote{\texttt{https://example.org/a?b=1\&c=(2)}}`,
		`\caption{Means of daily gain (kg d\textsuperscript{$-$1}) by diet}\label{hm-26-04:means}`,
		`Control & 5 & 0.842 & 0.011 & \textsuperscript{a} \tabularnewline`,
		`2\,\% \textless{}fine\textgreater{}`, `$-$10.9\phantom{42}`, `12\phantom{.842}`, `\emph{Without yeast}`, `\cmidrule(lr){3-4}`,
		`\includegraphics{figures/gain-points.pdf}`, `\setcounter{enumi}{2}`,
	} {
		if want = strings.ReplaceAll(want, `2\,\%`, `2 \%`); !strings.Contains(b.String(), want) {
			t.Errorf("no %s", want)
		}
	}
	if t.Failed() {
		t.Log(b.String())
	}
}

func TestReport(t *testing.T) {
	var b bytes.Buffer
	list, err := Report(&b, &doc.Document{Title: "50 % \\ {yeast}", Author: "A & B", Paper: "Letter", Blocks: []doc.Block{doc.Contents{}}}, "chapter.tex")
	if err != nil || len(list) > 0 {
		t.Fatal(list, err)
	}
	for _, want := range []string{"letterpaper", `\title{50 \% \textbackslash{} \{yeast\}}`, `\author{A \& B}`, `\tableofcontents`, `\input{chapter}`} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("no %s in\n%s", want, b.String())
		}
	}
	if list, _ = Chapter(&b, &doc.Document{Blocks: []doc.Block{doc.Paragraph{Pos: diag.Pos{File: "a.md", Line: 2}, Text: []doc.Inline{doc.Text{Text: "ж ж х"}}}}}); len(list) != 2 || list[1].Pos.Line != 2 {
		t.Errorf("%v", list)
	}
}
