//go:build darwin || dragonfly || freebsd || linux || netbsd || openbsd

package results

import (
	"errors"
	"os"
	"syscall"
)

// lockFolder marks an open folder as in use until it is closed or its process
// ends. A file system without locks leaves it unmarked.
func lockFolder(f *os.File) {
	_ = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
}

// inUse tells whether a writer holds the folder. Where that cannot be known it is
// taken to be in use: a left-over folder does no harm, a removed one would.
func inUse(path string) bool {
	f, err := os.Open(path)
	if err != nil {
		return true
	}
	defer f.Close()
	return syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB) != nil
}

// notSyncable tells an error of a file system that cannot sync a folder.
func notSyncable(err error) bool { return errors.Is(err, syscall.EINVAL) }
