package frontends

import (
	"fmt"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"syscall"
	"testing"
	"time"
)

// token opens the test's notebook servers.
const token = "linewright-test"

// notebookServer starts the classic notebook on a folder and returns its address; the test's end stops it. The
// program is jupyter-notebook, or jupyter-nbclassic, the same pages on the newer server.
func notebookServer(t *testing.T, program, folder string) (url string) {
	t.Helper()
	program = need(t, program)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	port := l.Addr().(*net.TCPAddr).Port
	l.Close()
	app := "NotebookApp"
	if filepath.Base(program) == "jupyter-nbclassic" {
		app = "ServerApp"
	}
	cmd := exec.Command(program, "--no-browser", "--allow-root", "--ip=127.0.0.1", fmt.Sprintf("--port=%d", port),
		"--"+app+".token="+token, "--"+app+".port_retries=0", "--notebook-dir="+folder)
	cmd.Env = installed
	log, err := os.Create(filepath.Join(t.TempDir(), "server.log"))
	if err != nil {
		t.Fatal(err)
	}
	defer log.Close()
	cmd.Stdout, cmd.Stderr = log, log
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		cmd.Process.Signal(syscall.SIGTERM)
		done := make(chan struct{})
		go func() { cmd.Wait(); close(done) }()
		select {
		case <-done:
		case <-time.After(15 * time.Second):
			cmd.Process.Kill()
			<-done
		}
		noKernelLeft(t)
	})
	url = fmt.Sprintf("http://127.0.0.1:%d", port)
	for range 300 {
		if r, err := http.Get(url + "/api?token=" + token); err == nil {
			r.Body.Close()
			return url
		}
		time.Sleep(100 * time.Millisecond)
	}
	text, _ := os.ReadFile(log.Name())
	t.Fatalf("the notebook server did not answer:\n%s", text)
	return ""
}

// copyTo puts a copy of a file into a folder, under its own name.
func copyTo(t *testing.T, folder, path string) {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(folder, filepath.Base(path)), data, 0o644); err != nil {
		t.Fatal(err)
	}
}
