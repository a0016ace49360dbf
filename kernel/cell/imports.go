package cell

import (
	"archive/zip"
	"bytes"
	_ "embed"
	"encoding/json"
	"fmt"
	"go/token"
	"go/types"
	"io"
	"path"
	"slices"
	"strings"

	"golang.org/x/tools/go/gcexportdata"

	"linewright/kernel/cell/internal/godoc"
)

//go:embed exports/std.zip
var stdZip []byte

//go:embed exports/own.zip
var ownZip []byte

// library is the compiled packages that cells can import: their types, for the checker, and their doc comments.
// Interpreter.types guards it.
type library struct {
	files  map[string]*zip.File
	loaded map[string]*types.Package
	docs   map[string]godoc.Table
	paths  []string          // what can be imported, sorted
	own    map[string]string // "linecode" -> "linewright/builtins/linecode"
}

func newLibrary() (*library, error) {
	l := &library{files: map[string]*zip.File{}, loaded: map[string]*types.Package{"unsafe": types.Unsafe, compiledPath: compiledPackage()}, docs: map[string]godoc.Table{}, own: map[string]string{}}
	for _, data := range [][]byte{stdZip, ownZip} {
		r, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
		if err != nil {
			return nil, fmt.Errorf("cell: embedded export data: %w", err)
		}
		for _, f := range r.File {
			l.files[f.Name] = f
			if p, ok := strings.CutSuffix(f.Name, ".x"); ok {
				l.paths = append(l.paths, p)
				if strings.HasPrefix(p, "linewright/") {
					l.own[path.Base(p)] = p
				}
			}
		}
	}
	slices.Sort(l.paths)
	return l, nil
}

// resolve returns the full path of an import: "linecode" stands for "linewright/builtins/linecode".
func (l *library) resolve(path string) string {
	if p, ok := l.own[path]; ok {
		return p
	}
	return path
}

// named returns the shortest path of a package of that name, or "".
func (l *library) named(name string) string {
	best := ""
	for _, p := range l.paths {
		if path.Base(p) == name && (best == "" || len(p) < len(best)) {
			best = p
		}
	}
	return best
}

// Import implements types.Importer.
func (l *library) Import(path string) (*types.Package, error) {
	path = l.resolve(path)
	if p := l.loaded[path]; p != nil && p.Complete() {
		return p, nil
	}
	data, err := l.read(path + ".x")
	if err != nil {
		return nil, fmt.Errorf("package %q is not part of this kernel", path)
	}
	return gcexportdata.Read(bytes.NewReader(data), token.NewFileSet(), l.loaded, path)
}

// doc returns the comment of a name of a package ("Name", "Type.Method", "" for the package).
func (l *library) doc(path, name string) string {
	t, ok := l.docs[path]
	if !ok {
		if data, err := l.read(path + ".json"); err == nil {
			// The table was written by our own generator; a damaged one only means no comments.
			_ = json.Unmarshal(data, &t)
		}
		l.docs[path] = t
	}
	return t[name]
}

func (l *library) read(name string) ([]byte, error) {
	f := l.files[name]
	if f == nil {
		return nil, fmt.Errorf("no file %s", name)
	}
	r, err := f.Open()
	if err != nil {
		return nil, err
	}
	defer r.Close()
	return io.ReadAll(r)
}
