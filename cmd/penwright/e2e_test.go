//go:build e2e

package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/templates"
)

// built builds the program once, as a user has it.
var built = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "penwright")
	if err != nil {
		return "", err
	}
	file := filepath.Join(dir, "penwright")
	if out, err := exec.Command("go", "build", "-o", file, ".").CombinedOutput(); err != nil {
		return "", fmt.Errorf("%w\n%s", err, out)
	}
	return file, nil
})

// spawn runs the built program in a process of its own.
func spawn(t *testing.T, env []string, args ...string) *os.ProcessState {
	t.Helper()
	file, err := built()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(file, args...)
	cmd.Env = append(os.Environ(), env...)
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("penwright %s: %v\n%s", strings.Join(args, " "), err, out)
	}
	return cmd.ProcessState
}

// tool runs a program of the machine, which must be there.
func tool(t *testing.T, pkg, name string, args ...string) string {
	t.Helper()
	file, err := exec.LookPath(name)
	if err != nil {
		t.Fatalf("%s is not on PATH: apt-get install %s", name, pkg)
	}
	out, err := exec.Command(file, args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s %s: %v\n%s", name, strings.Join(args, " "), err, out)
	}
	return string(out)
}

// reported copies a trial and writes its report.
func reported(t *testing.T, name string) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), name)
	from := os.DirFS(filepath.Join("../../testdata/trials", name))
	if name == "hollowmere" {
		var err error
		if from, err = fs.Sub(templates.FS, "demo"); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.CopyFS(dir, from); err != nil {
		t.Fatal(err)
	}
	spawn(t, nil, "report", dir)
	return dir
}

// eachTrial runs a check on the report of each of the trials.
func eachTrial(t *testing.T, check func(t *testing.T, dir string)) {
	for _, name := range []string{"hollowmere", "split-plot", "latin-square"} {
		t.Run(name, func(t *testing.T) { check(t, reported(t, name)) })
	}
}

func TestPDFIsSound(t *testing.T) {
	eachTrial(t, func(t *testing.T, dir string) {
		files, err := filepath.Glob(filepath.Join(dir, "report/figures/*.pdf"))
		if err != nil || len(files) < 5 {
			t.Fatalf("%d figures, %v", len(files), err)
		}
		for _, file := range append(files, filepath.Join(dir, "report/report.pdf")) {
			out := tool(t, "qpdf", "qpdf", "--check", file)
			if !strings.Contains(out, "No syntax or stream encoding errors found") || strings.Contains(out, "WARNING") {
				t.Errorf("%s: %s", file, out)
			}
			lines := strings.Split(strings.TrimSpace(tool(t, "poppler-utils", "pdffonts", file)), "\n")
			if len(lines) < 3 {
				t.Errorf("%s names no font", file)
				continue
			}
			for _, line := range lines[2:] {
				// From the right: emb, sub, uni, and the two numbers of the object.
				f := strings.Fields(line)
				if len(f) < 6 || f[len(f)-5] != "yes" || f[len(f)-3] != "yes" {
					t.Errorf("%s: a font is not embedded, or gives no text: %s", file, line)
				}
			}
		}
	})
}

// printed is a number as it stands in a text, with half a unit of its last place.
type printed struct{ value, half float64 }

var numeral = regexp.MustCompile(`−?\d+(?:\.\d+)?`)

// numbers reads every number of a text, in order.
func numbers(text string) []printed {
	var out []printed
	for _, s := range numeral.FindAllString(text, -1) {
		s = strings.ReplaceAll(s, "−", "-")
		x, err := strconv.ParseFloat(s, 64)
		if err != nil {
			continue
		}
		_, decimals, _ := strings.Cut(s, ".")
		out = append(out, printed{x, 0.5000001 * math.Pow10(-len(decimals))})
	}
	return out
}

// wanted is a value with half of the coarsest unit in which it may be printed.
type wanted struct{ value, grain float64 }

// whole is a number that is printed as it is, or to a tenth.
func whole(x float64) wanted { return wanted{x, 0.051} }

// beside are values printed to two digits or more of the error they come with.
func beside(err float64, values ...float64) []wanted {
	var out []wanted
	for _, x := range values {
		out = append(out, wanted{x, 0.051 * math.Abs(err)})
	}
	return out
}

// holds tells whether values stand one after the other in a text, each rounded to what
// is printed.
func holds(text []printed, values ...wanted) bool {
	for i := 0; i+len(values) <= len(text); i++ {
		ok := true
		for k, x := range values {
			p := text[i+k]
			ok = ok && math.Abs(p.value-x.value) <= p.half && (p.half <= x.grain || p.value == x.value)
		}
		if ok {
			return true
		}
	}
	return false
}

// The numbers of results.json are the numbers on the pages.
func TestPDFPrintsTheResults(t *testing.T) {
	eachTrial(t, func(t *testing.T, dir string) {
		f, err := os.Open(filepath.Join(dir, "report/results.json"))
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		rs, err := result.Read(f)
		if err != nil {
			t.Fatal(err)
		}
		raw := tool(t, "poppler-utils", "pdftotext", "-layout", filepath.Join(dir, "report/report.pdf"), "-")
		text := strings.Join(strings.Fields(raw), " ")
		found := numbers(text)
		looked := 0
		want := func(what string, ok bool) {
			looked++
			if !ok {
				t.Errorf("the pages do not hold %s", what)
			}
		}
		v := func(x result.Number) float64 { return float64(x) }
		for _, r := range rs.Responses {
			for _, l := range r.Anova {
				want(fmt.Sprintf("%s: %s with df %d, SS %v, MS %v", r.Name, l.Source, l.DF, l.SS, l.MS), holds(found, whole(float64(l.DF)), wanted{v(l.SS), 0.051 * v(l.SS)}, wanted{v(l.MS), 0.051 * v(l.MS)}))
				if l.F.Known() {
					s := num.Statistic(v(l.F)) + " " + num.P(v(l.P))
					want(fmt.Sprintf("%s: F and P of %s: %s", r.Name, l.Source, s), strings.Contains(text, s))
				}
			}
			decimals := map[string]int{}
			for _, m := range r.Means {
				decimals[m.Term] = max(decimals[m.Term], num.SEDecimals(v(m.SE)))
			}
			for _, m := range r.Means {
				d := decimals[m.Term]
				s := num.Fixed(v(m.SE), d) + " " + num.Fixed(v(m.Lower), d) + " to " + num.Fixed(v(m.Upper), d) + " " + num.Count(m.Units)
				want(fmt.Sprintf("%s: mean of %v: %s %s", r.Name, m.Levels, num.Fixed(v(m.Mean), d), s),
					regexp.MustCompile(regexp.QuoteMeta(num.Fixed(v(m.Mean), d))+` ?[a-z]* `+regexp.QuoteMeta(s)).MatchString(text))
			}
			for _, c := range r.Comparisons {
				want(fmt.Sprintf("%s: difference of %s and %s: %v, %v, %v", r.Name, c.A, c.B, c.Difference, c.SE, c.DF), holds(found, slices.Concat(beside(v(c.SE), v(c.Difference), v(c.SE)), []wanted{whole(v(c.DF))}, beside(v(c.SE), v(c.Lower), v(c.Upper)))...))
			}
			for _, c := range r.Contrasts {
				if c.Estimate.Known() {
					want(fmt.Sprintf("%s: contrast %s: %v, %v", r.Name, c.Name, c.Estimate, c.SE), holds(found, beside(v(c.SE), v(c.Estimate), v(c.SE))...))
				}
				want(fmt.Sprintf("%s: F and P of %s", r.Name, c.Name), strings.Contains(text, num.Statistic(v(c.F))+" "+num.P(v(c.P))))
			}
			for _, c := range r.Covariates {
				want(fmt.Sprintf("%s: slope on %s: %v, %v", r.Name, c.Name, c.Slope, c.SE), holds(found, append(beside(v(c.SE), v(c.Slope), v(c.SE)), whole(v(c.DF)))...))
			}
			squares := 0.0
			for _, x := range r.Residuals {
				squares += v(x.Residual) * v(x.Residual)
			}
			spread := math.Sqrt(squares / float64(len(r.Residuals)))
			for _, x := range r.Residuals {
				want(fmt.Sprintf("%s: residual of %v: %v, %v, %v", r.Name, x.Units, x.Observed, x.Fitted, x.Residual), holds(found, append([]wanted{{v(x.Observed), spread}}, beside(spread, v(x.Fitted), v(x.Residual))...)...))
			}
		}
		if looked < 40 {
			t.Errorf("only %d numbers were looked for", looked)
		}
		for _, in := range rs.Inputs {
			want("the hash of "+in.Path, strings.Contains(text, in.SHA256))
		}
	})
}

// What rides in the PDF comes out as it went in, by another program.
func TestPDFAttachments(t *testing.T) {
	eachTrial(t, func(t *testing.T, dir string) {
		out := t.TempDir()
		tool(t, "poppler-utils", "pdfdetach", "-saveall", "-o", out, filepath.Join(dir, "report/report.pdf"))
		got, want := tree(t, out), tree(t, dir)
		maps.DeleteFunc(want, func(name string, _ []byte) bool { return strings.HasPrefix(name, "report/") })
		results, err := os.ReadFile(filepath.Join(dir, "report/results.json"))
		if err != nil {
			t.Fatal(err)
		}
		want["results.json"] = results
		if got["report.json"] == nil || !json.Valid(got["report.json"]) {
			t.Errorf("report.json is %q", got["report.json"])
		}
		delete(got, "report.json")
		alike(t, "taken out", want, got)
	})
}

// tree reads every file below a folder.
func tree(t *testing.T, dir string) map[string][]byte {
	t.Helper()
	out := map[string][]byte{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		rel, err := filepath.Rel(dir, path)
		if err != nil {
			return err
		}
		out[filepath.ToSlash(rel)], err = os.ReadFile(path)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func alike(t *testing.T, what string, want, got map[string][]byte) {
	t.Helper()
	for _, name := range slices.Sorted(maps.Keys(want)) {
		if b, ok := got[name]; !ok {
			t.Errorf("%s: no %s", what, name)
		} else if !bytes.Equal(b, want[name]) {
			t.Errorf("%s: %s differs", what, name)
		}
	}
	for _, name := range slices.Sorted(maps.Keys(got)) {
		if _, ok := want[name]; !ok {
			t.Errorf("%s: %s beside what was wanted", what, name)
		}
	}
}

// Neither processors, nor processes, nor the folder's name, nor the zone show in a byte.
func TestSameBytes(t *testing.T) {
	eachTrial(t, func(t *testing.T, dir string) {
		first := tree(t, filepath.Join(dir, "report"))
		if len(first) < 20 {
			t.Fatalf("only %d files", len(first))
		}
		for i, env := range [][]string{{"GOMAXPROCS=1"}, {"GOMAXPROCS=4"}, {"GOMAXPROCS=4", "TZ=Pacific/Auckland", "LANG=de_DE.UTF-8", "LC_ALL=de_DE.UTF-8"}, {"GOMAXPROCS=1", "GOGC=5"}} {
			out := filepath.Join(t.TempDir(), fmt.Sprint("again", i))
			spawn(t, env, "report", dir, "--out", out)
			alike(t, strings.Join(env, " "), first, tree(t, out))
		}
	})
}

// browser is a headless Chromium that is spoken to over its debugging pipe.
type browser struct {
	t       *testing.T
	out     *os.File
	replies chan message
	next    int
	events  []message
}

type message struct {
	ID      int             `json:"id"`
	Session string          `json:"sessionId"`
	Method  string          `json:"method"`
	Params  json.RawMessage `json:"params"`
	Result  json.RawMessage `json:"result"`
	Error   *struct {
		Message string `json:"message"`
	} `json:"error"`
}

func newBrowser(t *testing.T) *browser {
	t.Helper()
	file, err := exec.LookPath("chromium")
	if err != nil {
		t.Fatal("chromium is not on PATH: apt-get install chromium")
	}
	inR, inW, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	outR, outW, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(file, "--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update",
		"--disable-sync", "--disable-dev-shm-usage", "--no-first-run", "--user-data-dir="+t.TempDir(), "--remote-debugging-pipe", "about:blank")
	cmd.ExtraFiles = []*os.File{inR, outW} // file descriptors 3 and 4 of the browser
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	_ = inR.Close()
	_ = outW.Close()
	b := &browser{t: t, out: inW, replies: make(chan message, 1000)}
	go func() {
		defer close(b.replies)
		buf := make([]byte, 1<<16)
		var pending []byte
		for {
			n, err := outR.Read(buf)
			pending = append(pending, buf[:n]...)
			for {
				one, rest, whole := bytes.Cut(pending, []byte{0})
				if !whole {
					break
				}
				pending = rest
				var m message
				if json.Unmarshal(one, &m) == nil {
					b.replies <- m
				}
			}
			if err != nil {
				return
			}
		}
	}()
	t.Cleanup(func() {
		_ = inW.Close() // which ends the browser
		done := make(chan struct{})
		go func() { _ = cmd.Wait(); close(done) }()
		select {
		case <-done:
		case <-time.After(10 * time.Second):
			_ = cmd.Process.Kill()
			<-done
		}
		_ = outR.Close()
		for range b.replies {
		}
	})
	return b
}

// wait collects messages until one is wanted.
func (b *browser) wait(what string, wanted func(message) bool) message {
	b.t.Helper()
	limit := time.After(60 * time.Second)
	for {
		select {
		case m, open := <-b.replies:
			if !open {
				b.t.Fatalf("the browser ended while %s was waited for", what)
			}
			if m.Method != "" {
				b.events = append(b.events, m)
			}
			if wanted(m) {
				return m
			}
		case <-limit:
			b.t.Fatalf("no %s within a minute", what)
		}
	}
}

// call calls a method and decodes its result.
func (b *browser) call(session, method string, params map[string]any, into any) {
	b.t.Helper()
	b.next++
	id := b.next
	if params == nil {
		params = map[string]any{}
	}
	request := map[string]any{"id": id, "method": method, "params": params}
	if session != "" {
		request["sessionId"] = session
	}
	data, err := json.Marshal(request)
	if err != nil {
		b.t.Fatal(err)
	}
	if _, err := b.out.Write(append(data, 0)); err != nil {
		b.t.Fatal(err)
	}
	m := b.wait(method, func(m message) bool { return m.ID == id })
	if m.Error != nil {
		b.t.Fatalf("%s: %s", method, m.Error.Message)
	}
	if into != nil {
		if err := json.Unmarshal(m.Result, into); err != nil {
			b.t.Fatal(err)
		}
	}
}

// visit opens a file and tells what the page complained of and what it asked for, but
// for itself and what it holds inside.
func (b *browser) visit(file string) (session string, faults, requests []string) {
	b.t.Helper()
	var target struct {
		ID string `json:"targetId"`
	}
	b.call("", "Target.createTarget", map[string]any{"url": "about:blank"}, &target)
	var attached struct {
		Session string `json:"sessionId"`
	}
	b.call("", "Target.attachToTarget", map[string]any{"targetId": target.ID, "flatten": true}, &attached)
	for _, domain := range []string{"Network", "Log", "Runtime", "Page"} {
		b.call(attached.Session, domain+".enable", nil, nil)
	}
	b.events = nil
	url := "file://" + file
	b.call(attached.Session, "Page.navigate", map[string]any{"url": url}, nil)
	if !slices.ContainsFunc(b.events, func(m message) bool { return m.Method == "Page.loadEventFired" }) {
		b.wait("load", func(m message) bool { return m.Method == "Page.loadEventFired" && m.Session == attached.Session })
	}
	// What scripts set going comes after the load.
	var idle struct{}
	b.call(attached.Session, "Runtime.evaluate", map[string]any{"expression": "new Promise(done => setTimeout(done, 300))", "awaitPromise": true}, &idle)
	for _, m := range b.events {
		if m.Session != attached.Session {
			continue
		}
		switch m.Method {
		case "Network.requestWillBeSent":
			var p struct {
				Request struct {
					URL string `json:"url"`
				} `json:"request"`
			}
			if json.Unmarshal(m.Params, &p) == nil && p.Request.URL != url && !strings.HasPrefix(p.Request.URL, "data:") {
				requests = append(requests, p.Request.URL)
			}
		case "Runtime.exceptionThrown", "Runtime.consoleAPICalled", "Log.entryAdded":
			faults = append(faults, string(m.Params))
		}
	}
	return attached.Session, faults, requests
}

// eval evaluates an expression on the page.
func (b *browser) eval(session, expression string, into any) {
	b.t.Helper()
	var got struct {
		Result struct {
			Value json.RawMessage `json:"value"`
		} `json:"result"`
		Exception json.RawMessage `json:"exceptionDetails"`
	}
	b.call(session, "Runtime.evaluate", map[string]any{"expression": expression, "returnByValue": true, "awaitPromise": true}, &got)
	if got.Exception != nil {
		b.t.Fatalf("%s: %s", expression, got.Exception)
	}
	if err := json.Unmarshal(got.Result.Value, into); err != nil {
		b.t.Fatalf("%s: %v", expression, err)
	}
}

// The page opens in a browser from a file, complains of nothing and asks for nothing.
func TestHTMLInABrowser(t *testing.T) {
	b := newBrowser(t)
	eachTrial(t, func(t *testing.T, dir string) {
		b.t = t
		file := filepath.Join(dir, "report/report.html")
		session, faults, requests := b.visit(file)
		if len(faults) > 0 {
			t.Errorf("console: %s", strings.Join(faults, "\n"))
		}
		if len(requests) > 0 {
			t.Errorf("requests: %s", strings.Join(requests, "\n"))
		}
		var page struct {
			Title, Lang, Text                     string
			Tables, Figures, Heads, Broken, Wider int
			External                              []string
		}
		// Sections far from the window are not laid out until they are near, and have no text till then.
		var ready bool
		b.eval(session, `document.querySelectorAll("section").forEach(s => { s.style.contentVisibility = "visible" }), true`, &ready)
		b.eval(session, `({
			title: document.title, lang: document.documentElement.lang, text: document.body.innerText,
			tables: document.querySelectorAll("table").length, figures: document.querySelectorAll("figure svg").length,
			heads: document.querySelectorAll("h1, h2, h3").length,
			broken: [...document.querySelectorAll("a[href^='#']")].filter(a => !document.getElementById(decodeURIComponent(a.hash.slice(1)))).length,
			wider: Math.max(0, document.documentElement.scrollWidth - window.innerWidth),
			external: [...document.querySelectorAll("[src], link[href], form[action], object[data], use[href]")]
				.map(e => e.src || e.href || e.action || e.data || "").map(String).filter(u => u && !u.startsWith("data:") && !u.startsWith("#")),
		})`, &page)
		if page.Title == "" || page.Lang != "en" || page.Tables < 10 || page.Figures < 5 || page.Heads < 10 {
			t.Errorf("the page is %q in %q with %d tables, %d figures and %d headings", page.Title, page.Lang, page.Tables, page.Figures, page.Heads)
		}
		if page.Broken > 0 {
			t.Errorf("%d links of the page lead nowhere", page.Broken)
		}
		if page.Wider > 0 {
			t.Errorf("the page is %d pixels wider than its window", page.Wider)
		}
		if len(page.External) > 0 {
			t.Errorf("the page points outside: %v", page.External)
		}
		for _, want := range []string{"Analysis of variance of", "Tested over", "Provenance"} {
			if !strings.Contains(page.Text, want) {
				t.Errorf("the page does not show %q", want)
			}
		}
		// The numbers of the page are those of the PDF's source.
		md, err := os.ReadFile(filepath.Join(dir, "report/report.md"))
		if err != nil {
			t.Fatal(err)
		}
		shown := map[string]bool{}
		for _, s := range numeral.FindAllString(page.Text, -1) {
			shown[s] = true
		}
		for _, s := range numeral.FindAllString(regexp.MustCompile(`(?m)^!\[.*$`).ReplaceAllString(string(md), ""), -1) {
			if strings.Contains(s, ".") && !shown[s] {
				t.Errorf("the page does not show %s, which the Markdown holds", s)
			}
		}
	})
}

// The look-out for faults and requests sees them.
func TestBrowserSeesFaults(t *testing.T) {
	file := filepath.Join(t.TempDir(), "spoiled.html")
	spoiled := `<!DOCTYPE html><html lang="en"><title>x</title><img src="http://127.0.0.1:9/x.png"><script>undefinedName();</script>`
	if err := os.WriteFile(file, []byte(spoiled), 0o644); err != nil {
		t.Fatal(err)
	}
	_, faults, requests := newBrowser(t).visit(file)
	if !slices.ContainsFunc(faults, func(s string) bool { return strings.Contains(s, "undefinedName") }) {
		t.Errorf("faults %v", faults)
	}
	if !slices.Contains(requests, "http://127.0.0.1:9/x.png") {
		t.Errorf("requests %v", requests)
	}
}

// No page names an address that a browser would fetch, whatever its scripts do.
func TestHTMLNamesNoSource(t *testing.T) {
	fetched := regexp.MustCompile(`(?i)<(?:img|script|link|iframe|object|embed|video|audio|source|image|use)\b[^>]*\b(?:src|href|data)\s*=\s*["']?(https?:|//|file:)|@import|url\(\s*["']?(?:https?:|//)`)
	eachTrial(t, func(t *testing.T, dir string) {
		data, err := os.ReadFile(filepath.Join(dir, "report/report.html"))
		if err != nil {
			t.Fatal(err)
		}
		if m := fetched.Find(data); m != nil {
			t.Errorf("%s", m)
		}
		if !bytes.Contains(data, []byte("default-src 'none'")) {
			t.Error("the page has no policy that forbids requests")
		}
	})
}

// load is the number of processes that want a processor, or -1 if it cannot be told.
func load() float64 {
	data, err := os.ReadFile("/proc/loadavg")
	if err != nil {
		return -1
	}
	var x float64
	if _, err := fmt.Sscan(string(data), &x); err != nil {
		return -1
	}
	return x
}

// The report of the demo takes well under half a second with the start of the program,
// and check well under the blink of an eye: medians of ten.
func TestSpeed(t *testing.T) {
	dir := reported(t, "hollowmere")
	for _, test := range []struct {
		args  []string
		limit time.Duration
	}{
		{[]string{"report", dir}, 400 * time.Millisecond},
		{[]string{"check", dir}, 50 * time.Millisecond},
	} {
		var walls, works []time.Duration
		for range 10 {
			start := time.Now()
			state := spawn(t, nil, test.args...)
			walls = append(walls, time.Since(start))
			works = append(works, state.UserTime()+state.SystemTime())
		}
		slices.Sort(walls)
		slices.Sort(works)
		wall, work := (walls[4]+walls[5])/2, (works[4]+works[5])/2
		t.Logf("%s: %v on the clock, %v of processor time", test.args[0], wall, work)
		// All processors together.
		if most := test.limit * 3 / 2; work > most {
			t.Errorf("%s takes %v of processor time, more than %v", test.args[0], work, most)
		}
		switch {
		case wall <= test.limit:
		case load() > 0.75*float64(runtime.NumCPU()):
			t.Logf("%s took %v on the clock, but %.1f processes want the %d processors", test.args[0], wall, load(), runtime.NumCPU())
		default:
			t.Errorf("%s takes %v, more than %v", test.args[0], wall, test.limit)
		}
	}
}

// A draw that is killed, at any moment, leaves the folder as it was or as it should be.
func TestKilledDraw(t *testing.T) {
	file, err := built()
	if err != nil {
		t.Fatal(err)
	}
	base := filepath.Join(t.TempDir(), "base")
	if err := os.CopyFS(base, os.DirFS("../../testdata/trials/split-plot")); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"data.csv", "allotment.csv", "allotment.toml"} {
		if err := os.Remove(filepath.Join(base, name)); err != nil {
			t.Fatal(err)
		}
	}
	protocol, err := os.ReadFile(filepath.Join(base, "protocol.toml"))
	if err != nil {
		t.Fatal(err)
	}
	before, _, _ := strings.Cut(string(protocol), "\n[data]\n")
	if err := os.WriteFile(filepath.Join(base, "protocol.toml"), []byte(before), 0o644); err != nil {
		t.Fatal(err)
	}
	done := filepath.Join(t.TempDir(), "done")
	if err := os.CopyFS(done, os.DirFS(base)); err != nil {
		t.Fatal(err)
	}
	start := time.Now()
	spawn(t, nil, "draw", done)
	whole := time.Since(start)
	after := tree(t, done)
	killed := 0
	for k := range 40 {
		dir := filepath.Join(t.TempDir(), fmt.Sprint("killed", k))
		if err := os.CopyFS(dir, os.DirFS(base)); err != nil {
			t.Fatal(err)
		}
		cmd := exec.Command(file, "draw", dir)
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		time.Sleep(whole * time.Duration(k) / 40)
		_ = cmd.Process.Kill() // it may have ended
		var exit *exec.ExitError
		if err := cmd.Wait(); errors.As(err, &exit) {
			killed++
		}
		// Opening the trial finishes or forgets what was begun.
		spawn(t, nil, "check", dir)
		got := tree(t, dir)
		maps.DeleteFunc(got, func(name string, _ []byte) bool { return strings.HasPrefix(name, ".penwright") })
		if _, drawn := got["allotment.csv"]; drawn {
			alike(t, fmt.Sprint("after a kill at step ", k), after, got)
		} else if len(got) != 1 {
			t.Errorf("killed at step %d the folder holds %v", k, slices.Sorted(maps.Keys(got)))
		} else {
			spawn(t, nil, "draw", dir)
			got := tree(t, dir)
			maps.DeleteFunc(got, func(name string, _ []byte) bool { return strings.HasPrefix(name, ".penwright") })
			alike(t, "drawn after a kill", after, got)
		}
	}
	if killed == 0 {
		t.Error("no process was killed in time")
	}
}
