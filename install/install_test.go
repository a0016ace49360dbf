package install

import (
	"bytes"
	"encoding/json"
	"errors"
	"image/png"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// The places are those that Jupyter documents under "Common Directories and File Locations" for its data folder.
func TestUserData(t *testing.T) {
	home := func() (string, error) { return "/home/ann", nil }
	homeless := func() (string, error) { return "", errors.New("no home") }
	for _, c := range []struct {
		name, goos string
		env        map[string]string
		home       func() (string, error)
		want       string
	}{
		{"plain", "linux", nil, home, "/home/ann/.local/share/jupyter"},
		{"XDG", "linux", map[string]string{"XDG_DATA_HOME": "/x"}, home, "/x/jupyter"},
		{"Jupyter's own variable first", "linux", map[string]string{"XDG_DATA_HOME": "/x", "JUPYTER_DATA_DIR": "/j"}, home, "/j"},
		{"macOS", "darwin", map[string]string{"XDG_DATA_HOME": "/x"}, home, "/home/ann/Library/Jupyter"},
		{"Windows", "windows", map[string]string{"APPDATA": "/app"}, home, "/app/jupyter"},
		{"Windows without APPDATA", "windows", nil, home, "/home/ann/.jupyter/data"},
		{"no home but a variable", "linux", map[string]string{"JUPYTER_DATA_DIR": "/j"}, homeless, "/j"},
	} {
		s := system{c.goos, func(k string) string { return c.env[k] }, c.home}
		got, err := s.userData()
		if err != nil || filepath.ToSlash(got) != c.want {
			t.Errorf("%s: %s, %v; want %s", c.name, got, err, c.want)
		}
	}
	s := system{"linux", func(string) string { return "" }, homeless}
	if _, err := s.userData(); err == nil || !strings.Contains(err.Error(), "JUPYTER_DATA_DIR") {
		t.Errorf("no home: %v, want what to set", err)
	}
}

func TestSearchOrder(t *testing.T) {
	env := map[string]string{
		"JUPYTER_PATH":     strings.Join([]string{"/a", "", "/b"}, string(filepath.ListSeparator)),
		"JUPYTER_DATA_DIR": "/user",
		"PROGRAMDATA":      "/programs",
	}
	for goos, want := range map[string][]string{
		"linux":   {"/a", "/b", "/user", "/usr/local/share/jupyter", "/usr/share/jupyter"},
		"windows": {"/a", "/b", "/user", "/programs/jupyter"},
	} {
		got := system{goos, func(k string) string { return env[k] }, nil}.data()
		for i := range got {
			got[i] = filepath.ToSlash(got[i])
		}
		if diff := cmp.Diff(want, got); diff != "" {
			t.Errorf("%s:\n%s", goos, diff)
		}
	}
}

// program writes a file that stands for the kernel's binary.
func program(t *testing.T, content string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "built")
	if err := os.WriteFile(path, []byte(content), 0o755); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestRegisterListUnregister(t *testing.T) {
	prefix := filepath.Join(t.TempDir(), "opt")
	dir, err := Register(Options{Prefix: prefix, Binary: program(t, "one")})
	if err != nil {
		t.Fatal(err)
	}
	if want := filepath.Join(prefix, "share", "jupyter", "kernels", "linewright"); dir != want {
		t.Errorf("registered in %s, want %s", dir, want)
	}
	copied := filepath.Join(dir, "linewright")

	// The names of files and fields are those of Jupyter's "Kernel specs".
	b, err := os.ReadFile(filepath.Join(dir, "kernel.json"))
	if err != nil {
		t.Fatal(err)
	}
	var spec map[string]any
	if err := json.Unmarshal(b, &spec); err != nil {
		t.Fatal(err)
	}
	want := map[string]any{
		"argv":         []any{copied, "serve", "{connection_file}"},
		"display_name": "Linewright", "language": "go", "interrupt_mode": "message",
	}
	if diff := cmp.Diff(want, spec); diff != "" {
		t.Error(diff)
	}
	for name, size := range map[string]int{"logo-32x32.png": 32, "logo-64x64.png": 64} {
		b, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if c, err := png.DecodeConfig(bytes.NewReader(b)); err != nil || c.Width != size || c.Height != size {
			t.Errorf("%s is %d x %d (%v)", name, c.Width, c.Height, err)
		}
	}
	if b, err := os.ReadFile(filepath.Join(dir, "logo-svg.svg")); err != nil || !bytes.HasPrefix(b, []byte("<svg xmlns=")) {
		t.Errorf("logo-svg.svg: %.20q, %v", b, err)
	}

	found, err := List(prefix)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff([]Registration{{Dir: dir, Program: copied}}, found); diff != "" {
		t.Error(diff)
	}

	// A second registration replaces the first and leaves nothing beside it.
	if _, err := Register(Options{Prefix: prefix, Binary: program(t, "two")}); err != nil {
		t.Fatal(err)
	}
	if b, _ := os.ReadFile(copied); string(b) != "two" {
		t.Errorf("the program is %q after it was replaced", b)
	}
	if entries, _ := os.ReadDir(dir); len(entries) != 5 {
		t.Errorf("the folder holds %v", entries)
	}
	// It may also be renewed from its own copy.
	if _, err := Register(Options{Prefix: prefix, Binary: copied}); err != nil {
		t.Fatal(err)
	}
	if b, _ := os.ReadFile(copied); string(b) != "two" {
		t.Errorf("the program is %q after it was copied over itself", b)
	}

	if _, err := Unregister(prefix); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the folder is still there: %v", err)
	}
	if found, err := List(prefix); err != nil || len(found) != 0 {
		t.Errorf("still listed: %v, %v", found, err)
	}
	if _, err := Unregister(prefix); err == nil || !strings.Contains(err.Error(), "nothing is registered") {
		t.Errorf("a second time: %v", err)
	}
}

func TestListOfThisUser(t *testing.T) {
	user, shared := t.TempDir(), t.TempDir()
	t.Setenv("JUPYTER_DATA_DIR", user)
	t.Setenv("JUPYTER_PATH", shared)
	dir, err := Register(Options{Binary: program(t, "one")})
	if err != nil {
		t.Fatal(err)
	}
	if filepath.Dir(filepath.Dir(dir)) != user {
		t.Errorf("registered in %s, want it below %s", dir, user)
	}
	broken := filepath.Join(shared, "kernels", "linewright")
	if err := os.MkdirAll(broken, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(broken, "kernel.json"), []byte(`{"argv": ["/gone/linewright"]}`), 0o644); err != nil {
		t.Fatal(err)
	}
	found, err := List("")
	if err != nil {
		t.Fatal(err)
	}
	at := func(dir string) int {
		return slices.IndexFunc(found, func(r Registration) bool { return r.Dir == dir })
	}
	if i := at(broken); i != 0 || !strings.Contains(found[i].Problem, "/gone/linewright is gone") {
		t.Errorf("JUPYTER_PATH comes first and its program is gone; found %+v", found)
	}
	if i := at(dir); i != 1 || found[i].Problem != "" {
		t.Errorf("the user's place comes second; found %+v", found)
	}
}

func TestRegisterWhereNothingCanBeWritten(t *testing.T) {
	prefix := filepath.Join(t.TempDir(), "file")
	if err := os.WriteFile(prefix, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	_, err := Register(Options{Prefix: prefix, Binary: program(t, "one")})
	if err == nil || !strings.Contains(err.Error(), prefix) || !strings.Contains(err.Error(), "--prefix") {
		t.Errorf("%v, want the place and what to do", err)
	}
}

func TestRegisterLeavesNothingWhenTheProgramIsMissing(t *testing.T) {
	prefix := filepath.Join(t.TempDir(), "opt")
	if _, err := Register(Options{Prefix: prefix, Binary: filepath.Join(t.TempDir(), "missing")}); err == nil {
		t.Fatal("a missing program was registered")
	}
	if _, err := os.Stat(prefix); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("something is left below %s (%v)", prefix, err)
	}
}
