package folder

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"strings"
	"sync"
)

// The staging directory holds new files until all of them are complete on the disk.
const (
	staging     = ".penwright"
	journalPath = staging + "/journal"
)

// ErrLocked says that another program is writing to the folder.
var ErrLocked = errors.New("another penwright is writing to this folder")

// ErrReadOnly says that the folder came from a file system that cannot be written to.
var ErrReadOnly = errors.New("the folder cannot be written to")

// How tells what a change does with its file.
type How int

// What a change does.
const (
	Replace How = iota // the file is new or takes the place of the old
	Create             // the file is a record: it must not exist, and is never overwritten
	Append             // Data is added at the end of the record; what stands there stays
	Remove             // the file goes; none is no error
)

// Change is one file of a set of changes.
type Change struct {
	Path string
	How  How
	Data []byte
	// Old, if not empty, is the SHA-256 that the file must have for Replace and Append,
	// so that nothing written by somebody else meanwhile is lost.
	Old string
}

// Apply makes all changes or none: killed at any moment, the folder is the old one or,
// when opened the next time, the new one. Its error wraps fs.ErrExist where a record to
// be created exists, and ErrLocked while somebody else writes.
//
// All new files are written and flushed to the staging directory; renaming the journal
// into place commits them; then each is renamed to its name, which can be repeated.
func (f *Folder) Apply(changes ...Change) error {
	if len(changes) == 0 {
		return nil
	}
	unlock, err := f.Lock()
	if err != nil {
		return err
	}
	defer unlock()
	if j, err := f.readJournal(); err == nil {
		if err := f.finish(j); err != nil {
			return err
		}
	} else if !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f.pending = nil
	j, err := f.stage(changes)
	if err != nil {
		_ = f.root.RemoveAll(staging) // the error matters more; the next writer clears up
		return err
	}
	if err := f.commit(j); err != nil {
		return err
	}
	f.mu.Lock()
	defer f.mu.Unlock()
	for _, c := range changes {
		f.total -= len(f.files[c.Path].Data)
		delete(f.files, c.Path)
	}
	return nil
}

// stage checks the changes and writes the new files beside the old ones.
func (f *Folder) stage(changes []Change) (journal, error) {
	j := journal{Format: 1}
	f.step("clear")
	if err := f.root.RemoveAll(staging); err != nil {
		return j, err
	}
	f.step("make staging directory")
	if err := f.root.Mkdir(staging, 0o755); err != nil {
		return j, err
	}
	seen := map[string]bool{}
	for i, c := range changes {
		if !fs.ValidPath(c.Path) || c.Path == "." || c.Path == staging || strings.HasPrefix(c.Path, staging+"/") {
			return j, &fs.PathError{Op: "write", Path: c.Path, Err: errors.New("not a path inside the trial folder")}
		}
		if seen[c.Path] {
			panic("folder: two changes of one file")
		}
		seen[c.Path] = true
		data := c.Data
		old, err := f.load(c.Path, MaxFile)
		switch {
		case err == nil && c.How == Create:
			return j, &fs.PathError{Op: "create", Path: c.Path, Err: fs.ErrExist}
		case err == nil && c.Old != "" && c.Old != old.SHA256:
			return j, fmt.Errorf("write %s: the file was changed meanwhile", c.Path)
		case err == nil && c.How == Append:
			data = append(old.Data[:len(old.Data):len(old.Data)], c.Data...)
		case errors.Is(err, fs.ErrNotExist) && c.Old != "":
			return j, fmt.Errorf("write %s: the file was removed meanwhile", c.Path)
		case err != nil && !errors.Is(err, fs.ErrNotExist):
			return j, err
		}
		s := step{Path: c.Path, Once: c.How == Create || c.How == Append && err != nil}
		if c.How != Remove {
			s.Staged = fmt.Sprintf("%s/%d", staging, i)
			if err := f.write(s.Staged, data); err != nil {
				return j, err
			}
		}
		j.Steps = append(j.Steps, s)
	}
	if err := f.flush(j); err != nil {
		return j, err
	}
	return j, f.sync(staging)
}

// flush brings the staged files to the disk, several at a time: the disk takes many
// files together almost as quickly as one.
func (f *Folder) flush(j journal) error {
	const at = 16
	errs := make([]error, at)
	var wg sync.WaitGroup
	for k := range at {
		wg.Go(func() {
			for i := k; i < len(j.Steps); i += at {
				if s := j.Steps[i].Staged; s != "" && errs[k] == nil {
					errs[k] = f.flushFile(s)
				}
			}
		})
	}
	wg.Wait()
	return errors.Join(errs...)
}

func (f *Folder) flushFile(name string) error {
	w, err := f.root.OpenFile(name, os.O_WRONLY, 0)
	if err != nil {
		return err
	}
	return errors.Join(w.Sync(), w.Close())
}

// commit makes the staged set count and puts it in place.
func (f *Folder) commit(j journal) error {
	text, err := json.Marshal(j)
	if err != nil {
		return err
	}
	if err := f.write(journalPath+".new", text); err != nil {
		return err
	}
	if err := f.flushFile(journalPath + ".new"); err != nil {
		return err
	}
	f.step("commit")
	if err := f.root.Rename(journalPath+".new", journalPath); err != nil {
		return err
	}
	if err := f.sync(staging); err != nil {
		return err
	}
	if err := f.sync("."); err != nil {
		return err
	}
	return f.finish(j)
}

// finish puts the files of a committed set in place. It may be repeated after it was
// interrupted anywhere.
func (f *Folder) finish(j journal) error {
	for _, s := range j.Steps {
		f.step("place " + s.Path)
		if err := f.place(s); err != nil {
			return err
		}
	}
	// The journal goes only after the renames are on the disk.
	synced := map[string]bool{}
	for _, s := range j.Steps {
		dir := path.Dir(s.Path)
		if synced[dir] {
			continue
		}
		synced[dir] = true
		if err := f.sync(dir); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	f.step("remove journal")
	if err := f.root.Remove(journalPath); err != nil {
		return err
	}
	f.step("remove staging directory")
	if err := f.root.RemoveAll(staging); err != nil {
		return err
	}
	return f.sync(".")
}

func (f *Folder) place(s step) error {
	if s.Staged == "" {
		if err := f.root.Remove(s.Path); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		return nil
	}
	staged, err := f.root.Lstat(s.Staged)
	if errors.Is(err, fs.ErrNotExist) {
		return nil // done before an interruption
	}
	if err != nil {
		return err
	}
	if dir := path.Dir(s.Path); dir != "." {
		if err := f.root.MkdirAll(dir, 0o755); err != nil {
			return err
		}
	}
	if !s.Once {
		return f.root.Rename(s.Staged, s.Path)
	}
	err = f.root.Link(s.Staged, s.Path)
	if errors.Is(err, fs.ErrExist) {
		there, statErr := f.root.Lstat(s.Path)
		if statErr != nil || !os.SameFile(staged, there) {
			return &fs.PathError{Op: "create", Path: s.Path, Err: fs.ErrExist}
		}
		err = nil // linked before an interruption
	}
	if err != nil {
		// No hard links on this file system. The lock and the check before staging are
		// then what guards the record.
		if _, statErr := f.root.Lstat(s.Path); !errors.Is(statErr, fs.ErrNotExist) {
			return &fs.PathError{Op: "create", Path: s.Path, Err: fs.ErrExist}
		}
		return f.root.Rename(s.Staged, s.Path)
	}
	f.step("unlink " + s.Path)
	return f.root.Remove(s.Staged)
}

// write makes a new file; it is not flushed yet.
func (f *Folder) write(name string, data []byte) error {
	f.step("write " + name)
	w, err := f.root.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return err
	}
	half := len(data) / 2
	_, err = w.Write(data[:half])
	if err == nil {
		f.step("write rest of " + name)
		_, err = w.Write(data[half:])
	}
	return errors.Join(err, w.Close())
}

// sync flushes a directory, so that renames in it survive a power failure. Where the
// system cannot flush directories there is nothing to be done.
func (f *Folder) sync(dir string) error {
	d, err := f.root.Open(dir)
	if err != nil {
		return err
	}
	_ = d.Sync() // not supported everywhere
	return d.Close()
}

func (f *Folder) step(name string) {
	if f.Step != nil {
		f.Step(name)
	}
}
