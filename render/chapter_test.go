package render

import (
	"bytes"
	"fmt"
	"io/fs"
	"regexp"
	"strings"
	"testing"

	"penwright/analysis/result"
	"penwright/render/doc"
)

// chapterText is a document as running text: what a reader sees but for the pictures.
func chapterText(d *doc.Document) []byte {
	var b bytes.Buffer
	cells := func(row []doc.Cell) string {
		var out []string
		for _, c := range row {
			out = append(out, doc.Plain(c.Text))
		}
		return strings.TrimRight(strings.Join(out, " | "), " |")
	}
	for _, x := range d.Blocks {
		switch x := x.(type) {
		case doc.Heading:
			fmt.Fprintf(&b, "%s %s %s\n\n", strings.Repeat("#", x.Level), x.Number, doc.Plain(x.Text))
		case doc.Paragraph:
			fmt.Fprintf(&b, "%s\n\n", doc.Plain(x.Text))
		case doc.List:
			for _, item := range x.Items {
				for _, p := range item {
					if p, ok := p.(doc.Paragraph); ok {
						fmt.Fprintf(&b, "- %s\n", doc.Plain(p.Text))
					}
				}
			}
			fmt.Fprintln(&b)
		case doc.Figure:
			fmt.Fprintf(&b, "Figure %s. %s\n\n", x.Number, doc.Plain(x.Caption))
		case doc.Aside:
			fmt.Fprintf(&b, "[%s]\n\n", doc.Plain(x.Title))
		case doc.Table:
			fmt.Fprintf(&b, "Table %s. %s\n", x.Number, doc.Plain(x.Caption))
			for _, h := range x.Head {
				fmt.Fprintf(&b, "  = %s\n", cells(h))
			}
			for _, r := range x.Rows {
				fmt.Fprintf(&b, "  %s\n", cells(r.Cells))
			}
			for _, n := range x.Notes {
				fmt.Fprintf(&b, "  * %s\n", doc.Plain(n))
			}
			fmt.Fprintln(&b)
		default:
			fmt.Fprintf(&b, "%T\n\n", x)
		}
	}
	return b.Bytes()
}

func chapterOf(t *testing.T, from fs.FS, change func(*result.Results)) string {
	t.Helper()
	x, rs, _ := opened(t, from)
	if change != nil {
		change(rs)
	}
	opt := fixed
	opt.Template = "chapter"
	d, list := Document(x, rs, opt)
	if list.HasErrors() {
		t.Fatalf("%v", list)
	}
	return string(chapterText(d))
}

// The chapter of each trial, as text, which a person reads when it changes.
func TestChapters(t *testing.T) {
	all := stages(t)
	for _, name := range []string{"demo", "demo-planned", "split-plot", "latin-square", "bare"} {
		t.Run(name, func(t *testing.T) {
			text := chapterOf(t, all[name], nil)
			golden(t, "chapter-"+name+".txt", []byte(text))
			sound(t, text)
		})
	}
}

// clumsy is what no sentence of a chapter may hold.
var clumsy = regexp.MustCompile(`%!|\(\)|\( |,,|;;|\.\.|  [a-z]| [,;.)]|not shown|\bthe the\b|\ba a\b|\bin the in\b|NaN|<nil>|\bwas were\b|\x00|: *\.`)

// bare is the word that says nothing without effect, limits and P.
var bareWord = regexp.MustCompile(`(?i)\bsignificant(ly)?\b`)

func sound(t *testing.T, text string) {
	t.Helper()
	for _, line := range strings.Split(text, "\n") {
		if strings.HasPrefix(line, "- ") || strings.HasPrefix(line, "  ") {
			continue
		}
		if m := clumsy.FindString(line); m != "" {
			t.Errorf("%q in: %s", m, line)
		}
		if m := bareWord.FindString(line); m != "" {
			t.Errorf("%q in: %s", m, line)
		}
	}
}

// What was not in the sealed plan stands by itself, in the chapter and in the sections of
// the audit that go response by response.
func TestUnplannedStandsApart(t *testing.T) {
	change := func(rs *result.Results) {
		for i := range rs.Responses {
			r := &rs.Responses[i]
			r.Planned = r.Name != "intake"
			for k := range r.Contrasts {
				if r.Contrasts[k].Name == "yeast v. none" {
					r.Contrasts[k].Planned = false
				}
			}
		}
	}
	text := chapterOf(t, trials(t)["demo"], change)
	sound(t, text)
	heading := regexp.MustCompile(`(?m)^#+ [0-9.]+ Not planned before the data$`)
	at := heading.FindAllStringIndex(text, -1)
	if len(at) != 2 {
		t.Fatalf("%d headings of what was not planned", len(at))
	}
	results := strings.Index(text, "# 2 Results")
	planned := text[strings.Index(text, "Statistical analysis"):at[0][0]] + text[results:at[1][0]]
	// How many pens each response has is said in one place.
	planned = regexp.MustCompile(`(?m)^All .*analysed.*$`).ReplaceAllString(planned, "")
	for _, word := range []string{"aily feed intake", "yeast v. none"} {
		if strings.Contains(planned, word) {
			t.Errorf("%q stands among what was planned", word)
		}
		for _, x := range []string{text[at[0][0]:results], text[at[1][0]:]} {
			if word != "yeast v. none" && !strings.Contains(x, word) {
				t.Errorf("%q is not told where it belongs", word)
			}
		}
	}
	x, rs, _ := opened(t, trials(t)["demo"])
	change(rs)
	d, list := Document(x, rs, fixed)
	if list.HasErrors() {
		t.Fatal(list)
	}
	var section, sub string
	found := map[string]bool{}
	for _, b := range d.Blocks {
		switch b := b.(type) {
		case doc.Heading:
			if b.Level == 1 {
				section, sub = doc.Plain(b.Text), ""
			} else if b.Level == 2 {
				sub = doc.Plain(b.Text)
			}
		case doc.Paragraph:
			if section == "Statistical methods" && strings.HasPrefix(doc.Plain(b.Text), "Daily feed intake. ") {
				found["methods: "+sub] = true
			}
		case doc.Figure:
			if section == "Residual pictures" && strings.Contains(b.ID, "intake") {
				found["pictures: "+sub] = true
			}
		}
	}
	for _, want := range []string{"methods: Not planned before the data", "pictures: Not planned before the data"} {
		if !found[want] {
			t.Errorf("no %s in %v", want, found)
		}
	}
	if len(found) != 2 {
		t.Errorf("told also elsewhere: %v", found)
	}
}

// A chapter cites what it uses, and its list holds what is cited and nothing else.
func TestChapterCites(t *testing.T) {
	for name, from := range trials(t) {
		text := chapterOf(t, from, nil)
		body, list, ok := strings.Cut(text, " References\n")
		if !ok {
			t.Errorf("%s: no references", name)
			continue
		}
		list, _, _ = strings.Cut(list, "\n#")
		listed := map[string]bool{}
		for _, m := range regexp.MustCompile(`(?m)^([^\s,]+), .*?\((\d{4})\)`).FindAllStringSubmatch(list, -1) {
			listed[m[1]+" "+m[2]] = true
		}
		cited := map[string]bool{}
		for _, m := range regexp.MustCompile(`\(([A-ZŠ][^\s,]+)(?: and [^,]+)?, (\d{4})\)`).FindAllStringSubmatch(body, -1) {
			cited[m[1]+" "+m[2]] = true
		}
		if len(cited) < 3 || fmt.Sprint(cited) != fmt.Sprint(listed) {
			t.Errorf("%s: cited %v, listed %v", name, cited, listed)
		}
	}
}

// The numbers of a chapter are those of its results.
func TestChapterNumbers(t *testing.T) {
	_, rs, _ := opened(t, trials(t)["demo"])
	r := &rs.Responses[0]
	text := chapterOf(t, trials(t)["demo"], nil)
	for _, m := range r.Means {
		if !strings.Contains(text, fmt.Sprintf("%.1f", float64(m.Mean))) {
			t.Errorf("no mean %.1f", float64(m.Mean))
		}
	}
	for _, s := range r.Summary {
		if !strings.Contains(text, fmt.Sprintf("%.0f (%.0f; %d)", float64(s.Mean), float64(s.SD), s.Units)) {
			t.Errorf("no mean %.0f with its SD %.0f", float64(s.Mean), float64(s.SD))
		}
	}
	for _, c := range r.Contrasts {
		if c.Name == "yeast v. none" { // weights −3, 1, 1, 1
			want := fmt.Sprintf("was %.1f\u202fg/d (95\u202f%% limits %.1f to %.1f; P", float64(c.Estimate)/3, float64(c.Lower)/3, float64(c.Upper)/3)
			if !strings.Contains(text, want) {
				t.Errorf("no %q", want)
			}
		}
	}
}
