// Package whole writes files that appear whole or not at all: a reader, also after a crash, sees the old contents or
// the new ones and never a part.
package whole

import (
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
)

// Write replaces the file at path by what fill writes. An existing file keeps its permissions and a symbolic link
// stays a link; a new file has perm less the umask. Where something fails, also in fill, path is as it was before.
func Write(path string, perm fs.FileMode, fill func(io.Writer) error) (err error) {
	if target, err := filepath.EvalSymlinks(path); err == nil {
		path = target
	}
	old, err := os.Stat(path)
	switch {
	case err == nil && !old.Mode().IsRegular():
		return fmt.Errorf("%s is no regular file and cannot be replaced", path)
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return err
	}
	// The temporary file stands in the same folder because a rename is atomic only within one file system.
	temp := filepath.Join(filepath.Dir(path), "."+filepath.Base(path)+"."+rand.Text()[:8])
	f, err := os.OpenFile(temp, os.O_WRONLY|os.O_CREATE|os.O_EXCL, perm)
	if err != nil {
		var p *fs.PathError
		if errors.As(err, &p) {
			p.Path = path // the name that the caller knows
		}
		return err
	}
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
