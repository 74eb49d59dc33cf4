//go:build unix && !aix && !solaris

package folder

import (
	"errors"
	"fmt"
	"syscall"
)

// Lock lets one program write to the folder until unlock is called; it is released too
// when the program ends in any way. Its error is ErrLocked while another one holds it.
func (f *Folder) Lock() (unlock func(), err error) {
	if f.root == nil {
		return nil, ErrReadOnly
	}
	dir, err := f.root.Open(".")
	if err != nil {
		return nil, err
	}
	// The directory itself is locked: no lock file to leave behind.
	if err := syscall.Flock(int(dir.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		_ = dir.Close() // only locked
		if errors.Is(err, syscall.EWOULDBLOCK) {
			return nil, ErrLocked
		}
		return nil, fmt.Errorf("lock the folder: %w", err)
	}
	return func() {
		// Closing alone would leave the lock to a child that is just being started, which
		// holds a copy of every descriptor until its own program begins.
		_ = syscall.Flock(int(dir.Fd()), syscall.LOCK_UN)
		_ = dir.Close() // only locked
	}, nil
}
