//go:build !unix || aix || solaris

package folder

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
)

const lockPath = ".penwright-lock"

// Lock lets one program write to the folder until unlock is called. Its error is
// ErrLocked while another one holds it. A program that is killed leaves the lock file
// behind, which then has to be removed by hand.
func (f *Folder) Lock() (unlock func(), err error) {
	if f.root == nil {
		return nil, ErrReadOnly
	}
	lock, err := f.root.OpenFile(lockPath, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if errors.Is(err, fs.ErrExist) {
		return nil, fmt.Errorf("%w; if none is, remove %s", ErrLocked, lockPath)
	}
	if err != nil {
		return nil, err
	}
	return func() {
		_ = lock.Close()            // nothing was written
		_ = f.root.Remove(lockPath) // stays behind at worst, and the message says what to do
	}, nil
}
