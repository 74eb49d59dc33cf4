//go:build e2e

package pdf_test

import (
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"penwright/render"
)

// The demo's report, more than 20 pages and 12 figures, is made from its results as PDF
// and as HTML, on one processor's worth of work, in at most a tenth of the time that a
// headless browser takes to print that HTML. Each is the middle of several runs, which
// take turns so that what else the machine does weighs on both.
func TestTenTimesFasterThanABrowser(t *testing.T) {
	browser, err := exec.LookPath("chromium")
	if err != nil {
		t.Fatal("chromium is not on PATH: apt-get install chromium")
	}
	x, rs := opened(t, "demo")
	dir := t.TempDir()
	page, printed := filepath.Join(dir, "report.html"), filepath.Join(dir, "printed.pdf")
	var ours, theirs []time.Duration
	for i := range 5 {
		start := time.Now()
		files, list, err := render.Report(x, rs, render.Options{Date: "2026-05-04", Only: []string{"pdf", "html"}, Workers: 1})
		ours = append(ours, time.Since(start))
		if err != nil || list.HasErrors() || len(files) != 2 {
			t.Fatalf("%d files, %v, %v", len(files), list, err)
		}
		if i == 0 {
			for _, f := range files {
				if err := os.WriteFile(filepath.Join(dir, f.Path), f.Data, 0o644); err != nil {
					t.Fatal(err)
				}
			}
		}
		start = time.Now()
		out, err := exec.Command(browser, "--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update",
			"--disable-sync", "--disable-dev-shm-usage", "--no-first-run", "--user-data-dir="+filepath.Join(dir, "browser"), "--no-pdf-header-footer", "--print-to-pdf="+printed, "file://"+page).CombinedOutput()
		theirs = append(theirs, time.Since(start))
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
	}
	if info, err := os.Stat(printed); err != nil || info.Size() < 100_000 {
		t.Fatalf("the browser printed %v, %v", info, err)
	}
	d, _ := render.Document(x, rs, render.Options{Date: "2026-05-04"})
	pages, figures := extent(d)
	if pages < 20 || figures < 12 {
		t.Fatalf("%d pages, %d figures", pages, figures)
	}
	slices.Sort(ours)
	slices.Sort(theirs)
	a, b := ours[len(ours)/2], theirs[len(theirs)/2]
	t.Logf("%d pages, %d figures: PDF and HTML %v, the browser's PDF %v: %.1f times", pages, figures, a, b, float64(b)/float64(a))
	if b < 10*a {
		t.Errorf("PDF and HTML take %v, the browser's PDF %v: no more than %.1f times faster", ours, theirs, float64(b)/float64(a))
	}
}
