package frontends

import (
	"bufio"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// TestQtConsole types into the desktop console on a screen of its own.
func TestQtConsole(t *testing.T) {
	needModule(t, "qtconsole.qtconsoleapp")
	shot := filepath.Join(t.TempDir(), "qtconsole.png")
	t.Log(run(t, time.Minute, "env", "DISPLAY="+screen(t), "QT_QPA_PLATFORM=xcb", python, "testdata/desktop.py", shot))
	data, err := os.ReadFile(shot)
	if err != nil {
		t.Fatal(err)
	}
	keep(t, "qtconsole.png", data)
	noKernelLeft(t)
}

// screen starts an X server without a screen to look at and returns its name; the test's end stops it.
func screen(t *testing.T) string {
	t.Helper()
	read, write, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	defer read.Close()
	cmd := exec.Command(need(t, "Xvfb"), "-displayfd", "3", "-screen", "0", "1280x1024x24", "-nolisten", "tcp")
	cmd.ExtraFiles = []*os.File{write}
	err = cmd.Start()
	write.Close()
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		cmd.Process.Kill()
		cmd.Wait()
	})
	number, err := bufio.NewReader(read).ReadString('\n') // written once clients can connect
	if err != nil {
		t.Fatalf("Xvfb named no display: %v", err)
	}
	return ":" + strings.TrimSpace(number)
}
