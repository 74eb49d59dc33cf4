package render

import (
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"penwright/analysis/trial"
	"penwright/protocol/folder"
	"penwright/render/page"
	"penwright/templates"
)

// wordy is a trial that asks much of a sheet: long names, many columns, animals with
// numbers of their own.
func wordy() map[string]string {
	p := "protocol = 1\n[trial]\ncode = \"HM-26-032\"\ntitle = \"" + strings.Repeat("Traits of carcasses ", 12) + "at Hollowmere\"\nobjective = \"x\"\n[animals]\nspecies = \"pig\"\n" +
		"[[person]]\nname = \"Teodor Quist\"\nrole = \"veterinarian\"\n" +
		"[[factor]]\nname = \"diet\"\nlevels = [\"" + strings.Repeat("barley and wheat ", 8) + "meal\", \"B\"]\n" +
		"[[unit]]\nname = \"house\"\ncount = 2\nlabels = [\"the old house beside the orchard and behind the silo\", \"2\"]\n" +
		"[[unit]]\nname = \"pen\"\nwithin = \"house\"\ncount = 8\nreceives = [\"diet\"]\n[[unit]]\nname = \"pig\"\nwithin = \"pen\"\ncount = 3\n[roster]\nfile = \"roster.csv\"\n"
	for _, x := range "abcdefghijklmn" {
		p += "[[response]]\nname = \"trait_" + string(x) + "\"\nlabel = \"A trait of the carcass that takes many words\"\nunit = \"kg/m2\"\nkind = \"continuous\"\n"
	}
	roster := "house,pen,pig,ear_tag\n"
	for _, h := range []string{"the old house beside the orchard and behind the silo", "2"} {
		for pen := range 8 {
			for pig := range 3 {
				roster += h + "," + string(rune('1'+pen)) + "," + string(rune('1'+pig)) + ",DE 0012 3456 " + string(rune('1'+pen)) + string(rune('1'+pig)) + "\n"
			}
		}
	}
	return map[string]string{"protocol.toml": p, "roster.csv": roster}
}

func sheetTrial(t *testing.T, name string) *trial.Trial {
	t.Helper()
	dir := t.TempDir()
	var err error
	switch name {
	case "demo":
		var demo fs.FS
		if demo, err = fs.Sub(templates.FS, "demo"); err == nil {
			err = os.CopyFS(filepath.Join(dir, "t"), demo)
		}
	case "wordy":
		files := wordy()
		err = os.Mkdir(filepath.Join(dir, "t"), 0o755)
		for _, f := range []string{"protocol.toml", "roster.csv"} {
			if err == nil {
				err = os.WriteFile(filepath.Join(dir, "t", f), []byte(files[f]), 0o644)
			}
		}
	default:
		err = os.CopyFS(filepath.Join(dir, "t"), os.DirFS(filepath.Join("..", "testdata", "trials", name)))
	}
	if err != nil {
		t.Fatal(err)
	}
	f, err := folder.Open(filepath.Join(dir, "t"))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = f.Close() })
	tr, list := trial.Open(f)
	if tr.Plan == nil {
		t.Fatal(list)
	}
	return tr
}

type placedText struct {
	page.Text
	width float64
}

// Nothing on a sheet leaves the page or lies on something else, and every unit has a row
// of its own.
func TestSheetsLieOpen(t *testing.T) {
	for _, test := range []struct {
		name  string
		pages int
	}{{"demo", 5}, {"latin-square", 8}, {"split-plot", 4}, {"wordy", 0}} {
		t.Run(test.name, func(t *testing.T) {
			r := newRecorder(sheetTrial(t, test.name), false)
			book := r.book()
			if test.pages > 0 && len(book.Pages) != test.pages {
				t.Errorf("%d pages, want %d", len(book.Pages), test.pages)
			}
			if len(book.Outline) == 0 {
				t.Error("no outline")
			}
			rows := 0
			for n := range book.Pages {
				pg := &book.Pages[n]
				var texts []placedText
				open := false
				for _, o := range pg.Ops {
					switch o := o.(type) {
					case page.Begin:
						if open {
							t.Fatal("elements nest")
						}
						open = true
						if o.Element.Role == page.TableRow {
							t.Error("a row is drawn as such")
						}
					case page.End:
						open = false
					case page.Text:
						x := placedText{Text: o, width: o.Face.Width(o.Text, o.Size)}
						if o.X < sheetSide-1 || o.X+x.width > pg.Width-sheetSide+1 || o.Y < sheetTop || o.Y > pg.Height-20 {
							t.Errorf("page %d: %q leaves the page", n+1, o.Text)
						}
						texts = append(texts, x)
					case page.Box:
						if o.X < sheetSide-1 || o.X+o.Width > pg.Width-sheetSide+1 || o.Y < sheetTop || o.Y+o.Height > pg.Height-sheetBottom+1 {
							t.Errorf("page %d: a box leaves the page: %+v", n+1, o)
						}
					case page.Picture:
						if o.X+o.Picture.Width > pg.Width-sheetSide+1 || o.Y+o.Picture.Height > pg.Height-sheetBottom {
							t.Errorf("page %d: the map leaves the page", n+1)
						}
					}
				}
				for i, a := range texts {
					for _, b := range texts[:i] {
						if a.X < b.X+b.width-0.5 && b.X < a.X+a.width-0.5 && a.Y-0.7*a.Size < b.Y && b.Y-0.7*b.Size < a.Y {
							t.Errorf("page %d: %q lies on %q", n+1, a.Text.Text, b.Text.Text)
						}
					}
				}
			}
			for i := range r.forms {
				seen := map[string]bool{}
				for _, b := range r.batches(i) {
					for _, u := range b.units {
						id := strings.Join(append(slices.Clone(b.times), string(rune(u))), "\x00")
						if seen[id] {
							t.Errorf("unit %d stands on two sheets", u)
						}
						seen[id] = true
						rows++
					}
				}
				if rows != r.rows(&r.forms[i]) {
					t.Errorf("%d rows, want %d", rows, r.rows(&r.forms[i]))
				}
				rows = 0
			}
		})
	}
}

// Masked sheets bear codes and no treatment.
func TestSheetsAreMasked(t *testing.T) {
	for _, masked := range []bool{false, true} {
		tr := sheetTrial(t, "split-plot")
		all := ""
		for _, pg := range newRecorder(tr, masked).book().Pages {
			for _, o := range pg.Ops {
				if x, ok := o.(page.Text); ok {
					all += x.Text + "\n"
				}
			}
		}
		if open := strings.Contains(all, "plough"); open == masked {
			t.Errorf("masked %v: treatments on the sheets: %v", masked, open)
		}
	}
	all := ""
	for _, pg := range newRecorder(sheetTrial(t, "demo"), false).book().Pages {
		for _, o := range pg.Ops {
			if x, ok := o.(page.Text); ok {
				all += x.Text + "\n"
			}
		}
	}
	if strings.Contains(all, "g/kg") || !strings.Contains(all, "K786") || !strings.Contains(all, "Teodor Quist") {
		t.Errorf("the demo asks for codes:\n%s", all)
	}
}

// The same trial gives the same bytes.
func TestSheetsAgain(t *testing.T) {
	tr := sheetTrial(t, "demo")
	a, _, err := Sheets(tr, SheetOptions{Producer: "x", Date: "2026-05-04"})
	if err != nil {
		t.Fatal(err)
	}
	b, _, err := Sheets(sheetTrial(t, "demo"), SheetOptions{Producer: "x", Date: "2026-05-04"})
	if err != nil {
		t.Fatal(err)
	}
	if !slices.EqualFunc(a, b, func(x, y File) bool { return x.Path == y.Path && string(x.Data) == string(y.Data) }) {
		t.Error("the bytes differ")
	}
}
