package main

import (
	"errors"
	"fmt"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"penwright/protocol/folder"
)

// killedStatus is the exit status of a process that killed itself.
const killedStatus = 9

// killed is a command for tests: penwright-killed N ARG… runs penwright and ends the
// process, without any of its deferred calls, before step N of what it writes.
func killed() {
	n, err := strconv.Atoi(os.Args[1])
	if err != nil {
		os.Exit(100)
	}
	a := &app{in: os.Stdin, out: os.Stdout, err: os.Stderr, width: 80, getenv: func(string) string { return "" },
		now: func() time.Time { return time.Date(2026, 3, 1, 0, 0, 0, 0, time.UTC) }}
	a.step = func(string) {
		if n--; n < 0 {
			os.Exit(killedStatus)
		}
	}
	os.Exit(a.run(os.Args[2:]))
}

// content lists the files of a folder with their text, but for what a writer stages.
func content(t *testing.T, dir string) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() || strings.Contains(path, "/.penwright") {
			return err
		}
		data, err := os.ReadFile(path)
		out[strings.TrimPrefix(path, dir+"/")] = string(data)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// Killed before any step of a write, a command leaves the folder as it was or as it
// should be, as whoever opens it next finds it, and can then be run again.
func TestKilledAtEachStep(t *testing.T) {
	if raced {
		t.Skip("no goroutines meet here")
	}
	allotted := t.TempDir()
	if err := os.CopyFS(allotted, os.DirFS("../../testdata/trials/split-plot")); err != nil {
		t.Fatal(err)
	}
	protocol, err := os.ReadFile(filepath.Join(allotted, "protocol.toml"))
	if err != nil {
		t.Fatal(err)
	}
	plan, _, found := strings.Cut(string(protocol), "\n[data]\n")
	if !found {
		t.Fatal("the protocol names no data")
	}
	if err := os.WriteFile(filepath.Join(allotted, "protocol.toml"), []byte(plan), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(filepath.Join(allotted, "data.csv")); err != nil {
		t.Fatal(err)
	}
	planned := t.TempDir()
	if err := os.WriteFile(filepath.Join(planned, "protocol.toml"), []byte(plan), 0o644); err != nil {
		t.Fatal(err)
	}
	for _, test := range []struct {
		name  string
		base  string
		args  []string // DIR stands for the folder
		least int      // steps
		rerun int      // after how many kills the command is run again
	}{
		{"draw", planned, []string{"draw", "DIR"}, 6, 1},
		{"redraw", allotted, []string{"draw", "DIR", "--redraw", "--why", "the sheets were lost"}, 8, 1},
		{"report", allotted, []string{"report", "DIR", "--only", "md,json"}, 6, 1},
		{"demo", t.TempDir(), []string{"demo", "DIR/farm"}, 12, 11},
	} {
		t.Run(test.name, func(t *testing.T) {
			t.Parallel()
			run := func(steps int) (dir string, code int) {
				dir = filepath.Join(t.TempDir(), "trial")
				if err := os.CopyFS(dir, os.DirFS(test.base)); err != nil {
					t.Fatal(err)
				}
				return dir, again(t, dir, steps, test.args)
			}
			old, _ := run(0)
			before := content(t, old)
			done, code := run(1 << 30)
			if code != 0 {
				t.Fatalf("not killed, exit status %d", code)
			}
			after := content(t, done)
			steps := 0
			stride := 1
			for ; ; steps += stride {
				dir, code := run(steps)
				if code == 0 {
					break
				}
				if code != killedStatus {
					t.Fatalf("before step %d: exit status %d", steps, code)
				}
				// Whoever opens the folders next finishes what was begun, or forgets it.
				for _, part := range []string{"", "report", "farm", "farm/report"} {
					if f, err := folder.Open(filepath.Join(dir, part)); err == nil {
						unlock, err := f.Lock()
						if err != nil {
							t.Fatalf("before step %d: the lock outlived its process: %v", steps, err)
						}
						unlock()
						_ = f.Close()
					}
				}
				got := content(t, dir)
				if !maps.Equal(got, before) && !maps.Equal(got, after) && !sameTrial(got, after) {
					t.Errorf("killed before step %d, the folder holds %v", steps, names(got))
				}
				if steps > 12 {
					stride = 150 // the many files of a report are written alike
				}
				if steps%test.rerun != 0 || test.name == "redraw" && maps.Equal(got, after) {
					continue // another draw would be a third
				}
				if code := again(t, dir, 1<<30, test.args); code != 0 && !(test.name == "draw" && maps.Equal(got, after)) {
					t.Errorf("after a kill before step %d: exit status %d", steps, code)
				}
				if got := content(t, dir); !maps.Equal(got, after) {
					t.Errorf("after a kill before step %d, a second run leaves %v", steps, names(got))
				}
			}
			if steps < test.least {
				t.Errorf("only %d steps", steps)
			}
		})
	}
}

// sameTrial tells whether a folder holds the demo's trial whole, without its report,
// which is a write of its own.
func sameTrial(got, after map[string]string) bool {
	trial := map[string]string{}
	for name, text := range after {
		if strings.HasPrefix(name, "farm/") && !strings.HasPrefix(name, "farm/report/") {
			trial[name] = text
		}
	}
	return len(trial) > 0 && maps.Equal(got, trial)
}

func names(files map[string]string) []string {
	var out []string
	for name, text := range files {
		out = append(out, fmt.Sprintf("%s (%d bytes)", name, len(text)))
	}
	return out
}

func again(t *testing.T, dir string, steps int, args []string) int {
	t.Helper()
	line := []string{strconv.Itoa(steps)}
	for _, arg := range args {
		line = append(line, strings.Replace(arg, "DIR", dir, 1))
	}
	out, err := exec.Command("penwright-killed", line...).CombinedOutput()
	var exit *exec.ExitError
	switch {
	case errors.As(err, &exit):
		if exit.ExitCode() == 2 || exit.ExitCode() == broken {
			t.Fatalf("%v: %s", line, out)
		}
		return exit.ExitCode()
	case err != nil:
		t.Fatal(err)
	}
	return 0
}

// Of several draws at once one is made, and the others say why they are not.
func TestDrawsAtOnce(t *testing.T) {
	dir := t.TempDir()
	plan := `protocol = 1

[trial]
code = "HM-26-B2"
title = "Two mashes for layers"
objective = "Does the coarse mash change egg mass?"

[[factor]]
name = "mash"
levels = ["fine", "coarse"]

[[unit]]
name = "pen"
count = 12
receives = ["mash"]

[[response]]
name = "egg_mass"
kind = "continuous"
role = "primary"
`
	if err := os.WriteFile(filepath.Join(dir, "protocol.toml"), []byte(plan), 0o644); err != nil {
		t.Fatal(err)
	}
	const many = 6
	codes := make(chan int, many)
	for range many {
		go func() {
			err := exec.Command("penwright", "draw", dir).Run()
			var exit *exec.ExitError
			switch {
			case err == nil:
				codes <- fine
			case errors.As(err, &exit):
				codes <- exit.ExitCode()
			default:
				codes <- -1
			}
		}()
	}
	made := 0
	for range many {
		switch code := <-codes; code {
		case fine:
			made++
		case findings, broken: // it exists already, or is being made
		default:
			t.Errorf("exit status %d", code)
		}
	}
	if made != 1 {
		t.Errorf("%d draws were made", made)
	}
	got := content(t, dir)
	if len(got) != 3 || strings.Count(got["allotment.toml"], "[[draw]]") != 1 {
		t.Errorf("the folder holds %v", names(got))
	}
	if out, err := exec.Command("penwright", "check", dir).CombinedOutput(); err != nil {
		t.Errorf("%v\n%s", err, out)
	}
}
