// Package folder is the only place that knows how a trial's files are read and
// written. Reading goes through os.Root or any fs.FS and keeps every file with its
// SHA-256, so that what a report was made of can ride inside it. Writing is a set of
// changes that happens as a whole or not at all, even when the program is killed.
package folder

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"sort"
	"sync"
)

// MaxFile is the greatest size in bytes of a file that is read, and MaxTotal that of
// all files of a folder together.
const (
	MaxFile  = 512 << 20
	MaxTotal = 1 << 30
)

// File is a file as it was read.
type File struct {
	Path   string // slash-separated, inside the folder
	SHA256 string // hex
	Data   []byte // not to be changed
}

// Hash is the SHA-256 of data in lower-case hex.
func Hash(data []byte) string {
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:])
}

// Folder is a trial folder. It is an fs.FS whose reads are recorded: a file read twice
// has the content of the first time, so that all stages see one state of the trial.
type Folder struct {
	// Step, if set, is called before every change of the disk with its name. Tests end
	// the program there.
	Step func(name string)

	fsys    fs.FS
	root    *os.Root          // nil: read only
	pending map[string]string // path → staged file of a set that was committed but not yet put in place

	mu    sync.Mutex
	files map[string]File
	total int
}

// Open opens a folder of the disk for reading and writing. Nothing outside it can be
// reached, also not through symbolic links. A set of changes that a killed program had
// committed but not finished is finished first; where that is not possible (a
// read-only disk, another writer at work) its files are read from where they wait.
func Open(dir string) (*Folder, error) {
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, err
	}
	f := &Folder{fsys: root.FS(), root: root, files: map[string]File{}}
	if err := f.recover(); err != nil {
		_ = root.Close() // the folder was only read
		return nil, err
	}
	return f, nil
}

// FromFS reads a trial from any file system; it cannot be written to.
func FromFS(fsys fs.FS) *Folder {
	return &Folder{fsys: fsys, files: map[string]File{}}
}

// Close gives the folder back. Files that were read stay usable.
func (f *Folder) Close() error {
	if f.root == nil {
		return nil
	}
	return f.root.Close()
}

// Read reads a file whole and records it. Its error wraps fs.ErrNotExist where there is
// none, and is a *TooLarge for a file over limit bytes or the limits of the package.
func (f *Folder) Read(name string, limit int64) (File, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	file, known := f.files[name]
	if !known {
		var err error
		if file, err = f.load(name, min(limit, MaxFile)); err != nil {
			return File{}, err
		}
		if f.total+len(file.Data) > MaxTotal {
			return File{}, &TooLarge{Path: name, Limit: MaxTotal}
		}
		f.total += len(file.Data)
		f.files[name] = file
	}
	if int64(len(file.Data)) > limit {
		return File{}, &TooLarge{Path: name, Limit: limit}
	}
	return file, nil
}

// TooLarge is the error of a file that exceeds a limit.
type TooLarge struct {
	Path  string
	Limit int64 // bytes
}

func (e *TooLarge) Error() string {
	if e.Limit >= 1<<20 {
		return fmt.Sprintf("%s: larger than %d MiB", e.Path, e.Limit>>20)
	}
	return fmt.Sprintf("%s: larger than %d bytes", e.Path, e.Limit)
}

// load reads a regular file without recording it.
func (f *Folder) load(name string, limit int64) (File, error) {
	if !fs.ValidPath(name) {
		return File{}, &fs.PathError{Op: "read", Path: name, Err: errors.New("not a path inside the trial folder")}
	}
	from := name
	if staged, ok := f.pending[name]; ok {
		if staged == "" {
			return File{}, &fs.PathError{Op: "read", Path: name, Err: fs.ErrNotExist}
		}
		if _, err := fs.Stat(f.fsys, staged); err == nil {
			from = staged
		}
	}
	// A pipe would block on opening, so what it is has to be known before.
	info, err := fs.Stat(f.fsys, from)
	if err != nil {
		return File{}, err
	}
	if !info.Mode().IsRegular() {
		return File{}, &fs.PathError{Op: "read", Path: name, Err: errors.New("not a regular file")}
	}
	if info.Size() > limit {
		return File{}, &TooLarge{Path: name, Limit: limit}
	}
	r, err := f.fsys.Open(from)
	if err != nil {
		return File{}, err
	}
	defer func() { _ = r.Close() }() // read only
	var b bytes.Buffer
	b.Grow(int(info.Size()) + bytes.MinRead)
	if _, err := b.ReadFrom(io.LimitReader(r, limit+1)); err != nil {
		return File{}, fmt.Errorf("read %s: %w", name, err)
	}
	if int64(b.Len()) > limit {
		return File{}, &TooLarge{Path: name, Limit: limit}
	}
	return File{Path: name, SHA256: Hash(b.Bytes()), Data: b.Bytes()}, nil
}

// Files lists every file that was read, sorted by path.
func (f *Folder) Files() []File {
	f.mu.Lock()
	defer f.mu.Unlock()
	list := make([]File, 0, len(f.files))
	for _, file := range f.files {
		list = append(list, file)
	}
	sort.Slice(list, func(i, j int) bool { return list[i].Path < list[j].Path })
	return list
}

// ReadFile is Read for users of io/fs.
func (f *Folder) ReadFile(name string) ([]byte, error) {
	file, err := f.Read(name, MaxFile)
	if err != nil {
		return nil, err
	}
	return bytes.Clone(file.Data), nil
}

// Open opens a file, which reads and records it, or a directory.
func (f *Folder) Open(name string) (fs.File, error) {
	info, err := fs.Stat(f.fsys, name)
	if err == nil && info.IsDir() {
		return f.fsys.Open(name)
	}
	file, err := f.Read(name, MaxFile)
	if err != nil {
		return nil, err
	}
	if info == nil { // it waits in the staging directory
		if info, err = fs.Stat(f.fsys, f.pending[name]); err != nil {
			return nil, err
		}
	}
	return &opened{Reader: bytes.NewReader(file.Data), info: info}, nil
}

// opened is a recorded file seen as an fs.File.
type opened struct {
	*bytes.Reader
	info fs.FileInfo
}

func (o *opened) Stat() (fs.FileInfo, error) { return o.info, nil }
func (o *opened) Close() error               { return nil }

// journal is the list of staged files of a set, kept on disk from the moment the set is
// committed until it is in place.
type journal struct {
	Format int
	Steps  []step
}

type step struct {
	Path   string
	Staged string // empty: the file is removed
	Once   bool   // the file must not exist before
}

// recover finishes the set of a killed program, or learns where its files wait.
func (f *Folder) recover() error {
	if _, err := f.readJournal(); errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	unlock, err := f.Lock()
	if err != nil {
		return f.overlay()
	}
	defer unlock()
	j, err := f.readJournal() // its owner may have finished meanwhile
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	if err := f.finish(j); err != nil {
		return f.overlay()
	}
	return nil
}

// overlay makes reads see a committed set that is not in place yet.
func (f *Folder) overlay() error {
	j, err := f.readJournal()
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	f.pending = map[string]string{}
	for _, s := range j.Steps {
		f.pending[s.Path] = s.Staged
	}
	return nil
}

func (f *Folder) readJournal() (journal, error) {
	var j journal
	data, err := fs.ReadFile(f.fsys, journalPath)
	if err != nil {
		return j, err
	}
	if err := json.Unmarshal(data, &j); err != nil || j.Format != 1 {
		return j, fmt.Errorf("%s: not a journal of this program; move the folder %s away", journalPath, staging)
	}
	for _, s := range j.Steps {
		if !fs.ValidPath(s.Path) || s.Staged != "" && path.Dir(s.Staged) != staging {
			return j, fmt.Errorf("%s: names a file outside the folder; move the folder %s away", journalPath, staging)
		}
	}
	return j, nil
}
