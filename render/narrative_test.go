package render

import (
	"maps"
	"runtime"
	"slices"
	"strings"
	"syscall"
	"testing"
	"testing/fstest"
	"time"

	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/render/compose"
	"penwright/render/doc"
)

// computed is the time that this process has spent computing.
func computed(t *testing.T) time.Duration {
	t.Helper()
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// Narratives that want more time or memory than the words of an author may have, through
// the functions of the report. Each is refused, or done, within about a second and 100 MB.
func TestHostileNarratives(t *testing.T) {
	if underRace {
		t.Skip("its bounds are those of an ordinary build, and all that it does is one goroutine")
	}
	many := strings.Repeat
	for name, text := range map[string]struct {
		text string
		code string // of one fault; empty: it is done
	}{
		"tables without end":           {`{{range 2000000000}}{{table "allotment"}}{{end}}`, compose.CodeTooMuch},
		"figures without end":          {`{{range 2000000000}}{{$x := figure "quantiles" "adg"}}{{end}}`, compose.CodeTooMuch},
		"figures that nobody sees":     {`{{range 2000000000}}{{with figure "residual map" "adg"}}{{end}}{{end}}`, compose.CodeTooMuch},
		"checklists without end":       {`{{range 2000000000}}{{$x := coverage "report"}}{{end}}`, compose.CodeTooMuch},
		"values without end":           {`{{range 2000000000}}{{mean "adg" "yeast" "20"}} {{end}}`, compose.CodeTooMuch},
		"comparisons without end":      {`{{range 2000000000}}{{if and (lt (p "adg" "yeast") 1) (or (lt (p "adg" "yeast") 0) (gt 2 1))}}{{end}}{{end}}`, compose.CodeTooMuch},
		"claims without end":           {`{{range 2000000000}}{{claim "x" (lt 1 2)}}{{end}}`, compose.CodeTooMuch},
		"false claims without end":     {`{{range 2000000000}}{{claim (print "x" .) (lt 2 1)}}{{end}}`, CodeClaim},
		"references without end":       {`{{range 2000000000}}{{ref "table" "residuals" "adg"}}{{end}}`, compose.CodeTooMuch},
		"claims with doubling words":   {`{{$x := "aaaaaaaaaaaaaaaa"}}{{range 100}}{{$x = print $x $x}}{{end}}{{claim $x (lt 2 1)}}`, compose.CodeTooMuch},
		"narratives in narratives":     {`{{narrative "discussion"}}{{narrative "introduction"}}`, "narrative-within"},
		"recursion":                    {`{{define "r"}}{{sentence "adg"}}{{template "r"}}{{end}}{{template "r"}}`, compose.CodeTooMuch},
		"doubling definitions":         {doubling(40), compose.CodeTooMuch},
		"private use":                  {"gain \U000F0000", compose.CodeCharacter},
		"private use in an action":     {"{{print \"\U00100000\"}}", compose.CodeCharacter},
		"private use, escaped":         {`{{print "\U000F0001"}} {{mean "adg"}}`, ""},
		"paths":                        {`{{template "../../../../etc/passwd"}}`, compose.CodeUnknownTemplate},
		"paths 2":                      {`{{template "protocol.toml"}}`, compose.CodeUnknownTemplate},
		"quotes":                       {many(">", 500_000) + "a", compose.CodeTooMuch},
		"lists":                        {many("- ", 250_000) + "a", compose.CodeTooMuch},
		"brackets":                     {many("[", 500_000), compose.CodeTooMuch},
		"stars":                        {many("*a **b ", 100_000), compose.CodeTooMuch},
		"ticks":                        {many("`a``b", 150_000), compose.CodeTooMuch},
		"a table":                      {"|" + many("a|", 1000) + "\n|" + many("-|", 1000) + "\n" + many("|\n", 100_000), compose.CodeTooMuch},
		"deep parentheses":             {`{{` + many("(", 90_000) + `1` + many(")", 90_000) + `}}`, compose.CodeTooMuch},
		"a long pipeline":              {`{{1` + many("|print", 40_000) + `}}`, ""},
		"a mebibyte of words":          {many("word of the author, on and on. ", 30_000), ""},
		"a mebibyte of typed numbers":  {many("gain was 1 g/d. ", 60_000), ""},
		"one sentence, typed numbers":  {"gain was " + many("1 g/d ", 160_000), ""},
		"numbers beside all responses": {many("gain, intake and backfat were 850.5, 851 and 852 at 3 %, P = 0.9 ", 15_000), ""},
		"a mebibyte of open actions":   {many("gain 1 g/d `", 80_000), compose.CodeTooMuch},
	} {
		t.Run(name, func(t *testing.T) {
			x := copied(t, trials(t)["demo"])
			x["discussion.md"] = &fstest.MapFile{Data: []byte(text.text)}
			opened, rs, _ := opened(t, x)
			runtime.GC()
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			start := computed(t)
			_, list := Document(opened, rs, fixed)
			took := computed(t) - start
			runtime.ReadMemStats(&after)
			found := text.code == "" && !list.HasErrors()
			for _, d := range list {
				found = found || d.Code == text.code
				if d.Pos.File != "discussion.md" && d.Pos.File != trial.ProtocolFile && d.Code != compose.CodeTooMuch {
					t.Errorf("a message without its place: %+v", d)
				}
			}
			if !found {
				t.Errorf("want %q, got %d messages, the first %+v", text.code, len(list), first(list))
			}
			if len(list) > 300 {
				t.Errorf("%d messages", len(list))
			}
			if took > 2*time.Second && !underRace { // a second, and as much for a slow machine
				t.Errorf("took %v", took)
			}
			if grown := int64(after.Sys) - int64(before.Sys); grown > 100<<20 && !underRace {
				t.Errorf("took %d MB from the system", grown>>20)
			}
			t.Logf("%v, %d MB allocated, %d messages", took, (after.TotalAlloc-before.TotalAlloc)>>20, len(list))
		})
	}
}

func first(list diag.List) diag.Diagnostic {
	if len(list) == 0 {
		return diag.Diagnostic{}
	}
	return list[0]
}

// doubling defines templates each of which calls the one before it twice.
func doubling(n int) string {
	var b strings.Builder
	b.WriteString(`{{define "t0"}}word {{end}}`)
	name := func(i int) string { return "t" + strings.Repeat("i", i) }
	b.WriteString(`{{define "t"}}word {{end}}`)
	for i := 1; i <= n; i++ {
		b.WriteString(`{{define "` + name(i) + `"}}{{template "` + name(i-1) + `"}}{{template "` + name(i-1) + `"}}{{end}}`)
	}
	return b.String() + `{{template "` + name(n) + `"}}`
}

// A narrative has its heading: its own, or that of its place.
func TestNarrativeHeadings(t *testing.T) {
	for _, tt := range []struct{ place, text, want string }{
		{"discussion", "Words.", "1 Discussion|Words."},
		{"discussion", "# What it means\n\nWords.\n\n## Limits\n\nMore.", "1 What it means|Words.|2 Limits|More."},
		{"discussion", "# One\n\nA.\n\n# Two\n\nB.", "1 One|A.|1 Two|B."},
		{"discussion", "A.\n\n# Two\n\nB.\n\n## Three\n\nC.", "1 Discussion|A.|2 Two|B.|3 Three|C."},
		{"discussion", "A.\n\n### Two\n\nB.", "1 Discussion|A.|3 Two|B."},
		{"methods", "# Methods\n\nA.\n\n## Two\n\nB.", "A.|2 Two|B."},
		{"methods", "# Scales\n\nA.", "2 Scales|A."},
		{"results", "A.", "A."},
		{"discussion", "{{claim \"x\" (lt 1 2)}}\n", ""},
		{"discussion", "", ""},
	} {
		x := copied(t, trials(t)["demo"])
		edit(t, x, trial.ProtocolFile, "narrative = { discussion", "narrative = { "+tt.place)
		x["discussion.md"] = &fstest.MapFile{Data: []byte(tt.text)}
		opened, rs, _ := opened(t, x)
		b := &builder{pictures: pictures{trial: opened, rs: rs}, options: fixed}
		text, list := b.compose([]compose.Source{{Name: "t.md", Text: `{{narrative "` + tt.place + `"}}`}}, "t.md")
		if len(list) > 0 {
			t.Fatal(list)
		}
		var got []string
		for _, x := range text.Blocks {
			switch x := x.(type) {
			case doc.Heading:
				got = append(got, string(rune('0'+x.Level))+" "+doc.Plain(x.Text))
			case doc.Paragraph:
				got = append(got, doc.Plain(x.Text))
			}
		}
		if s := strings.Join(got, "|"); s != tt.want {
			t.Errorf("%q at %s: %s, want %s", tt.text, tt.place, s, tt.want)
		}
	}
}

// The same table twice is shown once and pointed at; a footnote keeps its text.
func TestNarrativeShowsOnce(t *testing.T) {
	x := copied(t, trials(t)["demo"])
	x["discussion.md"] = &fstest.MapFile{Data: []byte("See.[^a]\n\n{{table \"anova\" \"adg\"}}\n\n{{figure \"points\" \"adg\"}}\n\n[^a]: A note.\n")}
	opened, rs, _ := opened(t, x)
	d, list := Document(opened, rs, fixed)
	if len(list) > 0 {
		t.Fatal(list)
	}
	n := map[string]int{}
	var text []string
	doc.Walk(d.Blocks, func(node any) {
		switch node := node.(type) {
		case doc.Table:
			n[node.ID]++
		case doc.Figure:
			n[node.ID]++
		case doc.Paragraph:
			text = append(text, doc.Plain(node.Text))
		}
	})
	for _, id := range slices.Sorted(maps.Keys(n)) {
		if id != "" && n[id] > 1 {
			t.Errorf("%s is shown %d times", id, n[id])
		}
	}
	if all := strings.Join(text, "\n"); !strings.Contains(all, ": Analysis of variance of average daily gain (g/d).") {
		t.Error("nothing points at the table")
	}
	if len(d.Notes) != 1 {
		t.Errorf("%d footnotes", len(d.Notes))
	}
}
