//go:build e2e

package main

import (
	"bytes"
	"flag"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

const readmeFolder = "../../testdata/readme"

// Page 1 of the demo's report, as the README shows it.
func TestREADMEPicture(t *testing.T) {
	dir := t.TempDir()
	var out, errs bytes.Buffer
	if code := run([]string{"demo", filepath.Join(dir, "hollowmere")}, strings.NewReader(""), &out, &errs); code != 0 {
		t.Fatalf("demo: exit %d: %s", code, errs.String())
	}
	report := filepath.Join(dir, "hollowmere", "report", "report.pdf")
	text, err := exec.Command("pdftotext", "-layout", "-f", "1", "-l", "1", report, "-").Output()
	if err != nil {
		t.Fatalf("pdftotext (package poppler-utils): %v", err)
	}
	kept := filepath.Join(readmeFolder, "page-1.txt")
	if f := flag.Lookup("update"); f != nil && f.Value.String() == "true" {
		if err := os.MkdirAll(readmeFolder, 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(kept, text, 0o644); err != nil {
			t.Fatal(err)
		}
		if err := exec.Command("pdftoppm", "-r", "80", "-f", "1", "-l", "1", "-png", "-singlefile", report, filepath.Join(readmeFolder, "page-1")).Run(); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(kept)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(text, want) {
		t.Errorf("page 1 has changed; remake the picture with -update\n--- kept\n%s\n--- now\n%s", want, text)
	}
}

// The protocol of the README checks clean, and its commands run.
func TestREADMEExamples(t *testing.T) {
	readme, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	t.Chdir(dir)
	toml := regexp.MustCompile("(?s)```toml\n(.*?)```").FindSubmatch(readme)
	if toml == nil {
		t.Fatal("the README holds no protocol")
	}
	if err := os.Mkdir("own", 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile("own/protocol.toml", toml[1], 0o644); err != nil {
		t.Fatal(err)
	}
	commands := [][]string{{"check", "own"}, {"draw", "own"}, {"report", "own"}}
	for _, m := range regexp.MustCompile(`go run \./cmd/penwright (.*)`).FindAllSubmatch(readme, -1) {
		commands = append(commands, strings.Fields(string(m[1])))
	}
	if len(commands) < 7 {
		t.Fatalf("only %d commands found", len(commands))
	}
	for _, args := range commands {
		var out, errs bytes.Buffer
		if code := run(args, strings.NewReader(""), &out, &errs); code != 0 {
			t.Errorf("penwright %s: exit %d\n%s%s", strings.Join(args, " "), code, out.String(), errs.String())
		}
	}
}
