package frontends

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// packages are Debian's names of everything that these tests drive.
const packages = "apt-get install -y --no-install-recommends jupyter-notebook python3-nbclassic jupyter-console jupyter-qtconsole xvfb " +
	"jupyter-nbconvert pandoc poppler-utils python3-nbclient python3-nbformat python3-jupyter-kernel-test chromium tmux procps"

// python is Debian's own: another python3 may come first on PATH and lacks the packages.
const python = "/usr/bin/python3"

// need returns the path of a program, or skips the test, or fails it where front ends are required.
func need(t *testing.T, program string) string {
	t.Helper()
	path, err := exec.LookPath(program)
	if err != nil {
		missing(t, program)
	}
	return path
}

// needModule is need for a module of Debian's Python.
func needModule(t *testing.T, module string) {
	t.Helper()
	need(t, python)
	if exec.Command(python, "-c", "import "+module).Run() != nil {
		missing(t, "python3 module "+module)
	}
}

func missing(t *testing.T, what string) {
	t.Helper()
	absent(t, fmt.Sprintf("%s is not installed; on Debian: %s", what, packages))
}

// absent skips the test, or fails it where front ends are required.
func absent(t *testing.T, text string) {
	t.Helper()
	if os.Getenv("LINEWRIGHT_FRONTENDS") == "require" {
		t.Fatal(text)
	}
	t.Skip(text)
}

// binary is the command under test and installed its environment; TestMain fills both.
var (
	binary    string
	installed []string // environment in which every front end finds the kernel and nothing of the user's
)

func TestMain(m *testing.M) { os.Exit(runAll(m)) }

func runAll(m *testing.M) int {
	dir, err := os.MkdirTemp("", "linewright-frontends-")
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		return 1
	}
	defer os.RemoveAll(dir)
	binary = filepath.Join(dir, "linewright")
	if out, err := exec.Command("go", "build", "-o", binary, "linewright/kernel/linewright").CombinedOutput(); err != nil {
		fmt.Fprintf(os.Stderr, "building the command: %v\n%s", err, out)
		return 1
	}
	installed = os.Environ()
	for _, name := range []string{"DATA", "CONFIG", "RUNTIME"} {
		sub := filepath.Join(dir, strings.ToLower(name))
		if err := os.MkdirAll(sub, 0o700); err != nil {
			fmt.Fprintln(os.Stderr, err)
			return 1
		}
		installed = append(installed, "JUPYTER_"+name+"_DIR="+sub)
	}
	installed = append(installed, "JUPYTER_PATH=", "PYTHONDONTWRITEBYTECODE=1", "HOME="+dir)
	cmd := exec.Command(binary, "install", "--user")
	cmd.Env = installed
	if out, err := cmd.CombinedOutput(); err != nil {
		fmt.Fprintf(os.Stderr, "installing the kernel: %v\n%s", err, out)
		return 1
	}
	return m.Run()
}

// run runs a program in the installed environment and returns what it printed; a failure fails the test.
func run(t *testing.T, limit time.Duration, name string, args ...string) string {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), limit)
	defer cancel()
	cmd := exec.CommandContext(ctx, name, args...)
	cmd.Env = installed
	cmd.WaitDelay = 5 * time.Second
	var out bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &out
	if err := cmd.Run(); err != nil {
		t.Fatalf("%s %s: %v\n%s", name, strings.Join(args, " "), err, &out)
	}
	return out.String()
}

// kernels returns the command lines of kernels of this test that are running.
func kernels(t *testing.T) []string {
	t.Helper()
	out, _ := exec.Command("ps", "-eo", "args").Output()
	var found []string
	for line := range strings.Lines(string(out)) {
		if strings.Contains(line, filepath.Dir(binary)) && strings.Contains(line, " serve ") {
			found = append(found, strings.TrimSpace(line))
		}
	}
	return found
}

// noKernelLeft fails the test if a kernel outlives the front end that started it.
func noKernelLeft(t *testing.T) {
	t.Helper()
	var left []string
	for range 50 {
		if left = kernels(t); len(left) == 0 {
			return
		}
		time.Sleep(100 * time.Millisecond)
	}
	t.Errorf("kernels outlived their front end:\n%s", strings.Join(left, "\n"))
}

// notebooks returns every notebook of the project.
func notebooks(t *testing.T) []string {
	t.Helper()
	all, err := filepath.Glob("../../notebooks/*.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	var tracked []string
	for _, path := range all {
		if !strings.HasSuffix(path, "-run.ipynb") {
			tracked = append(tracked, path)
		}
	}
	if len(tracked) == 0 {
		t.Fatal("no notebooks found")
	}
	return tracked
}
