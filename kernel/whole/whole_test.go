package whole

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

func text(s string) func(io.Writer) error {
	return func(w io.Writer) error {
		_, err := io.WriteString(w, s)
		return err
	}
}

// names returns the names in a folder: nothing temporary may stay behind.
func names(t *testing.T, dir string) string {
	t.Helper()
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	var all []string
	for _, e := range entries {
		all = append(all, e.Name())
	}
	return strings.Join(all, " ")
}

func read(t *testing.T, path string) string {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func TestWriteCreatesAndReplaces(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "a.txt")
	for _, s := range []string{"first, and longer", "second"} {
		if err := Write(path, 0o644, text(s)); err != nil {
			t.Fatal(err)
		}
		if got := read(t, path); got != s {
			t.Errorf("the file holds %q, want %q", got, s)
		}
	}
	if got := names(t, dir); got != "a.txt" {
		t.Errorf("the folder holds %s", got)
	}
}

func TestWriteKeepsTheOldFileWhenFillingFails(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "a.txt")
	if err := Write(path, 0o644, text("old")); err != nil {
		t.Fatal(err)
	}
	stop := errors.New("stop")
	err := Write(path, 0o644, func(w io.Writer) error {
		io.WriteString(w, "half of the n")
		return stop
	})
	if !errors.Is(err, stop) {
		t.Errorf("error %v, want the one of fill", err)
	}
	if got := read(t, path); got != "old" {
		t.Errorf("the file holds %q", got)
	}
	if got := names(t, dir); got != "a.txt" {
		t.Errorf("the folder holds %s", got)
	}
}

func TestWriteKeepsPermissionsAndLinks(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("permissions and links differ there")
	}
	dir := t.TempDir()
	real, link := filepath.Join(dir, "real"), filepath.Join(dir, "link")
	if err := os.WriteFile(real, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink("real", link); err != nil {
		t.Fatal(err)
	}
	if err := Write(link, 0o644, text("new")); err != nil {
		t.Fatal(err)
	}
	if got := read(t, real); got != "new" {
		t.Errorf("the link's target holds %q", got)
	}
	info, err := os.Lstat(link)
	if err != nil || info.Mode().Type() != fs.ModeSymlink {
		t.Errorf("the link became %v (%v)", info.Mode(), err)
	}
	if info, _ := os.Stat(real); info.Mode().Perm() != 0o600 {
		t.Errorf("permissions became %v", info.Mode().Perm())
	}
}

func TestWriteAndCheckRefuseWhatIsNoFile(t *testing.T) {
	dir := t.TempDir()
	missing := filepath.Join(dir, "no", "a.txt")
	for name, f := range map[string]func(string) error{
		"Write": func(path string) error { return Write(path, 0o644, text("x")) },
		"Check": Check,
	} {
		if err := f(dir); err == nil || !strings.Contains(err.Error(), "no regular file") {
			t.Errorf("%s of a folder: %v", name, err)
		}
		if err := f(missing); !errors.Is(err, fs.ErrNotExist) || !strings.Contains(err.Error(), missing) {
			t.Errorf("%s in a missing folder: %v, want one that names %s", name, err, missing)
		}
	}
}

func TestCheckChangesNothing(t *testing.T) {
	dir := t.TempDir()
	if err := Check(filepath.Join(dir, "new.txt")); err != nil {
		t.Error(err)
	}
	if got := names(t, dir); got != "" {
		t.Errorf("the folder holds %s", got)
	}
}
