package compose

import (
	"math"
	"runtime"
	"strings"
	"testing"
	"time"
)

// The worst texts that the guard lets pass must still be read in about a second and
// 100 MB.
func TestGuardHolds(t *testing.T) {
	if underRace {
		t.Skip("measures time and memory")
	}
	patterns := map[string]struct{ open, close, sep string }{
		"brackets": {"[", "", ""}, "links": {"[a](", "", ""}, "closed": {"[", "]", ""}, "open links": {"[a](b", "", ""},
		"emphasis": {"*a_ ", "", ""}, "stars": {"*a ", "", ""}, "strong": {"a**b", "", ""}, "nested": {"**a *b ", "b* a** ", ""},
		"ticks": {"`a``b```c", "", ""}, "html": {"<a ", "", ""}, "titles": {"[a]: b \"\n", "", ""}, "images": {"![", "", ""},
		"lines": {"a\n", "", ""}, "quotes": {"> ", "", "a\n"}, "items": {"- ", "", "a\n"}, "headings": {"# a\n", "", ""},
		"calls": {"[^a", "", ""}, "links in links": {"[", "](a)", ""}, "entities": {"&amp;", "", ""}, "definitions": {"[a", "]: x\n", ""},
		"strays": {"<", "", ""}, "escapes": {"\\", "", ""}, "quote marks": {"[a](b \"", "", ""},
	}
	for _, name := range sortedKeys(patterns) {
		p := patterns[name]
		build := func(n int) string {
			return strings.Repeat(p.open, n) + strings.Repeat(p.close, n) + p.sep
		}
		// One run as long as it may be, and as many short runs as there may be.
		accepted := func(text string) bool {
			f, list := newFile(Source{Name: "t.md", Text: text})
			return f != nil && !list.HasErrors() && len(guard([]byte(f.text), f.pos, &Spent{})) == 0
		}
		n := 1
		for accepted(build(2 * n)) {
			n *= 2
		}
		step := n
		for step > 1 {
			step = int(math.Ceil(float64(step) / 2))
			if accepted(build(n + step)) {
				n += step
			}
		}
		small := min(n, 200)
		many := build(small) + "\n\n"
		count := 1
		for accepted(strings.Repeat(many, 2*count)) {
			count *= 2
		}
		for kind, text := range map[string]string{"one run": build(n), "many runs": strings.Repeat(many, count)} {
			t.Run(name+"/"+kind, func(t *testing.T) {
				runtime.GC()
				var before, after runtime.MemStats
				runtime.ReadMemStats(&before)
				start := cpu(t)
				_, list := Markdown("t.md", text, Limits{})
				took := cpu(t) - start
				runtime.ReadMemStats(&after)
				for _, d := range list {
					if d.Code == CodeTooMuch && !strings.Contains(d.Message, "nested") {
						t.Fatalf("refused: %+v", d)
					}
				}
				if took > 2*time.Second {
					t.Errorf("took %v", took)
				}
				if grown := int64(after.Sys) - int64(before.Sys); grown > 100<<20 {
					t.Errorf("took %d MB from the system", grown>>20)
				}
				t.Logf("%d bytes: %v, %d MB allocated, %d", len(text), took, (after.TotalAlloc-before.TotalAlloc)>>20, len(list))
			})
		}
	}
}
