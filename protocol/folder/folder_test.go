package folder

import (
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"testing/fstest"
)

func open(t *testing.T, dir string) *Folder {
	t.Helper()
	f, err := Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = f.Close() })
	return f
}

func put(t *testing.T, dir, name, text string) {
	t.Helper()
	p := filepath.Join(dir, name)
	if err := os.MkdirAll(filepath.Dir(p), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(p, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}

// tree is the content of every file below dir, by path.
func tree(t *testing.T, dir string) map[string]string {
	t.Helper()
	m := map[string]string{}
	err := fs.WalkDir(os.DirFS(dir), ".", func(p string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		b, err := os.ReadFile(filepath.Join(dir, p))
		m[p] = string(b)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func TestReadRecords(t *testing.T) {
	dir := t.TempDir()
	put(t, dir, "b.csv", "abc")
	put(t, dir, "sub/a.md", "")
	f := open(t, dir)
	for _, name := range []string{"sub/a.md", "b.csv"} {
		if _, err := f.Read(name, MaxFile); err != nil {
			t.Fatal(err)
		}
	}
	put(t, dir, "b.csv", "changed behind the back")
	b, err := fs.ReadFile(f, "b.csv")
	if err != nil || string(b) != "abc" {
		t.Errorf("second read = %q, %v; want the first content", b, err)
	}
	got := f.Files()
	// SHA-256 of "abc": FIPS 180-4, example of NIST; of the empty text: widely published.
	want := []File{
		{Path: "b.csv", SHA256: "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"},
		{Path: "sub/a.md", SHA256: "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"},
	}
	if len(got) != len(want) {
		t.Fatalf("recorded %d files, want %d", len(got), len(want))
	}
	for i := range want {
		if got[i].Path != want[i].Path || got[i].SHA256 != want[i].SHA256 {
			t.Errorf("file %d = %s %s, want %s %s", i, got[i].Path, got[i].SHA256, want[i].Path, want[i].SHA256)
		}
	}
}

func TestFileSystemContract(t *testing.T) {
	dir := t.TempDir()
	put(t, dir, "protocol.toml", "protocol = 1\n")
	put(t, dir, "sub/roster.csv", "pen\n1\n")
	if err := fstest.TestFS(open(t, dir), "protocol.toml", "sub/roster.csv"); err != nil {
		t.Error(err)
	}
	m := fstest.MapFS{"protocol.toml": {Data: []byte("protocol = 1\n")}}
	if b, err := fs.ReadFile(FromFS(m), "protocol.toml"); err != nil || len(b) != 13 {
		t.Errorf("read from an fs.FS: %q, %v", b, err)
	}
	if err := FromFS(m).Apply(Change{Path: "x"}); !errors.Is(err, ErrReadOnly) {
		t.Errorf("write to an fs.FS: %v", err)
	}
}

func TestReadRefuses(t *testing.T) {
	outside := t.TempDir()
	put(t, outside, "secret", "s")
	dir := t.TempDir()
	put(t, dir, "large", strings.Repeat("x", 101))
	put(t, dir, "inside", "i")
	for name, target := range map[string]string{
		"out":     filepath.Join(outside, "secret"),
		"outdir":  outside,
		"up":      "../" + filepath.Base(outside) + "/secret",
		"in":      "inside",
		"dangles": "nowhere",
	} {
		if err := os.Symlink(target, filepath.Join(dir, name)); err != nil {
			t.Skip(err)
		}
	}
	if err := syscall.Mkfifo(filepath.Join(dir, "pipe"), 0o600); err != nil {
		t.Fatal(err)
	}
	f := open(t, dir)
	for _, name := range []string{"out", "outdir/secret", "up", "../x", "/etc/hostname", "a/../inside", "", ".", "pipe", "large", "dangles", "absent"} {
		if file, err := f.Read(name, 100); err == nil {
			t.Errorf("read %q gave %q, want an error", name, file.Data)
		}
	}
	if _, err := f.Read("in", 100); err != nil {
		t.Errorf("a link inside the folder: %v", err)
	}
	var large *TooLarge
	if _, err := f.Read("large", 100); !errors.As(err, &large) || large.Limit != 100 {
		t.Errorf("large file: %v", err)
	}
	if _, err := f.Read("absent", 100); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("absent file: %v", err)
	}
	if err := f.Apply(Change{Path: "outdir/new", Data: []byte("x")}); err == nil {
		t.Error("wrote through a link that leads outside")
	}
	if got := tree(t, outside); !maps.Equal(got, map[string]string{"secret": "s"}) {
		t.Errorf("outside is now %v", got)
	}
	if _, err := os.Lstat(filepath.Join(dir, staging)); !errors.Is(err, fs.ErrNotExist) {
		t.Error("the refused change was staged")
	}
}

func TestApply(t *testing.T) {
	dir := t.TempDir()
	put(t, dir, "record", "one\n")
	f := open(t, dir)
	old, err := f.Read("record", MaxFile)
	if err != nil {
		t.Fatal(err)
	}
	tests := []struct {
		name    string
		changes []Change
		want    error // nil: any error will do if fails
		fails   bool
	}{
		{name: "a record is not overwritten", changes: []Change{{Path: "new", Data: []byte("n")}, {Path: "record", How: Create, Data: []byte("x")}}, want: fs.ErrExist, fails: true},
		{name: "a change by somebody else is seen", changes: []Change{{Path: "record", Data: []byte("x"), Old: Hash([]byte("else"))}}, fails: true},
		{name: "a file that went is seen", changes: []Change{{Path: "gone", Data: []byte("x"), Old: old.SHA256}}, fails: true},
		{name: "outside", changes: []Change{{Path: "../x"}}, fails: true},
		{name: "the staging directory", changes: []Change{{Path: ".penwright/journal"}}, fails: true},
	}
	for _, test := range tests {
		err := f.Apply(test.changes...)
		if (err != nil) != test.fails || test.want != nil && !errors.Is(err, test.want) {
			t.Errorf("%s: %v", test.name, err)
		}
		if got := tree(t, dir); !maps.Equal(got, map[string]string{"record": "one\n"}) {
			t.Errorf("%s: the folder is now %v", test.name, got)
		}
	}
	err = f.Apply(
		Change{Path: "record", How: Append, Data: []byte("two\n"), Old: old.SHA256},
		Change{Path: "first", How: Append, Data: []byte("1")},
		Change{Path: "deep/er/file", Data: []byte("d")},
		Change{Path: "once", How: Create, Data: []byte("o")},
		Change{Path: "absent", How: Remove},
	)
	if err != nil {
		t.Fatal(err)
	}
	want := map[string]string{"record": "one\ntwo\n", "first": "1", "deep/er/file": "d", "once": "o"}
	if got := tree(t, dir); !maps.Equal(got, want) {
		t.Errorf("the folder is %v, want %v", got, want)
	}
	if file, err := f.Read("record", MaxFile); err != nil || string(file.Data) != "one\ntwo\n" {
		t.Errorf("read after write = %q, %v", file.Data, err)
	}
	if _, err := os.Stat(filepath.Join(dir, staging)); !errors.Is(err, fs.ErrNotExist) {
		t.Error("the staging directory was left behind")
	}
}

func TestOneWriter(t *testing.T) {
	dir := t.TempDir()
	a, b := open(t, dir), open(t, dir)
	unlock, err := a.Lock()
	if err != nil {
		t.Fatal(err)
	}
	if err := b.Apply(Change{Path: "x", Data: []byte("x")}); !errors.Is(err, ErrLocked) {
		t.Errorf("second writer: %v, want %v", err, ErrLocked)
	}
	unlock()
	if err := b.Apply(Change{Path: "x", Data: []byte("x")}); err != nil {
		t.Errorf("after the first writer ended: %v", err)
	}
}

// The set of a second draw with a report beside it: a record kept under a new name, one
// replaced, one appended to, outputs replaced, made and removed.
var (
	before = map[string]string{"allotment.csv": "pen,diet\n1,A\n", "allotment.toml": "[[draw]]\n", "out/old.svg": "o", "out/report.md": "r1"}
	set    = []Change{
		{Path: "allotment.1.csv", How: Create, Data: []byte("pen,diet\n1,A\n")},
		{Path: "allotment.csv", How: Replace, Data: []byte("pen,diet\n1,B\n")},
		{Path: "allotment.toml", How: Append, Data: []byte("[[draw]]\nwhy = \"x\"\n")},
		{Path: "out/report.md", Data: []byte("r2")},
		{Path: "out/figures/new.svg", Data: []byte("n")},
		{Path: "out/old.svg", How: Remove},
	}
	after = map[string]string{"allotment.csv": "pen,diet\n1,B\n", "allotment.1.csv": "pen,diet\n1,A\n",
		"allotment.toml": "[[draw]]\n[[draw]]\nwhy = \"x\"\n", "out/report.md": "r2", "out/figures/new.svg": "n"}
)

type killed struct{}

// applyUntil applies set and dies at step n; it reports whether that step was reached.
func applyUntil(f *Folder, n int) (died bool, err error) {
	defer func() {
		if r := recover(); r != nil {
			if _, ok := r.(killed); !ok {
				panic(r)
			}
			died = true
		}
	}()
	i := 0
	f.Step = func(string) {
		if i == n {
			panic(killed{})
		}
		i++
	}
	return false, f.Apply(set...)
}

func TestKilledAtEachStep(t *testing.T) {
	old, new := 0, 0
	for n := 0; ; n++ {
		dir := t.TempDir()
		for name, text := range before {
			put(t, dir, name, text)
		}
		died, err := applyUntil(open(t, dir), n)
		if err != nil {
			t.Fatal(err)
		}
		// As a reader that may not write sees it: through what waits in the folder.
		reading := &Folder{fsys: os.DirFS(dir), files: map[string]File{}}
		if err := reading.overlay(); err != nil {
			t.Fatal(err)
		}
		seen := map[string]string{}
		for _, name := range []string{"allotment.csv", "allotment.1.csv", "allotment.toml", "out/report.md", "out/figures/new.svg", "out/old.svg"} {
			if file, err := reading.Read(name, MaxFile); err == nil {
				seen[name] = string(file.Data)
			}
		}
		open(t, dir)
		got := tree(t, dir)
		for name := range got {
			if strings.HasPrefix(name, staging) {
				delete(got, name) // not committed; the next writer clears it up
			}
		}
		switch {
		case !maps.Equal(got, seen):
			t.Errorf("killed at step %d: a reader saw %v, the folder is %v", n, seen, got)
		case maps.Equal(got, before):
			old++
		case maps.Equal(got, after):
			new++
		default:
			t.Errorf("killed at step %d: the folder is %v, neither old nor new", n, got)
		}
		// And the next writer goes on from there.
		if err := open(t, dir).Apply(Change{Path: "next", Data: []byte("n")}); err != nil {
			t.Errorf("killed at step %d: the next write: %v", n, err)
		}
		if _, err := os.Stat(filepath.Join(dir, staging)); !errors.Is(err, fs.ErrNotExist) {
			t.Errorf("killed at step %d: the staging directory stays", n)
		}
		if !died {
			break
		}
	}
	if old < 5 || new < 5 {
		t.Errorf("%d kills left the old folder and %d the new; the steps were not all met", old, new)
	}
}

// TestKilledProcess ends a real process, whose deferred calls then do not run.
func TestKilledProcess(t *testing.T) {
	if dir := os.Getenv("PENWRIGHT_TEST_KILL_DIR"); dir != "" {
		f, err := Open(dir)
		if err != nil {
			os.Exit(1)
		}
		f.Step = func(name string) {
			if name == os.Getenv("PENWRIGHT_TEST_KILL_STEP") {
				os.Exit(9)
			}
		}
		if f.Apply(set...) != nil {
			os.Exit(2)
		}
		os.Exit(0)
	}
	for _, test := range []struct {
		step string
		want map[string]string
	}{
		{step: "write rest of .penwright/2", want: before},
		{step: "commit", want: before},
		{step: "place allotment.csv", want: after},
		{step: "unlink allotment.1.csv", want: after},
		{step: "remove journal", want: after},
	} {
		dir := t.TempDir()
		for name, text := range before {
			put(t, dir, name, text)
		}
		cmd := exec.Command(os.Args[0], "-test.run=^TestKilledProcess$")
		cmd.Env = append(os.Environ(), "PENWRIGHT_TEST_KILL_DIR="+dir, "PENWRIGHT_TEST_KILL_STEP="+test.step)
		var exit *exec.ExitError
		if err := cmd.Run(); !errors.As(err, &exit) || exit.ExitCode() != 9 {
			t.Fatalf("%s: the process was not killed: %v", test.step, err)
		}
		f := open(t, dir)
		unlock, err := f.Lock()
		if err != nil {
			t.Fatalf("%s: the lock outlived its process: %v", test.step, err)
		}
		unlock()
		got := tree(t, dir)
		maps.DeleteFunc(got, func(name, _ string) bool { return strings.HasPrefix(name, staging) })
		if !maps.Equal(got, test.want) {
			t.Errorf("killed at %s: the folder is %v", test.step, got)
		}
	}
}

func TestForeignJournal(t *testing.T) {
	for _, text := range []string{"{", `{"Format":2}`, `{"Format":1,"Steps":[{"Path":"../x","Staged":".penwright/0"}]}`, `{"Format":1,"Steps":[{"Path":"x","Staged":"protocol.toml"}]}`} {
		dir := t.TempDir()
		put(t, dir, "protocol.toml", "p")
		put(t, dir, journalPath, text)
		if f, err := Open(dir); err == nil {
			_ = f.Close()
			t.Errorf("journal %s was obeyed", text)
		}
		if got := tree(t, dir); len(got) != 2 {
			t.Errorf("journal %s changed the folder to %v", text, got)
		}
	}
}

func ExampleFolder_Apply() {
	dir, err := os.MkdirTemp("", "trial")
	if err != nil {
		fmt.Println(err)
		return
	}
	defer func() { _ = os.RemoveAll(dir) }()
	f, err := Open(dir)
	if err != nil {
		fmt.Println(err)
		return
	}
	record := Change{Path: "allotment.csv", How: Create, Data: []byte("pen,diet\n1,A\n")}
	fmt.Println(f.Apply(record))
	fmt.Println(errors.Is(f.Apply(record), fs.ErrExist))
	// Output:
	// <nil>
	// true
}
