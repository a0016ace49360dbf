package install

import (
	"errors"
	"os"
	"path/filepath"
	"runtime"
)

// system is what the places depend on.
type system struct {
	goos   string
	getenv func(string) string
	home   func() (string, error)
}

func here() system { return system{runtime.GOOS, os.Getenv, os.UserHomeDir} }

// userData returns the user's Jupyter data folder by Jupyter's rules.
func (s system) userData() (string, error) {
	if dir := s.getenv("JUPYTER_DATA_DIR"); dir != "" {
		return dir, nil
	}
	if s.goos == "windows" {
		if dir := s.getenv("APPDATA"); dir != "" {
			return filepath.Join(dir, "jupyter"), nil
		}
	} else if dir := s.getenv("XDG_DATA_HOME"); dir != "" && s.goos != "darwin" {
		return filepath.Join(dir, "jupyter"), nil
	}
	home, err := s.home()
	if err != nil {
		return "", errors.New("install: no home folder is known, so there is no place for this user; set JUPYTER_DATA_DIR or give --prefix DIR")
	}
	switch s.goos {
	case "darwin":
		return filepath.Join(home, "Library", "Jupyter"), nil
	case "windows":
		return filepath.Join(home, ".jupyter", "data"), nil
	}
	return filepath.Join(home, ".local", "share", "jupyter"), nil
}

// data returns every data folder that Jupyter searches without the help of a Python environment, in its order.
func (s system) data() []string {
	var dirs []string
	for _, dir := range filepath.SplitList(s.getenv("JUPYTER_PATH")) {
		if dir != "" {
			dirs = append(dirs, dir)
		}
	}
	if dir, err := s.userData(); err == nil {
		dirs = append(dirs, dir)
	}
	if s.goos == "windows" {
		if dir := s.getenv("PROGRAMDATA"); dir != "" {
			dirs = append(dirs, filepath.Join(dir, "jupyter"))
		}
		return dirs
	}
	return append(dirs, "/usr/local/share/jupyter", "/usr/share/jupyter")
}

// kernelspec returns the kernelspec's folder below a prefix, or for the user where prefix is empty.
func (s system) kernelspec(prefix string) (string, error) {
	if prefix != "" {
		return filepath.Abs(filepath.Join(prefix, "share", "jupyter", "kernels", Name))
	}
	data, err := s.userData()
	if err != nil {
		return "", err
	}
	return filepath.Abs(filepath.Join(data, "kernels", Name))
}
