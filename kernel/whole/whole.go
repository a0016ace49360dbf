// Package whole writes files that appear whole or not at all: a reader, also after a crash, sees the old contents or
// the new ones and never a part.
package whole

import (
	"crypto/rand"
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
)

// Write replaces the file at path by what fill writes. An existing file keeps its permissions and a symbolic link
// stays a link; a new file has perm less the umask. Where something fails, also in fill, path is as it was before.
func Write(path string, perm fs.FileMode, fill func(io.Writer) error) (err error) {
	f, path, old, err := create(path, perm)
	if err != nil {
		return err
	}
	temp := f.Name()
	defer func() {
		if err != nil {
			f.Close() // a second Close is harmless
			os.Remove(temp)
		}
	}()
	if err := fill(f); err != nil {
		return err
	}
	if old != nil {
		if err := f.Chmod(old.Mode().Perm()); err != nil {
			return err
		}
	}
	if err := f.Sync(); err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	return replace(temp, path)
}

// Check returns the error with which [Write] would fail now, for who would rather know before long work.
func Check(path string) error {
	f, _, _, err := create(path, 0o600)
	if err != nil {
		return err
	}
	f.Close()
	return os.Remove(f.Name())
}

// create opens the temporary file that is to replace the one at path; target is path with its links followed, and old
// describes what is there, or is nil.
func create(path string, perm fs.FileMode) (f *os.File, target string, old fs.FileInfo, err error) {
	target = path
	if end, err := filepath.EvalSymlinks(path); err == nil {
		target = end
	}
	old, err = os.Stat(target)
	switch {
	case err == nil && !old.Mode().IsRegular():
		return nil, "", nil, &fs.PathError{Op: "replace", Path: path, Err: errors.New("it is no regular file")}
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return nil, "", nil, err
	}
	// The temporary file stands in the same folder because a rename is atomic only within one file system.
	temp := filepath.Join(filepath.Dir(target), "."+filepath.Base(target)+"."+rand.Text()[:8])
	f, err = os.OpenFile(temp, os.O_WRONLY|os.O_CREATE|os.O_EXCL, perm)
	if err != nil {
		var p *fs.PathError
		if errors.As(err, &p) {
			p.Path = path // the name that the caller knows
		}
		return nil, "", nil, err
	}
	return f, target, old, nil
}

// replace renames temp to path. Where the system does not let go of a file in use, such as a running program on
// Windows, that file is moved aside first and removed if it can be.
func replace(temp, path string) error {
	first := os.Rename(temp, path)
	if first == nil {
		return nil
	}
	aside := temp + ".old"
	if os.Rename(path, aside) != nil {
		return first
	}
	if err := os.Rename(temp, path); err != nil {
		os.Rename(aside, path)
		return err
	}
	os.Remove(aside)
	return nil
}
