package render

import (
	"fmt"
	"os"
	"regexp"
	"slices"
	"sort"
	"strings"
	"testing"

	"penwright/protocol/diag"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/templates"
)

// example is one of the page on the functions: a template, and what it gives on the
// built-in trial, a line a block.
type example struct {
	line     int // of the first outcome, from 0
	outcomes int // lines
	template string
	want     []string
}

func functionsText(t *testing.T) []string {
	t.Helper()
	data, err := templates.FS.ReadFile(functionsPage + ".md")
	if err != nil {
		t.Fatal(err)
	}
	return strings.Split(string(data), "\n")
}

// examples takes the examples out of the page: indented lines with actions, up to those
// with an arrow.
func examples(lines []string) []example {
	var out []example
	var body []string
	for i := 0; i < len(lines); i++ {
		text, indented := strings.CutPrefix(lines[i], "    ")
		switch {
		case indented && strings.HasPrefix(text, "→"):
			e := example{line: i, template: strings.Trim(strings.Join(body, "\n"), "\n") + "\n"}
			for ; i < len(lines) && strings.HasPrefix(lines[i], "    →"); i++ {
				e.want = append(e.want, strings.TrimSpace(strings.TrimPrefix(lines[i], "    →")))
				e.outcomes++
			}
			i--
			out, body = append(out, e), nil
		case indented && (strings.Contains(text, "{{") || len(body) > 0):
			body = append(body, text)
		case lines[i] == "" && len(body) > 0:
			body = append(body, "")
		default:
			body = nil
		}
	}
	return out
}

// outline is a text with a line for each block, as the page writes it.
func outline(blocks []doc.Block) []string {
	spaces := strings.NewReplacer("\u202f", " ", "\u2009", " ", "\u00a0", " ")
	say := func(before string, text []doc.Inline) string { return spaces.Replace(before + doc.Plain(text)) }
	var out []string
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Paragraph:
			out = append(out, say("", b.Text))
		case doc.Heading:
			out = append(out, say("# ", b.Text))
		case doc.Table:
			out = append(out, say("Table: ", b.Caption))
		case doc.Figure:
			out = append(out, say("Figure: ", b.Caption))
		case doc.List:
			for _, item := range b.Items {
				out = append(out, "• "+strings.Join(outline(item), " "))
			}
		case doc.Aside:
			out = append(out, say("Box: ", b.Title))
		case doc.Contents:
			out = append(out, "Contents")
		default:
			out = append(out, fmt.Sprintf("%T", b))
		}
	}
	return out
}

// run composes a template of the trial's own on the built-in trial.
func (x *builder) run(text string) ([]string, diag.List) {
	x.dot, x.words, x.claims = nil, nil, nil
	composed, list := x.compose([]compose.Source{{Name: "t.md", Text: text}}, "t.md")
	d := &doc.Document{Blocks: x.settled(tidy(composed.Blocks)), Notes: composed.Notes}
	list = append(list, doc.Number(d)...)
	x.cover(d)
	return outline(d.Blocks), list
}

// Each example of the page on the functions gives what the page says.
func TestFunctionsPage(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	lines := functionsText(t)
	all := examples(lines)
	if len(all) < 40 {
		t.Fatalf("only %d examples", len(all))
	}
	var out []string
	at := 0
	for _, e := range all {
		b := &builder{pictures: pictures{trial: x, rs: rs}, options: fixed}
		got, list := b.run(e.template)
		if len(list) > 0 {
			got = nil
			for _, d := range list {
				got = append(got, "stops: "+strings.NewReplacer("\u202f", " ").Replace(d.Message))
			}
		}
		if len(got) == 0 {
			got = []string{""}
		}
		n := len(e.want)
		same := len(got) == n
		if e.want[n-1] == "…" && len(got) >= n { // and so on
			n, same = n-1, n > 1
		}
		for i := range n {
			if !same {
				break
			}
			head, open := strings.CutSuffix(e.want[i], "…")
			same = got[i] == e.want[i] || open && head != "" && strings.HasPrefix(got[i], head)
		}
		if !same && !*update {
			t.Errorf("line %d:\n%sgives\n%s\nand not\n%s", e.line+1, e.template, strings.Join(got, "\n"), strings.Join(e.want, "\n"))
		}
		out = append(out, lines[at:e.line]...)
		at = e.line + e.outcomes
		if same {
			out = append(out, lines[e.line:at]...)
			continue
		}
		const blocks = 2
		if len(got) > blocks+1 {
			got = append(got[:blocks:blocks], "…")
		}
		for _, g := range got {
			const longest = 60
			if words := []rune(g); len(words) > longest && !strings.HasPrefix(e.template, "{{sentence") {
				g = string(words[:longest]) + "…"
			}
			out = append(out, strings.TrimRight("    → "+g, " "))
		}
	}
	if *update {
		if err := os.WriteFile("../templates/"+functionsPage+".md", []byte(strings.Join(append(out, lines[at:]...), "\n")), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// The page names every function that templates have, and no other; it names every table,
// figure, paragraph, list and place; and each function has an example.
func TestFunctionsPageIsWhole(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	b := &builder{pictures: pictures{trial: x, rs: rs}, options: fixed}
	bound := compose.Functions()
	for name := range b.functions() {
		bound = append(bound, name)
	}
	sort.Strings(bound)
	lines := functionsText(t)
	var said []string
	for _, l := range lines {
		if names, ok := strings.CutPrefix(l, "### "); ok {
			said = append(said, strings.Split(names, ", ")...)
		}
	}
	sort.Strings(said)
	if !slices.Equal(bound, said) {
		t.Errorf("the functions are\n%v\nand the page tells of\n%v", bound, said)
	}
	shown := ""
	for _, e := range examples(lines) {
		shown += e.template
	}
	for _, name := range said {
		if !regexp.MustCompile(`[{(] *` + name + `\b|\{(if|with) ` + name + `\b`).MatchString(shown) {
			t.Errorf("no example of %s", name)
		}
	}
	page := strings.Join(lines, "\n")
	for _, kind := range []string{"table", "figure", "paragraph", "list"} {
		if len(b.kinds[kind]) == 0 {
			t.Errorf("no %s is known", kind)
		}
		for _, name := range b.kinds[kind] {
			if name = strings.TrimPrefix(name, "unplanned "); !strings.Contains(strings.Join(strings.Fields(page), " "), "`"+name+"`") {
				t.Errorf("the page does not name the %s %q", kind, name)
			}
		}
	}
}
