package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// on runs a command line on a terminal of its own, with a clock that goes a second
// forward whenever it is looked at.
func on(env map[string]string, args ...string) (code int, out, errs string) {
	var o, e bytes.Buffer
	now := time.Date(2026, 3, 1, 12, 0, 0, 0, time.UTC)
	a := &app{in: strings.NewReader(""), out: &o, err: &e, width: 80, terminal: true,
		getenv: func(k string) string { return env[k] },
		now:    func() time.Time { now = now.Add(700 * time.Millisecond); return now }}
	code = a.run(args)
	return code, o.String(), e.String()
}

// Messages are coloured on a terminal, unless the environment or the user forbids it.
func TestColour(t *testing.T) {
	for _, test := range []struct {
		env    map[string]string
		args   []string
		colour bool
	}{
		{nil, nil, true},
		{map[string]string{"NO_COLOR": "1"}, nil, false},
		{map[string]string{"NO_COLOR": ""}, nil, true}, // no-color.org: when present and not empty
		{nil, []string{"--color", "never"}, false},
		{map[string]string{"NO_COLOR": "1"}, []string{"--color", "always"}, true},
		{map[string]string{"NO_COLOR": "1"}, []string{"--color", "auto"}, false},
	} {
		dir := t.TempDir()
		if err := os.WriteFile(filepath.Join(dir, "protocol.toml"), []byte("protocol = 1\n\n[trail]\ncode = \"HM-1\"\n"), 0o644); err != nil {
			t.Fatal(err)
		}
		code, out, errs := on(test.env, append(test.args, "check", dir)...)
		if code != findings || strings.Contains(out+errs, "\x1b[") != test.colour {
			t.Errorf("%v %v: exit status %d\n%q%q", test.env, test.args, code, out, errs)
		}
	}
}

// What takes over a second shows how far it is, on a terminal only, and clears its line.
func TestProgress(t *testing.T) {
	const demo = "../../templates/demo"
	code, out, errs := on(nil, "analyze", demo, "--json")
	if code != fine || !strings.Contains(errs, "analysed 3 of 3 responses") || !strings.HasSuffix(errs, "\r\x1b[K") {
		t.Errorf("exit status %d, %q", code, errs)
	}
	if strings.Contains(out, "\x1b") {
		t.Errorf("the results are coloured: %q", out)
	}
	if code, _, errs := on(nil, "--quiet", "analyze", demo, "--json"); code != fine || errs != "" {
		t.Errorf("quiet: exit status %d, %q", code, errs)
	}
	var o, e bytes.Buffer
	if code := run([]string{"analyze", demo, "--json"}, strings.NewReader(""), &o, &e); code != fine || e.Len() > 0 {
		t.Errorf("no terminal: exit status %d, %q", code, e.String())
	}
}

// A fault of the program is said as one, with status 3, and not with a trace.
func TestFaultOfTheProgram(t *testing.T) {
	var o, e bytes.Buffer
	a := &app{in: strings.NewReader(""), out: &o, err: &e, width: 80, now: time.Now, getenv: func(string) string { panic("broken on purpose") }}
	if code := a.run([]string{"report", "../../templates/demo", "--out", t.TempDir()}); code != broken {
		t.Errorf("exit status %d", code)
	}
	if !strings.HasPrefix(e.String(), "penwright: a fault of the program: broken on purpose\n") || strings.Contains(e.String(), "goroutine") {
		t.Errorf("%q", e.String())
	}
}
