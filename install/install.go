package install

import (
	"embed"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"linewright/kernel/whole"
)

// Name is the kernel's name, by which notebooks and front ends refer to it; DisplayName is what they show.
const (
	Name        = "linewright"
	DisplayName = "Linewright"
)

//go:embed logo-32x32.png logo-64x64.png logo-svg.svg
var logos embed.FS

// kernelJSON is the file that makes a folder a kernelspec.
const kernelJSON = "kernel.json"

// Spec is the content of kernel.json.
type Spec struct {
	Argv          []string `json:"argv"` // the program and its arguments; {connection_file} stands for the file's path
	DisplayName   string   `json:"display_name"`
	Language      string   `json:"language"`
	InterruptMode string   `json:"interrupt_mode"`
}

// Argv returns the command line that runs program as a kernel, with {connection_file} for the connection file.
func Argv(program string) []string { return []string{program, "serve", "{connection_file}"} }

// Options says where to register, and what.
type Options struct {
	Prefix string // registers below Prefix/share/jupyter; empty means for this user
	Binary string // the program to copy; empty means the running one
}

// Register writes the kernelspec and returns its folder. One that is there is replaced, also while it runs: running
// kernels go on with the program they were started from. Each file appears whole or not at all and kernel.json comes
// last, so front ends see the former kernel, or none, until the new one is complete.
func Register(o Options) (string, error) {
	dir, err := here().kernelspec(o.Prefix)
	if err != nil {
		return "", err
	}
	if o.Binary == "" {
		if o.Binary, err = os.Executable(); err != nil {
			return "", fmt.Errorf("install: the running program cannot tell where it is: %w", err)
		}
	}
	made, err := makeFolder(dir)
	if err == nil {
		if err = fill(dir, o.Binary); err != nil && made != "" {
			os.RemoveAll(made)
		}
	}
	if err != nil {
		return "", unwritable(dir, err)
	}
	return dir, nil
}

// fill writes the kernelspec's files into dir.
func fill(dir, binary string) error {
	program := filepath.Join(dir, Name)
	if filepath.Ext(binary) == ".exe" {
		program += ".exe"
	}
	if err := copyFile(program, binary); err != nil {
		return err
	}
	entries, err := logos.ReadDir(".")
	if err != nil {
		return err
	}
	for _, e := range entries {
		b, err := logos.ReadFile(e.Name())
		if err != nil {
			return err
		}
		if err := write(filepath.Join(dir, e.Name()), b); err != nil {
			return err
		}
	}
	spec, err := json.MarshalIndent(Spec{Argv(program), DisplayName, "go", "message"}, "", " ")
	if err != nil {
		return err
	}
	return write(filepath.Join(dir, kernelJSON), append(spec, '\n'))
}

func write(path string, b []byte) error {
	return whole.Write(path, 0o644, func(w io.Writer) error {
		_, err := w.Write(b)
		return err
	})
}

func copyFile(to, from string) error {
	src, err := os.Open(from)
	if err != nil {
		return err
	}
	defer src.Close()
	return whole.Write(to, 0o755, func(w io.Writer) error {
		_, err := io.Copy(w, src)
		return err
	})
}

// makeFolder makes dir with its parents and returns the topmost folder that was not there, or "".
func makeFolder(dir string) (made string, err error) {
	for d := dir; ; d = filepath.Dir(d) {
		if _, err := os.Lstat(d); !errors.Is(err, fs.ErrNotExist) {
			break
		}
		made = d
	}
	return made, os.MkdirAll(dir, 0o755)
}

// unwritable explains a failure to write below dir.
func unwritable(dir string, err error) error {
	cause := err
	var p *fs.PathError
	if errors.As(err, &p) {
		cause = p.Err
		if p.Path != dir {
			cause = fmt.Errorf("%s: %w", p.Path, p.Err)
		}
	}
	return fmt.Errorf("install: cannot register in %s: %w; give a place you may write to with --prefix DIR", dir, cause)
}

// Registration is one place where the kernel is registered.
type Registration struct {
	Dir     string // the kernelspec's folder
	Program string // what it starts
	Problem string // why it cannot start; empty if it can
}

// List returns the registrations in the order in which front ends look for them: those of this user and of the system,
// or the one below prefix where prefix is not empty. Kernelspecs inside Python environments are known to those alone.
func List(prefix string) ([]Registration, error) {
	s := here()
	var found []Registration
	if prefix != "" {
		dir, err := s.kernelspec(prefix)
		if err != nil {
			return nil, err
		}
		return appendSpec(found, dir), nil
	}
	for _, data := range s.data() {
		found = appendSpec(found, filepath.Join(data, "kernels", Name))
	}
	return found, nil
}

// appendSpec appends the registration in dir, if there is one.
func appendSpec(found []Registration, dir string) []Registration {
	r := Registration{Dir: dir}
	b, err := os.ReadFile(filepath.Join(dir, kernelJSON))
	if errors.Is(err, fs.ErrNotExist) {
		return found
	}
	var spec Spec
	if err == nil {
		err = json.Unmarshal(b, &spec)
	}
	switch {
	case err != nil:
		r.Problem = err.Error()
	case len(spec.Argv) == 0:
		r.Problem = kernelJSON + " has no argv"
	default:
		r.Program = spec.Argv[0]
		if _, err := os.Stat(r.Program); err != nil {
			r.Problem = fmt.Sprintf("the program %s is gone; install again", r.Program)
		}
	}
	return append(found, r)
}

// Unregister removes what [Register] made below prefix, or for this user where prefix is empty, and returns the folder
// that is gone. It is an error if nothing is registered there.
func Unregister(prefix string) (string, error) {
	dir, err := here().kernelspec(prefix)
	if err != nil {
		return "", err
	}
	// kernel.json first: a front end must not offer a kernel that is half removed.
	err = os.Remove(filepath.Join(dir, kernelJSON))
	if errors.Is(err, fs.ErrNotExist) {
		return "", fmt.Errorf("install: nothing is registered in %s; `linewright install --list` shows the places", dir)
	}
	if err == nil {
		err = os.RemoveAll(dir)
	}
	if err != nil {
		return "", fmt.Errorf("install: cannot remove %s: %w", dir, err)
	}
	return dir, nil
}
