//go:build e2e

package pdf_test

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

// run runs a program that reads PDF, which must be there.
func run(t *testing.T, name string, args ...string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		t.Fatalf("%s is not on PATH: apt-get install poppler-utils qpdf", name)
	}
	out, err := exec.Command(path, args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s", name, args, err, out)
	}
	return string(out)
}

func TestOtherReaders(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "sample.pdf")
	if err := os.WriteFile(file, write(t, pagetest.Sample(), attachments()), 0o644); err != nil {
		t.Fatal(err)
	}
	if out := run(t, "qpdf", "--check", file); !strings.Contains(out, "No syntax or stream encoding errors found") {
		t.Error(out)
	}
	fonts := strings.Split(strings.TrimSpace(run(t, "pdffonts", file)), "\n")[2:]
	if len(fonts) < 5 {
		t.Errorf("%d fonts", len(fonts))
	}
	for _, line := range fonts {
		if f := strings.Fields(line); len(f) < 8 || f[4] != "yes" || f[5] != "yes" || f[6] != "yes" {
			t.Errorf("not embedded as a subset with Unicode: %s", line)
		}
	}
	text := run(t, "pdftotext", "-layout", file, "-")
	for _, want := range []string{"Dried yeast in diets", "t ha⁻¹", "kg m⁻³", "α ≤ 0.05", "−1.2 °C", "Table 1. Analysis of variance", "0.012544",
		"page 1 of 8", "Fingerprint 3f9c1d2e7ab0", "[U+6F22]", "Table 3, continued", "Daily gain, kg d⁻¹"} {
		if !strings.Contains(text, want) {
			t.Errorf("pdftotext does not find %q", want)
		}
	}
	info := run(t, "pdfinfo", file)
	for _, want := range []string{"Dried yeast in diets", "Hollowmere Research Farm", "Nov 18", "Pages:           8", "A4"} {
		if !strings.Contains(info, want) {
			t.Errorf("pdfinfo does not say %q:\n%s", want, info)
		}
	}
	saved := filepath.Join(dir, "saved")
	if err := os.Mkdir(saved, 0o755); err != nil {
		t.Fatal(err)
	}
	order := map[string]string{"data/gain (1).csv": "1", "données.csv": "2", "protocol.toml": "3"}
	for i, a := range attachments() {
		if list := run(t, "pdfdetach", "-list", file); !strings.Contains(list, "3 embedded files") {
			t.Error(list)
		}
		out := exec.Command("qpdf", file, "--show-attachment="+strings.ReplaceAll(a.Name, "é", "%C3%A9"))
		got, err := out.Output()
		if err != nil || !bytes.Equal(got, a.Data) {
			t.Errorf("qpdf gives %q as %d bytes, %v", a.Name, len(got), err)
		}
		name := filepath.Join(saved, fmt.Sprint(i))
		run(t, "pdfdetach", "-save", order[a.Name], "-o", name, file)
		if got, err := os.ReadFile(name); err != nil || !bytes.Equal(got, a.Data) {
			t.Errorf("pdfdetach gives %q as %d bytes, %v", a.Name, len(got), err)
		}
	}
}

func TestOtherReadersTakeRandomDocuments(t *testing.T) {
	dir := t.TempDir()
	for seed := range uint64(10) {
		file := filepath.Join(dir, fmt.Sprint(seed, ".pdf"))
		if err := os.WriteFile(file, write(t, pagetest.Random(seed), attachments()), 0o644); err != nil {
			t.Fatal(err)
		}
		run(t, "qpdf", "--check", file)
		if out := run(t, "pdftotext", file, filepath.Join(dir, "out.txt")); strings.TrimSpace(out) != "" {
			t.Errorf("seed %d: %s", seed, out)
		}
	}
}

// The rules of PDF/A-1b as PDFBox checks them, less those that A-3 lifts (transparency,
// embedded files, part number) and the CIDSet, which it makes optional.
func TestPDFA(t *testing.T) {
	const jars = "/usr/share/java/"
	var path []string
	for _, j := range []string{"pdfbox2", "preflight", "xmpbox", "fontbox2", "commons-logging", "commons-io", "javax.activation", "jaxb-api"} {
		if _, err := os.Stat(jars + j + ".jar"); err != nil {
			t.Fatal("PDFBox is not there: apt-get install libpdfbox2-java libcommons-logging-java libcommons-io-java libactivation-java libjaxb-api-java")
		}
		path = append(path, jars+j+".jar")
	}
	pictures, err := pdf.Pictures([]pdf.Picture{{Title: "Gain", Picture: pagetest.Curves(300, 200)}}, options)
	if err != nil {
		t.Fatal(err)
	}
	files := map[string][]byte{"sample": write(t, pagetest.Sample(), attachments()), "picture": pictures[0]}
	for name, d := range documents(t) {
		files[name] = write(t, d, attachments())
	}
	dir := t.TempDir()
	for name, data := range files {
		packed, file := filepath.Join(dir, "packed.pdf"), filepath.Join(dir, "plain.pdf")
		if err := os.WriteFile(packed, data, 0o644); err != nil {
			t.Fatal(err)
		}
		// A-1 knows neither streams of objects nor tables in streams.
		run(t, "qpdf", "--object-streams=disable", "--newline-before-endstream", "--stream-data=preserve", packed, file)
		// It ends with an error for any finding, so only what it says counts.
		out, _ := exec.Command("java", "-cp", strings.Join(path, ":"), "org.apache.pdfbox.preflight.Validator_A1b", file).CombinedOutput()
		lifted := 0
		for _, line := range strings.Split(string(out), "\n") {
			code, _, ok := strings.Cut(line, " : ")
			if !ok || strings.ContainsAny(code, " \t") {
				continue
			}
			switch code {
			case "4.1.2", "2.2.1", "1.2.9", "1.4.7", "7.11.2", "3.1.11":
				lifted++
			default:
				t.Errorf("%s: %s", name, line)
			}
		}
		if lifted == 0 {
			t.Errorf("%s: the validator found nothing, not even the number of the part:\n%s", name, out)
		}
	}
}

// Another reader sees the structure: the elements of every report, and the words of a
// short document, which it takes long to find.
func TestStructureInAnotherReader(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "report.pdf")
	for name, d := range documents(t) {
		data := write(t, d, attachments())
		if err := os.WriteFile(file, data, 0o644); err != nil {
			t.Fatal(err)
		}
		if out := run(t, "qpdf", "--check", file); !strings.Contains(out, "No syntax or stream encoding errors found") {
			t.Errorf("%s: %s", name, out)
		}
		if info := run(t, "pdfinfo", file); !strings.Contains(info, "Tagged:          yes") {
			t.Errorf("%s: %s", name, info)
		}
		seen := map[string]int{}
		for _, line := range strings.Split(run(t, "pdfinfo", "-struct", file), "\n") {
			kind, _, _ := strings.Cut(strings.TrimSpace(line), " ")
			seen[strings.TrimSuffix(kind, ":")]++
		}
		tree, _ := pdf.Read(data)
		want := map[string]int{}
		var count func(s *pdf.Struct)
		count = func(s *pdf.Struct) {
			want[s.Kind]++
			for _, k := range s.Kids {
				count(k)
			}
		}
		count(tree)
		for kind, n := range want {
			if seen[kind] != n {
				t.Errorf("%s: the other reader sees %d elements %s of %d", name, seen[kind], kind, n)
			}
		}
	}

	d := short()
	d.Blocks = d.Blocks[:12]
	if err := os.WriteFile(file, write(t, d, nil), 0o644); err != nil {
		t.Fatal(err)
	}
	// Words stand in quotes, over several lines where they do so on the page.
	var got, want strings.Builder
	open := false
	for _, line := range strings.Split(run(t, "pdfinfo", "-struct-text", file), "\n") {
		line = strings.TrimSpace(line)
		if !open {
			line, open = strings.CutPrefix(line, `"`)
		}
		if open {
			if strings.HasSuffix(line, `"`) {
				line, open = strings.TrimSuffix(line, `"`), false
			}
			got.WriteString(line)
		}
	}
	for _, l := range expected(d).out {
		want.WriteString(l.text)
	}
	if g, w := together(got.String()), together(want.String()); g != w {
		i := 0
		for i < min(len(g), len(w)) && g[i] == w[i] {
			i++
		}
		t.Errorf("at %d the other reader sees\n%q, not\n%q", i, g[max(i-40, 0):min(i+60, len(g))], w[max(i-40, 0):min(i+60, len(w))])
	}
}

// together is a text without its spaces: the reader puts some between pieces, and none
// between the lines of one.
// It does not look at what raised figures stand for.
func together(s string) string {
	raised := strings.NewReplacer("⁻", "−", "¹", "1", "²", "2", "³", "3", "\u2009", "")
	return raised.Replace(strings.Join(strings.Fields(s), ""))
}
