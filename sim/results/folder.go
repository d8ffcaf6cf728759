package results

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// A folder is written under a hidden name beside the one that it will replace:
//
//	.NAME.new-123456   being written; its writer holds a lock on it
//	.NAME.old-123456   the replaced one, where the file system cannot exchange
//	                   two names in one go and has to be helped with two renames

// folder is a results folder while it is written.
type folder struct {
	dir  string   // where it will stand
	temp string   // where it is written
	lock *os.File // kept open: tells other runs that temp is not left over
}

func hiddenName(dir, mark string) string { return "." + filepath.Base(dir) + "." + mark + "-" }

// createFolder makes the hidden folder beside dir and clears away what killed runs
// left there.
func createFolder(dir string) (*folder, error) {
	dir, err := filepath.Abs(dir)
	if err != nil {
		return nil, fmt.Errorf("results folder: %w", err)
	}
	parent := filepath.Dir(dir)
	if st, err := os.Stat(dir); err == nil && !st.IsDir() {
		return nil, fmt.Errorf("results folder %s is a file: name another folder", dir)
	}
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return nil, fmt.Errorf("results folder: %w", err)
	}
	if err := clearStale(dir); err != nil {
		return nil, err
	}
	for range 100 {
		temp, err := os.MkdirTemp(parent, hiddenName(dir, "new"))
		if err != nil {
			return nil, fmt.Errorf("results folder: %w", err)
		}
		// MkdirTemp makes it private; results are to be read like any other files.
		if err := os.Chmod(temp, 0o755); err != nil {
			return nil, fmt.Errorf("results folder: %w", err)
		}
		lock, err := os.Open(temp)
		if err != nil {
			continue // another run took it for left over before it was locked
		}
		lockFolder(lock)
		mine, err1 := lock.Stat()
		there, err2 := os.Stat(temp)
		if err1 != nil || err2 != nil || !os.SameFile(mine, there) {
			lock.Close()
			continue
		}
		return &folder{dir, temp, lock}, nil
	}
	return nil, fmt.Errorf("results folder %s: other runs keep removing its temporary folder", dir)
}

// clearStale removes hidden folders that no running writer holds, and puts back an
// old folder that a run killed between two renames had set aside.
func clearStale(dir string) error {
	parent := filepath.Dir(dir)
	entries, err := os.ReadDir(parent)
	if err != nil {
		return fmt.Errorf("results folder: %w", err)
	}
	for _, e := range entries {
		path := filepath.Join(parent, e.Name())
		switch {
		case !e.IsDir():
		case strings.HasPrefix(e.Name(), hiddenName(dir, "old")):
			if _, err := os.Stat(dir); errors.Is(err, fs.ErrNotExist) {
				if err := os.Rename(path, dir); err != nil {
					return fmt.Errorf("put back the results that a killed run set aside: %w", err)
				}
				continue
			}
			if err := os.RemoveAll(path); err != nil {
				return fmt.Errorf("remove what a killed run left: %w", err)
			}
		case strings.HasPrefix(e.Name(), hiddenName(dir, "new")):
			if inUse(path) {
				continue
			}
			if err := os.RemoveAll(path); err != nil {
				return fmt.Errorf("remove what a killed run left: %w", err)
			}
		}
	}
	return nil
}

// abort removes the hidden folder.
func (f *folder) abort() error {
	f.lock.Close()
	if err := os.RemoveAll(f.temp); err != nil {
		return fmt.Errorf("remove temporary results: %w", err)
	}
	return nil
}

// exchange puts the written folder in the place of the old one.
func (f *folder) exchange() error {
	if err := f.lock.Sync(); err != nil && !errors.Is(err, errors.ErrUnsupported) && !notSyncable(err) {
		return fmt.Errorf("write the folder %s: %w", f.temp, err)
	}
	old := ""
	err := os.Rename(f.temp, f.dir)
	if err != nil {
		if old, err = f.swap(); err != nil {
			return fmt.Errorf("put the results in place: %w", err)
		}
	}
	f.lock.Close()
	if parent, err := os.Open(filepath.Dir(f.dir)); err == nil {
		parent.Sync() // best effort: not every file system can
		parent.Close()
	}
	if old != "" {
		if err := os.RemoveAll(old); err != nil {
			return fmt.Errorf("remove the old results: %w", err)
		}
	}
	return nil
}

// swap exchanges the new folder with an old one that is there, and returns where
// the old one is now. A failure leaves the old one in its place.
func (f *folder) swap() (old string, err error) {
	if err := exchangeNames(f.temp, f.dir); err == nil {
		return f.temp, nil
	}
	return f.setAside()
}

// setAside does the same with two renames; a run killed between them leaves the old
// folder under a hidden name, from where the next Create puts it back.
func (f *folder) setAside() (old string, err error) {
	mark := strings.TrimPrefix(filepath.Base(f.temp), hiddenName(f.dir, "new"))
	old = filepath.Join(filepath.Dir(f.dir), hiddenName(f.dir, "old")+mark)
	if err := os.Rename(f.dir, old); err != nil {
		return "", err
	}
	if err := os.Rename(f.temp, f.dir); err != nil {
		return "", errors.Join(err, os.Rename(old, f.dir))
	}
	return old, nil
}
