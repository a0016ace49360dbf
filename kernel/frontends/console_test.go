package frontends

import (
	"fmt"
	"os/exec"
	"strings"
	"testing"
	"time"
)

// TestConsole runs cells in the terminal console and reads them off its screen: text, the text picture of a figure, an
// error, a slot, a question.
func TestConsole(t *testing.T) {
	tmux := need(t, "tmux")
	console := need(t, "jupyter-console")
	session := fmt.Sprintf("linewright-%d", time.Now().UnixNano())
	args := []string{"-L", session, "-f", "/dev/null", "new-session", "-d", "-s", session, "-x", "110", "-y", "50",
		console + " --kernel linewright" +
			" --ZMQTerminalInteractiveShell.kernel_is_complete_timeout=30" + // else it gives up after 1 s and wants a blank line from then on
			" --ZMQTerminalInteractiveShell.image_handler=None"} // else it opens each figure in an image viewer as well
	cmd := exec.Command(tmux, args...)
	cmd.Env = append(installed, "TERM=xterm-256color", "LC_ALL=C.UTF-8")
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("tmux: %v\n%s", err, out)
	}
	t.Cleanup(func() {
		exec.Command(tmux, "-L", session, "kill-server").Run()
		noKernelLeft(t)
	})
	screen := func() string {
		out, _ := exec.Command(tmux, "-L", session, "capture-pane", "-p", "-t", session).Output()
		return string(out)
	}
	wait := func(text string) {
		t.Helper()
		for range 300 {
			if strings.Contains(screen(), text) {
				return
			}
			time.Sleep(100 * time.Millisecond)
		}
		t.Fatalf("%q did not appear:\n%s", text, screen())
	}
	enter := func(line string) {
		t.Helper()
		if err := exec.Command(tmux, "-L", session, "send-keys", "-t", session, "-l", line).Run(); err != nil {
			t.Fatal(err)
		}
		if err := exec.Command(tmux, "-L", session, "send-keys", "-t", session, "Enter").Run(); err != nil {
			t.Fatal(err)
		}
	}
	wait("In [1]:")
	enter(`fmt.Println("levels", linecode.AMI().Levels())`)
	wait("levels [-1 0 1]")
	wait("In [2]:")
	enter(`p, err := spectrum.Exact(linecode.AMI(), pulse.Train{SymbolRate: 1e6})`)
	wait("In [3]:")
	enter(`plotting.Spectrum(p)`)
	wait("MHz") // the picture's frequency axis
	if s := screen(); !strings.Contains(s, "AMI") {
		t.Errorf("the picture does not name its code:\n%s", s)
	}
	wait("In [4]:")
	enter(`uint8(1) + "x"`)
	wait("mismatched types")
	wait("In [5]:")
	enter(`page.Slot("best").Set("AMI for now")`)
	wait("\nAMI for now")
	wait("In [6]:")
	enter(`fmt.Println("chosen:", page.Ask("candidate? "))`)
	wait("\ncandidate?")
	enter("HDB3")
	wait("\nchosen: HDB3")
	t.Log("\n" + screen())
}
