package main

import (
	"bytes"
	"path/filepath"
	"strings"
	"testing"
)

// BenchmarkDemoReport is the demo's whole report but for the start of a process.
func BenchmarkDemoReport(b *testing.B) {
	dir := filepath.Join(b.TempDir(), "hollowmere")
	for b.Loop() {
		var out, errs bytes.Buffer
		if code := run([]string{"demo", dir}, strings.NewReader(""), &out, &errs); code != 0 {
			b.Fatalf("exit %d: %s", code, errs.String())
		}
	}
}

// BenchmarkCheck is a check of the demo.
func BenchmarkCheck(b *testing.B) {
	for b.Loop() {
		var out, errs bytes.Buffer
		if code := run([]string{"check", "../../templates/demo"}, strings.NewReader(""), &out, &errs); code != 0 {
			b.Fatalf("exit %d: %s", code, errs.String())
		}
	}
}
