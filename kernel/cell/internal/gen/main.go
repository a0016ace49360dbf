// Command gen writes what the cell interpreter has to know about compiled packages: symbol tables for yaegi
// (kernel/cell/symbols) and, for the checker, completion and inspection, export data and doc comments
// (kernel/cell/exports). Run it with go generate, in kernel/cell:
//
//	gen std    the standard library, gonum and gonum/plot: changes with go.mod
//	gen own    the module's own packages: changes with their exported names and comments
//
// Equal inputs give equal bytes, so that CI can tell a stale file.
package main

import (
	"archive/zip"
	"bytes"
	"encoding/json"
	"fmt"
	"go/token"
	"go/types"
	"os"
	"os/exec"
	"path"
	"path/filepath"
	"slices"
	"sort"
	"strings"

	"github.com/traefik/yaegi/stdlib"
	"golang.org/x/tools/go/gcexportdata"

	"linewright/kernel/cell/internal/godoc"
)

// gonum lists the packages of gonum and gonum/plot that cells may import. Symbol tables cost binary size, so packages
// that no link study uses are left out.
var gonum = []string{
	"gonum.org/v1/gonum/cmplxs",
	"gonum.org/v1/gonum/diff/fd",
	"gonum.org/v1/gonum/dsp/fourier",
	"gonum.org/v1/gonum/dsp/window",
	"gonum.org/v1/gonum/floats",
	"gonum.org/v1/gonum/floats/scalar",
	"gonum.org/v1/gonum/integrate",
	"gonum.org/v1/gonum/integrate/quad",
	"gonum.org/v1/gonum/interp",
	"gonum.org/v1/gonum/mat",
	"gonum.org/v1/gonum/mathext",
	"gonum.org/v1/gonum/optimize",
	"gonum.org/v1/gonum/stat",
	"gonum.org/v1/gonum/stat/distuv",
	"gonum.org/v1/plot",
	"gonum.org/v1/plot/font",
	"gonum.org/v1/plot/palette",
	"gonum.org/v1/plot/palette/brewer",
	"gonum.org/v1/plot/palette/moreland",
	"gonum.org/v1/plot/plotter",
	"gonum.org/v1/plot/plotutil",
	"gonum.org/v1/plot/text",
	"gonum.org/v1/plot/vg",
	"gonum.org/v1/plot/vg/draw",
	"gonum.org/v1/plot/vg/vgimg",
	"gonum.org/v1/plot/vg/vgsvg",
}

// deprecated matches what gonum has replaced by the standard library.
const deprecated = "^Reverse$"

// unserved are packages of yaegi's table that make no sense in a cell, or that let it end the kernel unseen.
var unserved = []string{
	"github.com/", "expvar", "flag", "debug/", "go/importer", "log/syslog", "net/http/cgi", "net/http/fcgi", "net/http/pprof",
	"net/rpc", "os/signal", "runtime/pprof", "runtime/trace", "testing", "database/sql", "crypto/dsa", "crypto/tls", "crypto/x509",
}

// later are standard packages that yaegi's table does not know.
var later = []string{"iter"}

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "gen:", err)
		os.Exit(1)
	}
}

func run(args []string) error {
	if len(args) != 1 {
		return fmt.Errorf("got %d arguments; want one, std or own", len(args))
	}
	switch args[0] {
	case "std":
		if err := extract("gonum_org-*.go", gonum); err != nil {
			return err
		}
		std, err := export("exports/std.zip", append(standard(), gonum...))
		if err != nil {
			return err
		}
		return newer("symbols/newer.go", std)
	case "own":
		own, err := ownPackages()
		if err != nil {
			return err
		}
		if err := extract("linewright-*.go", own); err != nil {
			return err
		}
		_, err = export("exports/own.zip", own)
		return err
	}
	return fmt.Errorf("unknown part %q; want std or own", args[0])
}

// standard returns the import paths of the standard packages that yaegi has symbols for.
func standard() []string {
	paths := slices.Clone(later)
next:
	for key := range stdlib.Symbols {
		p := path.Dir(key)
		if key == "." || p == "." {
			continue
		}
		for _, u := range unserved {
			if p == strings.TrimSuffix(u, "/") || strings.HasPrefix(p, strings.TrimSuffix(u, "/")+"/") {
				continue next
			}
		}
		paths = append(paths, p)
	}
	return paths
}

// ownPackages returns the builtin packages and plotting.
func ownPackages() ([]string, error) {
	out, err := goTool("list", "linewright/builtins/...", "linewright/plotting")
	if err != nil {
		return nil, err
	}
	var own []string
	for _, p := range strings.Fields(string(out)) {
		if !strings.Contains(p, "/internal/") {
			own = append(own, p)
		}
	}
	return own, nil
}

// extract writes the symbol tables of the packages into symbols/ and removes those that match the pattern and are no
// longer wanted.
func extract(pattern string, paths []string) error {
	old, err := filepath.Glob(filepath.Join("symbols", pattern))
	if err != nil {
		return err
	}
	for _, f := range old {
		if err := os.Remove(f); err != nil {
			return err
		}
	}
	cmd := exec.Command("go", append([]string{"tool", "yaegi", "extract", "-name", "symbols", "-exclude", deprecated}, paths...)...)
	cmd.Dir, cmd.Stderr = "symbols", os.Stderr
	return cmd.Run()
}

type listed struct {
	ImportPath, Export, Dir string
	GoFiles                 []string
}

// export writes one archive with, for each package, its export data without positions (NAME.x) and its doc comments
// (NAME.json). It returns the packages.
func export(file string, paths []string) ([]*types.Package, error) {
	out, err := goTool(append([]string{"list", "-export", "-json=ImportPath,Export,Dir,GoFiles"}, paths...)...)
	if err != nil {
		return nil, err
	}
	var packages []listed
	for dec := json.NewDecoder(bytes.NewReader(out)); dec.More(); {
		var p listed
		if err := dec.Decode(&p); err != nil {
			return nil, err
		}
		packages = append(packages, p)
	}
	sort.Slice(packages, func(i, j int) bool { return packages[i].ImportPath < packages[j].ImportPath })

	var read []*types.Package
	var archive bytes.Buffer
	zw := zip.NewWriter(&archive)
	for _, p := range packages {
		pkg, data, err := exportData(p)
		if err != nil {
			return nil, err
		}
		read = append(read, pkg)
		docs, err := godoc.Read(p.Dir, p.ImportPath, p.GoFiles)
		if err != nil {
			return nil, err
		}
		text, err := json.Marshal(docs)
		if err != nil {
			return nil, err
		}
		for _, f := range []struct {
			name string
			data []byte
		}{{p.ImportPath + ".x", data}, {p.ImportPath + ".json", text}} {
			w, err := zw.Create(f.name)
			if err != nil {
				return nil, err
			}
			if _, err := w.Write(f.data); err != nil {
				return nil, err
			}
		}
	}
	if err := zw.Close(); err != nil {
		return nil, err
	}
	return read, os.WriteFile(file, archive.Bytes(), 0o644)
}

func exportData(p listed) (*types.Package, []byte, error) {
	f, err := os.Open(p.Export)
	if err != nil {
		return nil, nil, err
	}
	defer f.Close()
	//lint:ignore SA1019 the build cache holds archives until Go 1.29
	r, err := gcexportdata.NewReader(f)
	if err != nil {
		return nil, nil, fmt.Errorf("%s: %w", p.ImportPath, err)
	}
	pkg, err := gcexportdata.Read(r, token.NewFileSet(), map[string]*types.Package{}, p.ImportPath)
	if err != nil {
		return nil, nil, fmt.Errorf("%s: %w", p.ImportPath, err)
	}
	var out bytes.Buffer
	// Without a file set no positions are written: they would name this machine's folders and change with every line.
	if err := gcexportdata.Write(&out, nil, pkg); err != nil {
		return nil, nil, fmt.Errorf("%s: %w", p.ImportPath, err)
	}
	return pkg, out.Bytes(), nil
}

func goTool(args ...string) ([]byte, error) {
	cmd := exec.Command("go", args...)
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		return nil, fmt.Errorf("go %s: %w", args[0], err)
	}
	return out, nil
}
